/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Certificates. In: modes from the matrix. Out: polished frequencies with error bars, labels,
 * counts, verdict. Calls matching, census, index.
 * A new label is one more branch in label_of; a new reason for doubt one more in doubt.
 * Proof: tests/test_modes.c. */
#include "modes/solver.h"
#include "modes/polish.h"

#include <gsl/gsl_math.h>
#include <stdlib.h>
#include <string.h>

#include "twinhorizon/index.h"

/* Matrix and matching function agree when they differ by less than this many times their error
 * bars. */
static const double agreement = 3.0;
/* A mode is looked for this far from the matrix's value, relative to |omega|, or within this many
 * of its error bars. */
static const double polish_reach = 1e-4, polish_bars = 100.0;

bool th_solver_conserving(const th_solver *w)
{
    return th_flow_ends(w->flow).kind != TH_ENDS_OPEN;
}

double complex th_mode_omega(const th_mode *mode)
{
    return mode->omega_re + I * mode->omega_im;
}

static th_status count_statically(th_solver *w, th_error *err)
{
    th_index index;
    th_error why = {0};
    const th_status st = th_index_count(w->flow, &index, &why);

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

static th_status take_census(th_solver *w, th_error *err)
{
    th_solution *s = w->s;
    th_error why = {0};
    th_status st;

    if (th_solver_conserving(w))
        st = th_census_count(w->flow, w->usual, s->omega_top, &w->census, &why);
    else
        st = th_census_find(w->flow, w->usual, s->omega_top, &w->census, &w->root, &w->roots, &why);
    s->census_known = st == TH_OK;
    s->census_re_max = w->census.re_max;
    s->census_im_max = w->census.im_max;
    s->census_step = w->census.worst_step;
    if ((st == TH_EUNDECIDED || st == TH_ECONVERGE) && s->reason[0] == '\0')
        (void)snprintf(s->reason, sizeof s->reason, "%.*s", (int)sizeof s->reason - 1, why.text);
    if (st == TH_OK || st == TH_EUNDECIDED || st == TH_ECONVERGE)
        return TH_OK;
    if (err != NULL)
        *err = why;
    return st;
}

th_status th_certify_prepare(th_solver *w, th_error *err)
{
    const double top = w->s->omega_top;
    th_status st = th_matching_create(w->flow, top, TH_MATCHING_USUAL, &w->usual, err);

    if (st == TH_OK)
        st = th_matching_create(w->flow, top, TH_MATCHING_FINE, &w->fine, err);
    if (st == TH_OK)
        st = count_statically(w, err);
    return st == TH_OK ? take_census(w, err) : st;
}

/* One mode on the matching function: polished twice, from the matrix's value. False when there is
 * no root nearby or the two disagree. */
static bool polish(const th_solver *w, th_mode *m)
{
    const double complex from = th_mode_omega(m);
    const double reach = fmax(polish_reach * cabs(from), polish_bars * m->omega_error);
    double complex root;
    double error, shift;

    if (th_polish(w->usual, w->fine, th_polish_scale(w->flow, w->s->omega_top), from, reach, &root,
                  &error) != TH_OK)
        return false;
    shift = cabs(root - from);
    if (shift > agreement * (m->omega_error + error))
        return false;
    m->omega_re = creal(root);
    m->omega_im = cimag(root);
    m->shift = (m->confirmed & TH_BY_MATRIX) != 0 ? shift : 0.0;
    m->omega_error = error;
    m->confirmed |= TH_BY_MATCHING;
    return true;
}

static int by_growth(const void *a, const void *b)
{
    const th_mode *x = a, *y = b;

    if (x->omega_im != y->omega_im)
        return x->omega_im > y->omega_im ? -1 : 1;
    return (x->omega_re > y->omega_re) - (x->omega_re < y->omega_re);
}

/* Polish all. A damped mode of open ends that is no zero of the matching function belongs to the
 * rotated continuum or an absorbing layer and goes. */
static void polish_all(th_solver *w)
{
    th_solution *s = w->s;
    int kept = 0;

    for (int i = 0; i < s->count; i++) {
        const bool root = polish(w, &s->mode[i]);

        if (!root && !th_solver_conserving(w) && s->mode[i].omega_im < -s->mode[i].omega_error)
            continue;
        s->mode[kept++] = s->mode[i];
    }
    s->count = kept;
}

/* Is another listed mode within reach of the error bars, so that the two could be partners? The
 * mirror image of a mode off the imaginary axis, omega -> -omega*, is not listed. */
static bool partnered(const th_solution *s, int i)
{
    for (int j = 0; j < s->count; j++) {
        const double apart = cabs(th_mode_omega(&s->mode[i]) - th_mode_omega(&s->mode[j]));

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
            seen = seen || cabs(th_mode_omega(&s->mode[i]) - th_mode_omega(&s->mode[j])) <=
                               fmin(s->mode[i].omega_error, s->mode[j].omega_error);
        if (!seen)
            s->mode[kept++] = s->mode[i];
    }
    s->count = kept;
}

/* The spectrum is symmetric under omega -> -omega*, and under omega -> omega* when the ends
 * conserve energy. A simple eigenvalue closer to an axis than its error bar, with no partner
 * nearby, lies on the axis. */
static void settle_on_axes(th_solver *w)
{
    th_solution *s = w->s;

    for (int i = 0; i < s->count; i++) {
        th_mode *m = &s->mode[i];

        if (partnered(s, i))
            continue;
        if (fabs(m->omega_re) <= m->omega_error)
            m->omega_re = 0.0;
        else if (th_solver_conserving(w) && fabs(m->omega_im) <= m->omega_error)
            m->omega_im = 0.0;
    }
}

static th_label label_of(const th_solver *w, const th_mode *m)
{
    if (m->omega_im > m->omega_error)
        return TH_LABEL_UNSTABLE;
    if (fabs(m->omega_im) <= m->omega_error && !(th_solver_conserving(w) && m->omega_im == 0.0))
        return TH_LABEL_UNDECIDED;
    return m->norm < 0 && m->pocket_share > 0.5 ? TH_LABEL_TRAPPED : TH_LABEL_STABLE;
}

th_status th_certify_modes(th_solver *w, th_error *err)
{
    th_solution *s = w->s;
    const bool conserving = th_solver_conserving(w);
    int kept = 0;
    th_status st = th_matrix_complete(w, err);

    if (st != TH_OK)
        return st;
    polish_all(w);
    if (s->count > 1) /* qsort must not be given NULL */
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
        if (conserving && m->omega_im < 0.0 && m->label != TH_LABEL_UNDECIDED)
            continue; /* the decaying partner of a listed mode */
        s->mode[kept++] = *m;
    }
    s->count = kept;
    if (s->count > 1) /* qsort must not be given NULL */
        qsort(s->mode, (size_t)s->count, sizeof *s->mode, by_growth);
    s->unstable = s->negative = 0;
    for (int i = 0; i < s->count; i++) {
        const th_mode *m = &s->mode[i];

        if (m->label == TH_LABEL_UNSTABLE)
            s->unstable += m->omega_re == 0.0 ? 1 : 2;
        s->negative += m->label != TH_LABEL_UNSTABLE && conserving && m->norm < 0;
    }
    return TH_OK;
}

/* What the modes found should add up to the static index. */
static int indexed(const th_solution *s)
{
    return s->unstable + 2 * s->negative;
}

/* Growing modes slower than the contour: on the list, polished, and among the census' slow ones. */
static int slow_growing(const th_solver *w)
{
    int sum = 0;

    for (int i = 0; i < w->s->count; i++) {
        const th_mode *m = &w->s->mode[i];

        if (m->label == TH_LABEL_UNSTABLE && (m->confirmed & TH_BY_MATCHING) != 0 &&
            cabs(th_mode_omega(m)) < w->census.slowest)
            sum += m->omega_re == 0.0 ? 1 : 2;
    }
    return sum <= w->census.slow ? sum : 0;
}

/* The first reason for doubt, in words; "" when there is none. */
static void doubt(const th_solver *w, char *reason, size_t size)
{
    const th_solution *s = w->s;
    int undecided = 0, lonely = 0;

    for (int i = 0; i < s->count; i++) {
        const th_mode *m = &s->mode[i];
        const unsigned both = TH_BY_MATRIX | TH_BY_MATCHING;

        undecided += m->label == TH_LABEL_UNDECIDED;
        lonely += m->label != TH_LABEL_STABLE && (m->confirmed & both) != both;
    }
    if (lonely > 0)
        (void)snprintf(reason, size, "matrix and matching function disagree on %d %s", lonely,
                       lonely == 1 ? "mode" : "modes");
    else if (undecided > 0)
        (void)snprintf(reason, size, "the growth rate of %d %s is smaller than its error bar",
                       undecided, undecided == 1 ? "mode" : "modes");
    else if (s->census_known && s->census != s->unstable)
        (void)snprintf(reason, size, "%d growing modes are found, the census counts %d",
                       s->unstable, s->census);
    else if (s->index_known && indexed(s) != s->index)
        (void)snprintf(reason, size,
                       th_solver_conserving(w)
                           ? "growing and twice the neutral negative-energy modes are %d, the "
                             "static index is %d"
                           : "%d growing modes are found, the static index is %d",
                       indexed(s), s->index);
    else if (th_solver_conserving(w) && s->census_known && w->neutral != w->census.neutral)
        (void)snprintf(reason, size, "the matrix has %d neutral modes, the census counts %d",
                       w->neutral, w->census.neutral);
}

void th_certify_decide(th_solver *w)
{
    th_solution *s = w->s;
    unsigned counts = 0;

    s->census = s->census_known ? w->census.growing + slow_growing(w) : 0;
    if (s->reason[0] == '\0')
        doubt(w, s->reason, sizeof s->reason);
    if (s->reason[0] != '\0')
        s->verdict = TH_VERDICT_UNDECIDED;
    else
        s->verdict = s->unstable > 0 ? TH_VERDICT_UNSTABLE : TH_VERDICT_STABLE;
    if (s->census_known && s->census == s->unstable)
        counts |= TH_BY_CENSUS;
    if (s->index_known && s->index == indexed(s))
        counts |= TH_BY_INDEX;
    for (int i = 0; i < s->count; i++) {
        if (s->mode[i].label != TH_LABEL_UNSTABLE)
            continue;
        s->mode[i].confirmed |= counts;
        s->disagreement = fmax(s->disagreement, s->mode[i].shift);
    }
}
