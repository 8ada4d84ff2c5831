/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Modes from the Bogoliubov matrix. In: a flow. Out: th_solution.mode, unlabelled. Calls level,
 * spectrum, shape.
 * The dense eigenvalues of the base level are candidates; each is refined on the fine and the check
 * level and kept when the two agree. Above TH_ORDINARY_SIZE the candidates of open flows come from
 * the census. Symbols: omega frequency, theta angle of the complex scaling. Proof:
 * tests/test_modes.c. */
#include "modes/solver.h"

#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "modes/shape.h"
#include "spectrum.h"

/* Slowest mode that the ends resolve, relative to omega_top, attempt by attempt. The first does
 * for all but slow purely growing modes; each step costs five elements an end. */
static const double slowest[] = {1e-3, 1e-5, 1e-7, 1e-9};
enum { ATTEMPTS = sizeof slowest / sizeof slowest[0] };
/* Largest dense matrix: 6000 real unknowns are 288 MB and some minutes. */
enum { LARGEST = 6000 };
/* The two levels must agree this well, relative to |omega|, for a candidate to be a mode. The
 * rotated continuum moves by the difference of the angles, 0.15. */
static const double same_mode = 1e-3;
/* Damped modes are listed down to this angle above the smaller of the two rotated continua. */
static const double damped_margin = 0.05;
/* Modes of growth beyond the band are looked for up to this multiple of it, as by the census. */
static const double probe = 3.0;

double th_matrix_reach(int attempt)
{
    return attempt < ATTEMPTS ? slowest[attempt] : 0.0;
}

/* Is a dense eigenvalue worth refining? */
static bool candidate(const th_solver *w, double complex omega)
{
    const double top = w->s->omega_top, size = cabs(omega);

    if (creal(omega) < -1e-6 * size - 1e-9 * top || creal(omega) > probe * top || size == 0.0)
        return false;
    if (cimag(omega) > w->census.im_max)
        return false;
    if (th_solver_conserving(w)) /* beyond the top too: the index counts negative energy there */
        return cimag(omega) > -1e-6 * top;
    if (cimag(omega) > 0.0)
        return true;
    return creal(omega) <= top && carg(omega) > damped_margin - th_level_angle(TH_LEVEL_CHECK);
}

static th_status keep(th_solver *w, const th_mode *mode, th_error *err)
{
    th_solution *s = w->s;

    if (s->count == w->room) {
        int room = w->room > 0 ? 2 * w->room : 32;
        th_mode *grown = realloc(s->mode, (size_t)room * sizeof *grown);

        if (grown == NULL)
            return th_fail(err, TH_ENOMEM, "solve: %d modes", room);
        s->mode = grown;
        w->room = room;
    }
    s->mode[s->count++] = *mode;
    return TH_OK;
}

static th_status describe(const th_solver *w, const th_eigenpair *pair, th_mode *mode,
                          th_error *err)
{
    th_mode_shape shape;
    th_status st =
        th_mode_shape_find(w->flow, w->level[TH_LEVEL_CHECK].mesh, w->level[TH_LEVEL_CHECK].op,
                           pair->omega, pair->right, &shape, err);

    if (st != TH_OK)
        return st;
    mode->norm = shape.norm;
    mode->pocket_share = shape.pocket_share;
    mode->nodes = shape.nodes;
    mode->condition = pair->condition;
    mode->residual = pair->residual;
    return TH_OK;
}

/* Not to be listed: neutral, of positive energy, above the band. */
static bool beyond(const th_solver *w, const th_mode *mode)
{
    return mode->omega_re > w->s->omega_top && mode->norm > 0 && th_solver_conserving(w) &&
           fabs(mode->omega_im) <= fmax(mode->omega_error, 1e-7 * w->s->omega_top);
}

/* Refine one candidate on two levels; a mode goes to the list. Not settling is not a failure. */
static th_status examine(th_solver *w, double complex omega, th_error *err)
{
    th_eigenpair coarse = {0}, fine = {0};
    th_mode mode = {.confirmed = TH_BY_MATRIX};
    double apart = HUGE_VAL;
    th_status st = th_spectrum_refine(w->level[TH_LEVEL_FINE].op, omega, &coarse, err);

    if (st == TH_OK)
        st = th_spectrum_refine(w->level[TH_LEVEL_CHECK].op, coarse.omega, &fine, err);
    if (st == TH_OK)
        apart = cabs(coarse.omega - fine.omega);
    if (st == TH_ECONVERGE || (st == TH_OK && !(apart <= same_mode * cabs(fine.omega)))) {
        st = TH_OK;
    } else if (st == TH_OK) {
        mode.omega_re = creal(fine.omega);
        mode.omega_im = cimag(fine.omega);
        /* twice: both levels may err to the same side */
        mode.omega_error = 2.0 * apart + coarse.rounding + fine.rounding;
        st = describe(w, &fine, &mode, err);
        if (st == TH_OK && !beyond(w, &mode))
            st = keep(w, &mode, err);
    }
    th_eigenpair_clear(&coarse);
    th_eigenpair_clear(&fine);
    return st;
}

/* All candidates of the dense matrix. */
static th_status examine_all(th_solver *w, th_error *err)
{
    double complex *omega = NULL;
    int count = 0;
    th_status st = th_spectrum_all(w->level[TH_LEVEL_BASE].op, &omega, &count, err);

    for (int i = 0; st == TH_OK && i < count; i++) {
        w->neutral += fabs(cimag(omega[i])) < w->census.floor && creal(omega[i]) > 0.0 &&
                      creal(omega[i]) < w->census.re_max;
        if (candidate(w, omega[i]))
            st = examine(w, omega[i], err);
    }
    free(omega);
    return st;
}

th_status th_matrix_modes(th_solver *w, double omega_low, th_error *err)
{
    th_solution *s = w->s;
    const th_level *base = &w->level[TH_LEVEL_BASE];
    th_status st = TH_OK;

    s->count = 0;
    w->neutral = 0;
    for (int i = 0; st == TH_OK && i < TH_LEVELS; i++) {
        th_level_clear(&w->level[i]);
        st = th_level_create(w->flow, (th_level_kind)i, w->options->accuracy, s->omega_top,
                             omega_low, &w->level[i], err);
    }
    if (st != TH_OK)
        return st;
    s->unknowns = base->op->size;
    s->zero_modes = base->op->ring ? 2 : 0;
    s->absorbing = base->mesh->absorbing;
    s->dense = th_solver_conserving(w) || s->unknowns <= TH_ORDINARY_SIZE;
    if (!s->dense)
        return TH_OK;
    if (s->unknowns > LARGEST)
        return th_fail(err, TH_EUNDECIDED,
                       "solve: the flow needs a dense matrix of %d unknowns, more than %d",
                       s->unknowns, LARGEST);
    return examine_all(w, err);
}

static bool listed(const th_solution *s, double complex root)
{
    for (int i = 0; i < s->count; i++)
        if (cabs(th_mode_omega(&s->mode[i]) - root) <=
            fmax(3.0 * s->mode[i].omega_error, 1e-9 * cabs(root)))
            return true;
    return false;
}

th_status th_matrix_complete(th_solver *w, th_error *err)
{
    th_status st = TH_OK;

    for (int i = 0; st == TH_OK && i < w->roots; i++) {
        const double complex root = w->root[i][0] + I * w->root[i][1];
        const int before = w->s->count;
        th_mode alone = {.omega_re = w->root[i][0], .omega_im = w->root[i][1], .condition = 1.0};

        if (listed(w->s, root))
            continue;
        st = examine(w, root, err);
        if (st != TH_OK || (w->s->count > before && listed(w->s, root)))
            continue;
        w->s->count = before; /* the matrix has no such eigenvalue: the matching function's word */
        alone.omega_error = same_mode * cabs(root);
        st = keep(w, &alone, err);
    }
    return st;
}
