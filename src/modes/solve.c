/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * From a flow to its labelled modes. In: flow, accuracy. Out: th_solution. Calls level, spectrum,
 * shape, index, flow.
 * The dense eigenvalues of the base level are candidates; each is refined on both levels and kept
 * when the two agree. The static index says how many must be unstable; while fewer were found,
 * the ends of the mesh move outwards, because slow modes need far ends.
 * Symbols: omega frequency, theta angle of the complex scaling.
 * A new label is one more branch in label_of. Proof: tests/test_modes.c. */
#include "twinhorizon/modes.h"

#include <gsl/gsl_math.h>
#include <complex.h>
#include <stdlib.h>
#include <string.h>

#include "alloc.h"
#include "modes/level.h"
#include "modes/shape.h"
#include "spectrum.h"
#include "twinhorizon/index.h"

/* Slowest mode that the ends resolve, relative to omega_top, attempt by attempt. The first does
 * for all but slow purely growing modes; each step costs five elements an end. */
static const double slowest[] = {1e-3, 1e-5, 1e-7, 1e-9};
enum { TH_DENSE_MAX = 6000 }; /* 576 MB of complex matrix, several minutes */
enum { ATTEMPTS = sizeof slowest / sizeof slowest[0] };
/* The two levels must agree this well, relative to |omega|, for a candidate to be a mode. The
 * rotated continuum moves by the difference of the angles, 0.15. */
static const double same_mode = 1e-3;
/* Damped modes are listed down to this angle below the real axis; the smaller of the two angles
 * of the levels is the limit of what the rotation uncovers. */
static const double damped_margin = 0.05;
/* Modes of growth beyond the band are looked for up to this multiple of it. */
static const double probe = 4.0;

typedef struct {
    const th_flow *flow;
    const th_solve_options *options;
    th_level base, check;
    double complex *omega; /* [omegas] dense eigenvalues of the base level */
    int omegas;
    th_solution *s;
    int room;
    int unmatched; /* growing candidates that the check level did not confirm */
} solver;

static bool conserving(const solver *w)
{
    return th_flow_ends(w->flow).kind != TH_ENDS_OPEN;
}

/* Is a dense eigenvalue worth refining? */
static bool candidate(const solver *w, double complex omega)
{
    const double top = w->s->omega_top, sound = th_flow_sound_max(w->flow);
    const double size = cabs(omega);

    if (creal(omega) < -1e-6 * size - 1e-9 * top || creal(omega) > probe * top || size == 0.0)
        return false;
    if (cimag(omega) > 1.01 * sound * sound) /* rigorous bound on growth, DEVELOPERS.md */
        return false;
    if (conserving(w)) {
        if (creal(omega) > top)
            return cimag(omega) > 1e-7 * top;
        return cimag(omega) > -1e-6 * top;
    }
    if (cimag(omega) > 0.0)
        return true;
    return creal(omega) <= top && carg(omega) > damped_margin - th_level_angle(TH_LEVEL_CHECK);
}

static th_status keep(solver *w, const th_mode *mode, th_error *err)
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

/* Refine one candidate on both levels; a mode goes to the list. Not settling is not a failure. */
static th_status examine(solver *w, double complex omega, th_error *err)
{
    th_eigenpair coarse = {0}, fine = {0};
    th_mode_shape shape;
    th_mode mode = {0};
    double apart;
    th_status st = th_spectrum_refine(w->base.op, omega, &coarse, err);

    if (st == TH_OK)
        st = th_spectrum_refine(w->check.op, coarse.omega, &fine, err);
    if (st == TH_ECONVERGE) {
        w->unmatched += cimag(omega) > same_mode * w->s->omega_top;
        st = TH_OK;
        goto done;
    }
    if (st != TH_OK)
        goto done;
    apart = cabs(coarse.omega - fine.omega);
    if (!(apart <= same_mode * cabs(fine.omega))) {
        w->unmatched += cimag(omega) > same_mode * w->s->omega_top;
        goto done;
    }
    st = th_mode_shape_find(w->flow, w->check.mesh, w->check.op, fine.omega, fine.right, &shape,
                            err);
    if (st != TH_OK)
        goto done;
    mode.omega_re = creal(fine.omega);
    mode.omega_im = cimag(fine.omega);
    mode.omega_error = apart + coarse.rounding + fine.rounding;
    mode.norm = shape.norm;
    mode.pocket_share = shape.pocket_share;
    mode.nodes = shape.nodes;
    mode.condition = fine.condition;
    mode.residual = fine.residual;
    mode.confirmed = TH_BY_MATRIX;
    st = keep(w, &mode, err);
done:
    th_eigenpair_clear(&coarse);
    th_eigenpair_clear(&fine);
    return st;
}

static int by_growth(const void *a, const void *b)
{
    const th_mode *x = a, *y = b;

    if (x->omega_im != y->omega_im)
        return x->omega_im > y->omega_im ? -1 : 1;
    return (x->omega_re > y->omega_re) - (x->omega_re < y->omega_re);
}

/* Is another listed mode within reach of the error bars, so that the two could be partners? The
 * mirror image of a mode off the imaginary axis, omega -> -omega*, is not listed. */
static bool partnered(const th_solution *s, int i)
{
    for (int j = 0; j < s->count; j++) {
        const double apart = hypot(s->mode[i].omega_re - s->mode[j].omega_re,
                                   s->mode[i].omega_im - s->mode[j].omega_im);

        if (j != i && apart <= 4.0 * (s->mode[i].omega_error + s->mode[j].omega_error) &&
            s->mode[i].norm * s->mode[j].norm <= 0)
            return true;
    }
    return false;
}

/* Two candidates can refine to one mode. */
static void drop_doubles(th_solution *s)
{
    int kept = 0;

    for (int i = 0; i < s->count; i++) {
        bool seen = false;

        for (int j = 0; j < kept; j++)
            seen = seen || hypot(s->mode[i].omega_re - s->mode[j].omega_re,
                                 s->mode[i].omega_im - s->mode[j].omega_im) <=
                               fmin(s->mode[i].omega_error, s->mode[j].omega_error);
        if (!seen)
            s->mode[kept++] = s->mode[i];
    }
    s->count = kept;
}

/* The spectrum is symmetric under omega -> -omega*, and under omega -> omega* when the ends
 * conserve energy. A simple eigenvalue closer to an axis than its error bar, with no partner
 * nearby, lies on the axis. */
static void settle_on_axes(solver *w)
{
    th_solution *s = w->s;

    for (int i = 0; i < s->count; i++) {
        th_mode *m = &s->mode[i];

        if (partnered(s, i))
            continue;
        if (fabs(m->omega_re) <= m->omega_error)
            m->omega_re = 0.0;
        else if (conserving(w) && fabs(m->omega_im) <= m->omega_error)
            m->omega_im = 0.0;
    }
}

static th_label label_of(const solver *w, const th_mode *m)
{
    if (m->omega_im > m->omega_error)
        return TH_LABEL_UNSTABLE;
    if (fabs(m->omega_im) <= m->omega_error && !(conserving(w) && m->omega_im == 0.0))
        return TH_LABEL_UNDECIDED;
    return m->norm < 0 && m->pocket_share > 0.5 ? TH_LABEL_TRAPPED : TH_LABEL_STABLE;
}

static void finish_modes(solver *w)
{
    th_solution *s = w->s;
    int kept = 0;

    qsort(s->mode, (size_t)s->count, sizeof *s->mode, by_growth);
    drop_doubles(s);
    settle_on_axes(w);
    for (int i = 0; i < s->count; i++) {
        th_mode *m = &s->mode[i];

        if (m->omega_re < 0.0) /* the mirror image is listed */
            continue;
        m->label = label_of(w, m);
        if (m->label == TH_LABEL_UNSTABLE)
            m->norm = 0; /* conservation of the norm leaves no other value */
        if (conserving(w) && m->omega_im < 0.0 && m->label != TH_LABEL_UNDECIDED)
            continue; /* the decaying partner of a listed mode */
        s->mode[kept++] = *m;
    }
    s->count = kept;
    qsort(s->mode, (size_t)s->count, sizeof *s->mode, by_growth);
    s->unstable = s->negative = 0;
    for (int i = 0; i < s->count; i++) {
        const th_mode *m = &s->mode[i];

        if (m->label == TH_LABEL_UNSTABLE)
            s->unstable += m->omega_re == 0.0 ? 1 : 2;
        s->negative += m->label != TH_LABEL_UNSTABLE && conserving(w) && m->norm < 0;
    }
}

/* What the modes found should add up to the static index. */
static int counted(const th_solution *s)
{
    return s->unstable + 2 * s->negative;
}

static th_status attempt(solver *w, double omega_low, th_error *err)
{
    th_solution *s = w->s;
    th_status st;

    s->count = 0;
    w->unmatched = 0;
    th_level_clear(&w->base);
    th_level_clear(&w->check);
    free(w->omega);
    w->omega = NULL;
    st = th_level_create(w->flow, TH_LEVEL_BASE, w->options->accuracy, s->omega_top, omega_low,
                         &w->base, err);
    if (st == TH_OK)
        st = th_level_create(w->flow, TH_LEVEL_CHECK, w->options->accuracy, s->omega_top, omega_low,
                             &w->check, err);
    if (st == TH_OK && w->base.op->size > TH_DENSE_MAX)
        st = th_fail(err, TH_EUNDECIDED,
                     "solve: the flow needs a dense matrix of %d unknowns, more than %d",
                     w->base.op->size, TH_DENSE_MAX);
    if (st == TH_OK)
        st = th_spectrum_all(w->base.op, &w->omega, &w->omegas, err);
    if (st != TH_OK)
        return st;
    s->unknowns = w->base.op->size;
    s->zero_modes = w->base.op->ring ? 2 : 0;
    s->absorbing = w->base.mesh->absorbing;
    for (int i = 0; st == TH_OK && i < w->omegas; i++)
        if (candidate(w, w->omega[i]))
            st = examine(w, w->omega[i], err);
    if (st == TH_OK)
        finish_modes(w);
    return st;
}

/* Would farther ends help? They do when modes are missing or the slowest are inaccurate. */
static bool wants_more(const solver *w, double omega_low)
{
    const th_solution *s = w->s;

    if (conserving(w) || w->base.mesh->absorbing)
        return false;
    if (s->index_known && s->unstable < s->index)
        return true;
    for (int i = 0; i < s->count; i++)
        if (s->mode[i].omega_error > w->options->accuracy * s->omega_top &&
            hypot(s->mode[i].omega_re, s->mode[i].omega_im) < omega_low)
            return true;
    return false;
}

static void decide(solver *w)
{
    th_solution *s = w->s;
    int undecided = 0;

    for (int i = 0; i < s->count; i++)
        undecided += s->mode[i].label == TH_LABEL_UNDECIDED;
    s->verdict = TH_VERDICT_UNDECIDED;
    if (s->reason[0] != '\0')
        return;
    if (s->index_known && counted(s) != s->index)
        (void)snprintf(s->reason, sizeof s->reason,
                       conserving(w) ? "the matrix has %d growing and neutral negative-energy "
                                       "modes, the static index is %d"
                                     : "the matrix has %d growing modes, the static index is %d",
                       counted(s), s->index);
    else if (undecided > 0)
        (void)snprintf(s->reason, sizeof s->reason,
                       "the growth rate of %d %s is smaller than its error bar", undecided,
                       undecided == 1 ? "mode" : "modes");
    else if (w->unmatched > 0)
        (void)snprintf(s->reason, sizeof s->reason,
                       "%d growing eigenvalues of the first matrix are not found in the second",
                       w->unmatched);
    else
        s->verdict = s->unstable > 0 ? TH_VERDICT_UNSTABLE : TH_VERDICT_STABLE;
    for (int i = 0; i < s->count; i++)
        if (s->index_known && counted(s) == s->index && s->mode[i].label == TH_LABEL_UNSTABLE)
            s->mode[i].confirmed |= TH_BY_INDEX;
}

static th_status count_statically(solver *w, th_error *err)
{
    th_index index;
    th_error why = {0};
    th_status st = th_index_count(w->flow, &index, &why);

    w->s->index_known = st == TH_OK || st == TH_EUNDECIDED;
    w->s->index = w->s->index_known ? index.count : 0;
    if (st == TH_EUNDECIDED)
        (void)snprintf(w->s->reason, sizeof w->s->reason, "%.*s", (int)sizeof w->s->reason - 1,
                       why.text);
    if (st == TH_OK || st == TH_EUNDECIDED || st == TH_ENONE)
        return TH_OK;
    if (err != NULL)
        *err = why;
    return st;
}

static th_status check(const th_flow *flow, const th_solve_options *options, th_error *err)
{
    if (flow == NULL || options == NULL)
        return th_fail(err, TH_EINVAL, "solve: want a flow and options");
    if (!(options->accuracy >= 1e-12 && options->accuracy <= 1e-3))
        return th_fail(err, TH_EINVAL, "solve: accuracy = %g, want 1e-12 to 1e-3",
                       options->accuracy);
    return TH_OK;
}

th_status th_solve(const th_flow *flow, const th_solve_options *options, th_solution **out,
                   th_error *err)
{
    th_status st = TH_EBUG;
    solver w = {.flow = flow, .options = options};

    if (out == NULL)
        return th_fail(err, TH_EINVAL, "solve: want a place for the result");
    *out = NULL;
    st = check(flow, options, err);
    if (st != TH_OK)
        return st;
    w.s = th_alloc(1, sizeof *w.s);
    if (w.s == NULL)
        return th_fail(err, TH_ENOMEM, "solve: one object");
    w.s->omega_top = th_mesh_band_limit(flow);
    st = count_statically(&w, err);
    for (int i = 0;
         st == TH_OK && i < ATTEMPTS && (i == 0 || wants_more(&w, slowest[i - 1] * w.s->omega_top));
         i++)
        st = attempt(&w, slowest[i] * w.s->omega_top, err);
    if (st == TH_OK)
        decide(&w);
    th_level_clear(&w.base);
    th_level_clear(&w.check);
    free(w.omega);
    if (st == TH_OK)
        *out = w.s;
    else
        th_solution_destroy(w.s);
    return st;
}

void th_solution_destroy(th_solution *solution)
{
    if (solution == NULL)
        return;
    free(solution->mode);
    free(solution);
}

th_status th_matrix_write(const th_flow *flow, const th_solve_options *options, const char *title,
                          FILE *stream, th_error *err)
{
    th_level base = {NULL, NULL};
    double top;
    th_status st = check(flow, options, err);

    if (st != TH_OK)
        return st;
    top = th_mesh_band_limit(flow);
    st = th_level_create(flow, TH_LEVEL_BASE, options->accuracy, top, slowest[0] * top, &base, err);
    if (st == TH_OK)
        st = th_operator_write(base.op, title, stream, err);
    th_level_clear(&base);
    return st;
}
