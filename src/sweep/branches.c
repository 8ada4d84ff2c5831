/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Identity of modes along one axis of a sweep. In: the points of a line, in order. Out:
 * a branch number for each mode. Calls workspace.
 * Symbols: re, im frequency; dre, dim its last step. Proof: tests/test_sweep.c. */
#include "twinhorizon/sweep.h"

#include <gsl/gsl_heapsort.h>
#include <math.h>

#include "workspace.h"

typedef struct {
    bool turned; /* a last resort */
    double apart;
    int before, now;
} pairing;

/* Modes move fastest near zero: just after their birth, and where purely growing ones turn into
 * pairs, through zero as a square root. A mode slower than this many times the reach, or one that
 * turns, may go this many times as far; and a turn does not foretell the next step. */
static const double slow = 3.0, fast = 4.0;

static bool turns(const th_branches *line, size_t j, const th_point_mode *m)
{
    return (line->re[j] == 0.0) != (m->omega_re == 0.0);
}

/* How far a mode is from where a branch is expected; infinite when that is out of reach. */
static double distance(const th_branches *line, size_t j, const th_point_mode *m, double reach)
{
    const bool turned = turns(line, j, m);
    const double re = line->re[j] + (turned ? 0.0 : line->dre[j]);
    const double im = line->im[j] + (turned ? 0.0 : line->dim[j]);
    /* of a turn the oscillating one must be slow: it has just come from zero, or is about to go */
    const double size = turned && m->omega_re != 0.0 ? hypot(m->omega_re, m->omega_im)
                                                     : hypot(line->re[j], line->im[j]);
    const bool quick = size < slow * reach;
    const double apart = hypot(m->omega_re - re, m->omega_im - im);

    return apart <= (quick ? fast : 1.0) * reach ? apart : HUGE_VAL;
}

static int by_distance(const void *a, const void *b)
{
    const pairing *x = a, *y = b;

    if (x->turned != y->turned)
        return x->turned ? 1 : -1;
    if (x->apart != y->apart)
        return x->apart < y->apart ? -1 : 1;
    if (x->before != y->before)
        return x->before < y->before ? -1 : 1;
    return (x->now > y->now) - (x->now < y->now);
}

static void release(th_branches *line)
{
    th_give(line->workspace, line->branch);
    th_give(line->workspace, line->re);
    th_give(line->workspace, line->im);
    th_give(line->workspace, line->dre);
    th_give(line->workspace, line->dim);
}

void th_branches_clear(th_branches *line)
{
    release(line);
    *line = (th_branches){.workspace = line->workspace};
}

th_status th_branches_next(th_branches *line, const th_point *point, double reach, int *branch,
                           th_error *err)
{
    th_status st = TH_EBUG;
    const size_t n = (size_t)point->count, m = (size_t)line->count;
    th_workspace *const memory = line->workspace;
    th_branches next = {.workspace = memory, .count = point->count, .last = line->last};
    pairing *pair = th_take(memory, n * m, sizeof *pair);
    int *from =
        th_take(memory, n, sizeof *from); /* [n] 1 + index at the previous point, 0 when new */
    int *taken = th_take(memory, m, sizeof *taken);
    size_t pairs = 0;

    next.branch = th_take(memory, n, sizeof *next.branch);
    next.re = th_take(memory, n, sizeof *next.re);
    next.im = th_take(memory, n, sizeof *next.im);
    next.dre = th_take(memory, n, sizeof *next.dre);
    next.dim = th_take(memory, n, sizeof *next.dim);
    if (pair == NULL || from == NULL || taken == NULL || next.branch == NULL || next.re == NULL ||
        next.im == NULL || next.dre == NULL || next.dim == NULL) {
        st = th_fail(err, TH_ENOMEM, "sweep: branches of %d modes", point->count);
        goto done;
    }
    for (size_t j = 0; j < m; j++)
        for (size_t i = 0; i < n; i++) {
            const double apart = distance(line, j, &point->mode[i], reach);

            if (apart < HUGE_VAL)
                pair[pairs++] = (pairing){turns(line, j, &point->mode[i]), apart, (int)j, (int)i};
        }
    if (pairs > 0) /* in place, where qsort may ask for memory */
        gsl_heapsort(pair, pairs, sizeof *pair, by_distance);
    for (size_t k = 0; k < pairs; k++) {
        if (taken[pair[k].before] || from[pair[k].now] != 0)
            continue;
        taken[pair[k].before] = 1;
        from[pair[k].now] = pair[k].before + 1;
    }
    for (size_t i = 0; i < n; i++) {
        const int j = from[i] - 1;

        next.re[i] = point->mode[i].omega_re;
        next.im[i] = point->mode[i].omega_im;
        next.branch[i] = j >= 0 ? line->branch[j] : ++next.last;
        if (j >= 0 && !turns(line, (size_t)j, &point->mode[i])) { /* else 0, as it was made */
            next.dre[i] = next.re[i] - line->re[j];
            next.dim[i] = next.im[i] - line->im[j];
        }
        branch[i] = next.branch[i];
    }
    release(line);
    *line = next;
    next = (th_branches){.workspace = memory};
    st = TH_OK;
done:
    release(&next);
    th_give(memory, pair);
    th_give(memory, from);
    th_give(memory, taken);
    return st;
}
