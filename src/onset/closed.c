/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Switch-on lengths of rings and walls. In: a setup. Out: the lengths at which modes collide. May
 * call: parallel, collision, state, status.
 *
 * Neighbouring states (see state.c) that are not alike are bisected until a circle holds the two
 * modes that matter and no other.
 * Proved by tests/test_onset.c. */
#include <gsl/gsl_math.h>
#include <stdio.h>
#include <stdlib.h>

#include "alloc.h"
#include "onset/collision.h"
#include "onset/state.h"
#include "parallel.h"

/* Halvings of an interval in which growing modes have passed neutral ones: enough to see whether
 * one died and another was born, which takes a stretch of about the distance of two orders. */
enum { PASSING = 3 };
/* Halvings of the distance of two samples: 2^-36 of it is below 1e-9 of upto. */
enum { HALVINGS = 36 };
/* The circle is drawn where other modes are at least this many times as far from its centre as the
 * two: half the radius and twice it. */
#define ISOLATION 4
/* A minimum of the squared difference above minus this part of its ends is no sign of growth: the
 * growth rate would be below 1e-5 of the distance of the modes at the ends. */
#define DIP_SMALL 1e-9
/* Steps of the search for a minimum: the parabola is nearly exact after three. */
enum { DIP_STEPS = 5 };
/* The first sample is this part of the spacing. */
#define FIRST_PART 0.0625

typedef struct {
    const th_flow_setup *setup;
    double spacing;
    int key, samples;
    th_state *sample;    /* [samples] */
    int first;           /* of those that are searched */
    th_onset_list *part; /* [samples] of the intervals */
    th_onset_list *out;
} search;

/* ---- the circle ------------------------------------------------------------------------------ */

static double distance(const th_mark *m, double centre)
{
    return hypot(m->re - centre, m->im);
}

/* Draw a circle around `inside` modes of a and of b, the ones nearest to its centre. False when
 * others are too near. At the centre 0 a mode and its mirror image are one in the list. */
static bool draw(const th_state *a, const th_state *b, double centre, int inside_a, int inside_b,
                 th_circle *out)
{
    const th_state *side[2] = {a, b};
    const int inside[2] = {inside_a, inside_b};
    double within = 0, beyond = fmin(a->omega_top, b->omega_top);

    for (int k = 0; k < 2; k++) {
        double near[3] = {HUGE_VAL, HUGE_VAL, HUGE_VAL}; /* the three nearest, ascending */

        if (side[k]->all < inside[k])
            return false;
        for (int i = 0; i < side[k]->all; i++) {
            double d = distance(&side[k]->mode[i], centre);

            for (int n = 0; n < 3; n++)
                if (d < near[n]) {
                    const double other = near[n];

                    near[n] = d;
                    d = other;
                }
        }
        within = fmax(within, near[inside[k] - 1]);
        beyond = fmin(beyond, near[inside[k]]);
    }
    if (centre > 0) /* the mirror images of the two */
        beyond = fmin(beyond, 2 * centre - within);
    out->centre = centre;
    out->omega_top = fmax(a->omega_top, b->omega_top);
    out->radius = sqrt(within * beyond);
    return beyond >= ISOLATION * within;
}

/* The centre of the collision by which the number of growing modes differs by two: the frequency
 * of the slowest oscillating growing mode on the side that has more of them. 0: there is none. */
static double pair_centre(const th_state *more)
{
    const th_mark *slowest = NULL;

    for (int i = more->neutral; i < more->all; i++)
        if (more->mode[i].re > 0 && (slowest == NULL || more->mode[i].im < slowest->im))
            slowest = &more->mode[i];
    return slowest != NULL ? slowest->re : 0;
}

/* The middle of two neighbours, + and -, that are - and + on the other side: 0 when the rows differ
 * in another way. */
static double exchange_centre(const th_state *a, const th_state *b)
{
    int i = 0;

    while (i < a->neutral && i < b->neutral && a->mode[i].sign == b->mode[i].sign)
        i++;
    if (i + 1 >= a->neutral || i + 1 >= b->neutral || a->mode[i + 1].sign != b->mode[i].sign ||
        b->mode[i + 1].sign != a->mode[i].sign)
        return 0;
    return (a->mode[i].re + a->mode[i + 1].re + b->mode[i].re + b->mode[i + 1].re) / 4;
}

/* ---- an interval with one change ------------------------------------------------------------- */

static th_status report(search *w, th_onset found, int change, th_error *err)
{
    th_onset *next = th_onset_add(w->out);

    if (next == NULL)
        return th_fail(err, TH_ENOMEM, "onset: %d changes", w->out->count);
    *next = found;
    next->change = change;
    next->kind = abs(change) == 1 ? TH_ONSET_GROWING : TH_ONSET_PAIR;
    if (next->kind == TH_ONSET_GROWING)
        next->omega_re = 0;
    return TH_OK;
}

/* One change of the number of growing modes between a and b. *settled: found. */
static th_status settle_change(search *w, const th_state *a, const th_state *b, bool *settled,
                               th_error *err)
{
    const int change = b->unstable - a->unstable;
    const th_state *more = change > 0 ? b : a;
    th_circle circle = {.setup = w->setup, .key = w->key};
    th_duo end[2];
    th_onset found;
    double centre = 0;
    bool drawn;
    th_status st = TH_OK;

    if (abs(change) == 1) {
        drawn = draw(a, b, 0, 1, 1, &circle);
    } else {
        centre = pair_centre(more);
        drawn = abs(change) == 2 && centre > 0 &&
                draw(a, b, centre, more == a ? 1 : 2, more == b ? 1 : 2, &circle);
    }
    if (!drawn)
        return TH_OK;
    for (int i = 0; i < 2; i++) {
        const th_state *at = i == 0 ? a : b;

        st = th_collision_look(&circle, at->x, TH_MATCHING_USUAL, &end[i], err);
        if (st != TH_OK || !th_collision_isolated(&end[i]) || (end[i].square < 0) != (at == more))
            return st;
    }
    st = th_collision_refine(&circle, &end[0], &end[1], &found, settled, err);
    return st == TH_OK && *settled ? report(w, found, change, err) : st;
}

/* Where the parabola through three lengths, the middle one the lowest, has its minimum: between the
 * outer ones. */
static double bottom(const th_duo duo[3])
{
    const double p = duo[1].x - duo[0].x, q = duo[2].x - duo[1].x;
    const double u = (duo[1].square - duo[0].square) / p;
    const double v = (duo[2].square - duo[1].square) / q;

    return duo[1].x - (u * q + v * p) / (2 * (v - u));
}

/* A + and a - exchange their places between a and b: the square of their difference is positive at
 * both and has a minimum in between. Below zero: a mode grows on a short stretch. */
static th_status settle_exchange(search *w, const th_state *a, const th_state *b, bool *settled,
                                 th_error *err)
{
    const double centre = exchange_centre(a, b);
    th_circle circle = {.setup = w->setup, .key = w->key};
    th_onset found[2];
    th_duo duo[3]; /* a, the lowest so far, b */
    double small;
    th_status st;

    if (!(centre > 0) || !draw(a, b, centre, 2, 2, &circle))
        return TH_OK;
    for (int i = 0; i < 3; i++) {
        const double x = i == 0 ? a->x : i == 2 ? b->x : a->x / 2 + b->x / 2;

        st = th_collision_look(&circle, x, TH_MATCHING_USUAL, &duo[i], err);
        if (st != TH_OK || !th_collision_isolated(&duo[i]))
            return st;
    }
    small = DIP_SMALL * fmin(duo[0].square, duo[2].square);
    if (!(duo[1].square < fmin(duo[0].square, duo[2].square)))
        return TH_OK; /* not the bottom of a dip: look closer */
    for (int i = 0; i < DIP_STEPS && duo[1].square >= -small; i++) {
        const double x = bottom(duo);
        th_duo now;

        if (x == duo[1].x)
            break;
        st = th_collision_look(&circle, x, TH_MATCHING_USUAL, &now, err);
        if (st != TH_OK || !th_collision_isolated(&now))
            return st;
        if (now.square < duo[1].square) {
            duo[x < duo[1].x ? 2 : 0] = duo[1];
            duo[1] = now;
        } else {
            duo[x < duo[1].x ? 0 : 2] = now;
        }
    }
    *settled = true;
    if (duo[1].square >= -small)
        return TH_OK;
    for (int i = 0; i < 2; i++) {
        st = th_collision_refine(&circle, &duo[i], &duo[i + 1], &found[i], settled, err);
        if (st != TH_OK || !*settled)
            return st;
    }
    st = report(w, found[0], 2, err);
    return st == TH_OK ? report(w, found[1], -2, err) : st;
}

static th_status settle(search *w, const th_state *a, const th_state *b, bool *settled,
                        th_error *err)
{
    if (a->unstable != b->unstable)
        return settle_change(w, a, b, settled, err);
    return settle_exchange(w, a, b, settled, err);
}

/* All changes between a and b, in ascending order. */
static th_status resolve(search *w, const th_state *a, const th_state *b, int halvings,
                         th_error *err)
{
    th_state middle = {0};
    bool settled = false;
    th_status st = TH_OK;

    if (th_state_alike(a, b) || (th_state_equal(a, b) && halvings < HALVINGS - PASSING))
        return TH_OK;
    if (!th_state_equal(a, b))
        st = settle(w, a, b, &settled, err);
    if (st != TH_OK || settled)
        return st;
    if (halvings == 0)
        return th_fail(err, TH_EUNDECIDED,
                       "onset: two changes between %.15g and %.15g cannot be told apart", a->x,
                       b->x);
    st = th_state_near(w->setup, w->key, a->x / 2 + b->x / 2, b->x - a->x, &middle, err);
    if (st == TH_OK && !middle.certain)
        st = th_state_doubtful(&middle, err);
    if (st == TH_OK)
        st = resolve(w, a, &middle, halvings - 1, err);
    if (st == TH_OK)
        st = resolve(w, &middle, b, halvings - 1, err);
    th_state_forget(&middle);
    return st;
}

/* ---- all samples ----------------------------------------------------------------------------- */

static th_status sample_work(void *ctx, long item, th_error *err)
{
    search *w = ctx;
    const double x = w->spacing * (item == 0 ? FIRST_PART : (double)item);
    th_state *s = &w->sample[item];
    const th_status st = th_state_near(w->setup, w->key, x, item == 0 ? x : w->spacing, s, err);

    return st == TH_OK && s->exists && !s->certain ? th_state_doubtful(s, err) : st;
}

static th_status interval_work(void *ctx, long item, th_error *err)
{
    search w = *(const search *)ctx;
    const th_state *a = &w.sample[w.first + item];

    w.out = &w.part[item];
    return resolve(&w, a, a + 1, HALVINGS, err);
}

static th_status join(const search *w, int intervals, th_error *err)
{
    for (int k = 0; k < intervals; k++)
        for (int i = 0; i < w->part[k].count; i++) {
            th_onset *next = th_onset_add(w->out);

            if (next == NULL)
                return th_fail(err, TH_ENOMEM, "onset: %d changes", w->out->count);
            *next = w->part[k].onset[i];
            next->order = w->out->count - 1;
        }
    return TH_OK;
}

/* The longest row of neighbouring samples that exist; 0 when there is none. */
static int longest_row(const search *w, int *first)
{
    int best = 0;

    for (int i = 0, n = 0; i < w->samples; i++) {
        n = w->sample[i].exists ? n + 1 : 0;
        if (n > best) {
            best = n;
            *first = i - n + 1;
        }
    }
    return best;
}

th_status th_onset_closed(const th_flow_setup *setup, const th_onset_options *options,
                          th_onset_list *out, th_error *err)
{
    const int spaces = options->samples > 0 ? options->samples : TH_ONSET_SAMPLES;
    search w = {.setup = setup,
                .key = th_shape_length(setup->shape),
                .spacing = options->upto / spaces,
                .samples = spaces + 1,
                .out = out};
    int row;
    th_status st = TH_EBUG;

    w.sample = th_alloc((size_t)w.samples, sizeof *w.sample);
    w.part = th_alloc((size_t)w.samples, sizeof *w.part);
    if (w.sample == NULL || w.part == NULL) {
        st = th_fail(err, TH_ENOMEM, "onset: %d samples", w.samples);
        goto done;
    }
    st = th_parallel(options->threads, w.samples, sample_work, &w, NULL, err);
    if (st != TH_OK)
        goto done;
    row = longest_row(&w, &w.first);
    if (row < 2) {
        st = th_fail(err, TH_EINVAL, "onset: the flow exists at less than two of %d lengths: %s",
                     w.samples, w.sample[w.samples - 1].why);
        goto done;
    }
    out->from = w.sample[w.first].x;
    out->to = w.sample[w.first + row - 1].x;
    out->before = w.sample[w.first].unstable;
    out->complete = true;
    st = th_parallel(options->threads, row - 1, interval_work, &w, NULL, err);
    if (st == TH_OK)
        st = join(&w, row - 1, err);
    if (options->orders > 0 && out->count > options->orders) {
        out->count = options->orders;
        out->complete = false;
    }
done:
    for (int i = 0; w.sample != NULL && i < w.samples; i++)
        th_state_forget(&w.sample[i]);
    for (int i = 0; w.part != NULL && i < w.samples; i++)
        th_onset_clear(&w.part[i]);
    free(w.sample);
    free(w.part);
    return st;
}
