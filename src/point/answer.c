/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The answer at one point of a sweep. In: a configuration, the two points before it on its line.
 * Out: th_point. Calls flow, matching, census, index, modes.
 * Roots are predicted by linear continuation and polished. They are believed when their number,
 * both signs of Re omega counted, is what census and static index say (to th_point_follow the index
 * is enough: it bounds the number from above); else the global finder
 * looks for all, and where that is not enough the full solution with matrices does.
 * Proof: tests/test_sweep.c. */
#include "twinhorizon/point.h"

#include <complex.h>
#include <gsl/gsl_heapsort.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "modes/polish.h"
#include "twinhorizon/census.h"
#include "twinhorizon/index.h"
#include "twinhorizon/matching.h"

/* A mode is followed at most this far from its prediction, relative to the top of the band. */
static const double follow_reach = 0.1;
/* Two modes of neighbouring points belong together for the prediction when nothing else is closer
 * than this many times their distance. */
static const double clear_lead = 3.0;
/* Roots closer than this, relative, are one; a root this close to the imaginary axis is on it. */
static const double same_root = 1e-10;

typedef struct {
    const th_flow *flow;
    double omega_top;
    th_matching *usual, *fine;
    th_census census;
    bool on_switch; /* the static index cannot decide: an eigenvalue of K is zero to rounding */
    bool countable; /* it could be asked at all */
    bool brief;     /* the index may settle the answer without the census */
    th_point *point;
} answer;

static double complex omega_of(const th_point_mode *m)
{
    return m->omega_re + I * m->omega_im;
}

/* Where a mode of the last point goes: on by the step it made, if its own past is clear. */
static double complex predict(const th_point *last, int i, const th_point *before)
{
    const double complex now = omega_of(&last->mode[i]);
    double nearest = HUGE_VAL, second = HUGE_VAL;
    double complex past = now;

    for (int j = 0; before != NULL && j < before->count; j++) {
        const double apart = cabs(omega_of(&before->mode[j]) - now);

        if (apart < nearest) {
            second = nearest;
            nearest = apart;
            past = omega_of(&before->mode[j]);
        } else if (apart < second) {
            second = apart;
        }
    }
    return clear_lead * nearest < second ? 2.0 * now - past : now;
}

/* Polish a start and list what grows there. Finding nothing is no failure. */
static th_status take_root(answer *a, double complex start, double reach, th_error *err)
{
    th_point *p = a->point;
    double complex root;
    double error;
    th_status st = th_polish(a->usual, a->fine, th_polish_scale(a->flow, a->omega_top), start,
                             reach, &root, &error);

    if (st != TH_OK)
        return TH_OK;
    if (fabs(creal(root)) <= fmax(error, same_root * cabs(root)))
        root = I * cimag(root);
    if (creal(root) < 0.0)
        root = -conj(root);
    if (!(cimag(root) > 0.0))
        return TH_OK;
    for (int i = 0; i < p->count; i++)
        if (cabs(omega_of(&p->mode[i]) - root) <= fmax(same_root * cabs(root), error))
            return TH_OK;
    st = th_point_resize(p, p->count + 1, err);
    if (st == TH_OK)
        p->mode[p->count - 1] =
            (th_point_mode){.omega_re = creal(root),
                            .omega_im = cimag(root),
                            .omega_error = error,
                            .label = cimag(root) > error ? TH_LABEL_UNSTABLE : TH_LABEL_UNDECIDED,
                            .confirmed = TH_BY_MATCHING};
    return st;
}

static void count_modes(answer *a)
{
    th_point *p = a->point;
    int slow = 0;

    p->unstable = 0;
    for (int i = 0; i < p->count; i++) {
        const int weight = p->mode[i].omega_re == 0.0 ? 1 : 2;

        if (p->mode[i].label != TH_LABEL_UNSTABLE)
            continue;
        p->unstable += weight;
        slow += cabs(omega_of(&p->mode[i])) < a->census.slowest ? weight : 0;
    }
    p->census = a->census.growing + (slow <= a->census.slow ? slow : 0);
}

static bool all_grow(const th_point *p)
{
    for (int i = 0; i < p->count; i++)
        if (p->mode[i].label != TH_LABEL_UNSTABLE)
            return false;
    return true;
}

/* Do all counts agree? */
static bool settled(answer *a)
{
    const th_point *p = a->point;

    count_modes(a);
    return all_grow(p) && p->census_known && !a->on_switch && p->unstable == p->census &&
           (!p->index_known || p->unstable == p->index);
}

/* No more modes grow than the index says: with as many at hand none is missing, and only growing
 * ones were taken. */
static bool settled_by_index(answer *a)
{
    const th_point *p = a->point;

    count_modes(a);
    return a->brief && all_grow(p) && p->index_known && !a->on_switch && p->unstable == p->index;
}

static th_status follow(answer *a, const th_point *const previous[2], th_error *err)
{
    const th_point *last = previous[0];
    th_status st = TH_OK;

    for (int i = 0; st == TH_OK && last != NULL && i < last->count; i++)
        st = take_root(a, predict(last, i, previous[1]), follow_reach * a->omega_top, err);
    return st;
}

static th_status find_all(answer *a, th_error *err)
{
    double(*root)[2] = NULL;
    int count = 0;
    th_error why;
    th_status st = th_census_find(a->flow, a->usual, a->omega_top, &a->census, &root, &count, &why);

    if (st == TH_ENOMEM || st == TH_EBUG) {
        if (err != NULL)
            *err = why;
        return st;
    }
    a->point->census_known = st == TH_OK;
    st = TH_OK;
    for (int i = 0; st == TH_OK && i < count; i++) {
        const double complex start = root[i][0] + I * root[i][1];

        st = take_root(a, start, 1e-6 * cabs(start), err);
    }
    free(root);
    return st;
}

static int by_growth(const void *a, const void *b)
{
    const th_point_mode *x = a, *y = b;

    if (x->omega_im != y->omega_im)
        return x->omega_im > y->omega_im ? -1 : 1;
    return (x->omega_re > y->omega_re) - (x->omega_re < y->omega_re);
}

/* The full solution, with its own verdict. */
static th_status solve_fully(answer *a, double accuracy, th_error *err)
{
    th_point *p = a->point;
    th_solution *s = NULL;
    th_status st = th_solve(a->flow, &(th_solve_options){.accuracy = accuracy}, &s, err);

    if (st == TH_OK)
        st = th_point_resize(p, s->count, err);
    if (st != TH_OK)
        goto done;
    for (int i = 0; i < s->count; i++)
        p->mode[i] =
            (th_point_mode){s->mode[i].omega_re, s->mode[i].omega_im, s->mode[i].omega_error,
                            s->mode[i].label, s->mode[i].confirmed};
    p->unstable = s->unstable;
    p->index_known = s->index_known;
    p->index = s->index;
    p->census_known = s->census_known;
    p->census = s->census;
    p->state = s->verdict == TH_VERDICT_UNDECIDED ? TH_POINT_UNDECIDED : TH_POINT_OK;
    (void)snprintf(p->message, sizeof p->message, "%s", s->reason);
done:
    th_solution_destroy(s);
    return st;
}

/* A count that cannot decide leaves the answer to the full solution; shortage of memory and bugs
 * are failures. */
static th_status grave(th_status st, const th_error *why, th_error *err)
{
    if (st != TH_ENOMEM && st != TH_EBUG)
        return TH_OK;
    if (err != NULL)
        *err = *why;
    return st;
}

static th_status count_index(answer *a, th_error *err)
{
    th_index index;
    th_error why;
    const th_status st = th_index_open(a->flow, &index, &why);

    a->on_switch = st == TH_EUNDECIDED;
    a->point->index_known = st == TH_OK;
    a->point->index = st == TH_OK ? index.count : 0;
    a->countable = st == TH_OK || st == TH_EUNDECIDED || st == TH_ENONE;
    return grave(st, &why, err);
}

static th_status count_census(answer *a, th_error *err)
{
    th_error why;
    th_status st;

    if (!a->countable)
        return TH_OK;
    st = th_census_count(a->flow, a->usual, a->omega_top, &a->census, &why);
    a->point->census_known = st == TH_OK;
    return grave(st, &why, err);
}

/* Sort the modes and write down who stands behind them. */
static void finish(th_point *p)
{
    const unsigned by = (p->census_known ? TH_BY_CENSUS : 0u) | (p->index_known ? TH_BY_INDEX : 0u);

    if (p->count > 1) /* in place, where qsort may ask for memory */
        gsl_heapsort(p->mode, (size_t)p->count, sizeof *p->mode, by_growth);
    for (int i = 0; i < p->count; i++)
        p->mode[i].confirmed |= by;
    p->state = TH_POINT_OK;
}

static th_status answer_open(answer *a, double accuracy, const th_point *const previous[2],
                             th_error *err)
{
    th_status st = th_matching_create(a->flow, a->omega_top, TH_MATCHING_USUAL, &a->usual, err);

    if (st == TH_OK)
        st = th_matching_create(a->flow, a->omega_top, TH_MATCHING_FINE, &a->fine, err);
    if (st == TH_OK)
        st = count_index(a, err);
    if (st == TH_OK)
        st = follow(a, previous, err);
    if (st == TH_OK && settled_by_index(a)) {
        finish(a->point);
        return TH_OK;
    }
    if (st == TH_OK)
        st = count_census(a, err);
    if (st == TH_OK && !settled(a))
        st = find_all(a, err);
    if (st != TH_OK)
        return st;
    if (!settled(a))
        return solve_fully(a, accuracy, err);
    finish(a->point);
    return TH_OK;
}

static th_status answer_point(const th_flow_setup *setup, double accuracy, bool brief,
                              const th_point *const previous[2], th_point *point, th_error *err)
{
    th_flow *flow = NULL;
    th_error why = {0};
    answer a = {.point = point, .brief = brief};
    th_status st = th_flow_build(setup, &flow, &why);

    point->count = 0;
    point->unstable = 0;
    point->index_known = point->census_known = false;
    point->horizon_distance = 0.0;
    point->message[0] = '\0';
    if (st == TH_OK) {
        a.flow = flow;
        a.omega_top = th_flow_band_limit(flow);
        point->horizon_distance = th_flow_horizon_distance(flow);
        if (th_flow_ends(flow).kind == TH_ENDS_OPEN)
            st = answer_open(&a, accuracy, previous, &why);
        else
            st = solve_fully(&a, accuracy, &why);
    }
    th_matching_destroy(a.usual);
    th_matching_destroy(a.fine);
    th_flow_destroy(flow);
    if (st == TH_OK)
        return TH_OK;
    if (st == TH_ENOMEM || st == TH_EBUG) {
        if (err != NULL)
            *err = why;
        return st;
    }
    point->count = 0;
    point->unstable = 0;
    point->index_known = point->census_known = false;
    point->horizon_distance = 0.0;
    point->state = TH_POINT_FAILED;
    (void)snprintf(point->message, sizeof point->message, "%.*s", (int)sizeof point->message - 1,
                   why.text);
    return TH_OK;
}

th_status th_point_answer(const th_flow_setup *setup, double accuracy,
                          const th_point *const previous[2], th_point *point, th_error *err)
{
    return answer_point(setup, accuracy, false, previous, point, err);
}

th_status th_point_follow(const th_flow_setup *setup, double accuracy,
                          const th_point *const previous[2], th_point *point, th_error *err)
{
    return answer_point(setup, accuracy, true, previous, point, err);
}
