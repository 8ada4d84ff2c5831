/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The best length of a line and the stretches on which a single mode grows. In: a line. Out: the
 * length of fastest growth, refined; stretches. Calls track, point, alloc.
 * Proof: tests/test_track.c. */
#include "track/inside.h"

#include <math.h>
#include <stdlib.h>

#include "alloc.h"

/* The length is refined to this part of the line. */
static const double refined = 1e-4;
/* Golden section; its steps are bounded by the width it starts from. */
static const double golden = 0.3819660112501051; /* (3 - sqrt 5)/2 */

static double growth_of(const th_point *p)
{
    return p->count > 0 ? p->mode[0].omega_im : 0.0; /* fastest first */
}

static void note(th_track_best *out, double length, const th_point *p)
{
    if (!(growth_of(p) > out->omega_im))
        return;
    out->grows = true;
    out->length = length;
    out->omega_re = p->mode[0].omega_re;
    out->omega_im = p->mode[0].omega_im;
    out->omega_error = p->mode[0].omega_error;
}

/* Golden sections on [low, high], which holds the best point so far. */
static th_status refine(const th_track *t, double low, double high, const th_point *near,
                        th_track_best *out, th_error *err)
{
    const double wanted = refined * (t->options.to - t->options.from);
    double x[2] = {low + golden * (high - low), high - golden * (high - low)}, g[2] = {-1.0, -1.0};
    th_point point = {0};
    th_status st = TH_OK;

    while (high - low > wanted) {
        for (int i = 0; st == TH_OK && i < 2; i++) {
            if (g[i] >= 0.0)
                continue;
            st = th_track_answer(t, x[i], near, NULL, &point, err);
            g[i] = 0.0;
            if (st == TH_OK && point.state == TH_POINT_OK) {
                g[i] = growth_of(&point);
                note(out, x[i], &point);
            }
        }
        if (st != TH_OK)
            break;
        if (g[0] < g[1]) {
            low = x[0];
            x[0] = x[1];
            g[0] = g[1];
            x[1] = high - golden * (high - low);
            g[1] = -1.0;
        } else {
            high = x[1];
            x[1] = x[0];
            g[1] = g[0];
            x[0] = low + golden * (high - low);
            g[0] = -1.0;
        }
    }
    out->error = fmax(high - out->length, out->length - low);
    th_point_clear(&point);
    return st;
}

static bool single(const th_track_node *node)
{
    return th_track_answered(node) && node->point.count == 1;
}

/* The stretch of nodes first..last. A change lies between two nodes: the middle. */
static th_track_clean stretch(const th_track *t, int first, int last)
{
    const int before = th_track_next(t, first - 1, -1), after = th_track_next(t, last + 1, 1);
    const bool joined_below = before >= 0 && th_track_joined(t, before, first);
    const bool joined_above = after >= 0 && th_track_joined(t, last, after);
    th_track_clean clean = {.from = t->node[first].length,
                            .to = t->node[last].length,
                            .open_below = !joined_below,
                            .open_above = !joined_above};

    if (joined_below)
        clean.from = (t->node[before].length + t->node[first].length) / 2.0;
    if (joined_above)
        clean.to = (t->node[last].length + t->node[after].length) / 2.0;
    for (int i = first; i <= last; i++)
        if (th_track_answered(&t->node[i]) && t->node[i].mode[0].omega_im > clean.growth) {
            clean.growth = t->node[i].mode[0].omega_im;
            clean.fastest = t->node[i].length;
        }
    return clean;
}

/* Stretches; a first pass counts. */
static th_status find_clean(const th_track *t, th_track_best *out, th_error *err)
{
    for (int run = 0; run < 2; run++) {
        int count = 0;

        for (int i = th_track_next(t, 0, 1); i >= 0;) {
            int last = i, next;

            if (!single(&t->node[i])) {
                i = th_track_next(t, i + 1, 1);
                continue;
            }
            while ((next = th_track_next(t, last + 1, 1)) >= 0 && single(&t->node[next]) &&
                   th_track_joined(t, last, next))
                last = next;
            if (run == 1)
                out->clean[count] = stretch(t, i, last);
            count++;
            i = next;
        }
        out->clean_count = count;
        if (run == 0)
            out->clean = th_alloc((size_t)count, sizeof *out->clean);
        if (out->clean == NULL) {
            out->clean_count = 0;
            return th_fail(err, TH_ENOMEM, "track: %d stretches", count);
        }
    }
    return TH_OK;
}

th_status th_track_best_find(const th_track *track, th_track_best *out, th_error *err)
{
    const th_track *t = track;
    int best = -1, left, right;
    th_status st = TH_OK;

    if (t == NULL || out == NULL)
        return th_fail(err, TH_EINVAL, "track: want a line and a place for the result");
    *out = (th_track_best){0};
    for (int i = th_track_next(t, 0, 1); i >= 0; i = th_track_next(t, i + 1, 1))
        if (growth_of(&t->node[i].point) > out->omega_im) {
            note(out, t->node[i].length, &t->node[i].point);
            best = i;
        }
    if (best >= 0) {
        left = th_track_next(t, best - 1, -1);
        right = th_track_next(t, best + 1, 1);
        st = refine(t, t->node[left >= 0 ? left : best].length,
                    t->node[right >= 0 ? right : best].length, &t->node[best].point, out, err);
        out->at_end = (left < 0 || right < 0) && fabs(out->length - t->node[best].length) <=
                                                     refined * (t->options.to - t->options.from);
    }
    if (st == TH_OK)
        st = find_clean(t, out, err);
    if (st != TH_OK)
        th_track_best_clear(out);
    return st;
}

void th_track_best_clear(th_track_best *best)
{
    free(best->clean);
    *best = (th_track_best){0};
}
