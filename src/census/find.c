/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Growing modes without a matrix. In: a flow with open ends and its matching function. Out: every
 * mode that the census counts. Calls path, region, matching.
 * Newton's method starts from the samples of the contour; most modes of long pockets lie close to
 * the real axis and are found so. While the count is not reached, the region is cut by vertical
 * lines, the modes of each strip are counted, and strips that miss some are searched more densely
 * and cut again. M(x) counts modes with |Re omega| < x; it weighs a mode off the imaginary axis
 * twice, for its mirror image. Proof: tests/test_census.c. */
#include "census/region.h"

#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "alloc.h"

/* Two roots closer than this, relative, are one: polished roots are good to 1e-14. */
static const double same_root = 1e-10;
/* A root this close to the imaginary axis, relative, lies on it. */
static const double on_axis = 1e-11;
/* The same for slow modes, whose rounding is relative to c^2: this share of it, and this many times
 * the last step of their polishing. Closest to a switch-on 30 steps were seen. */
static const double slow_noise = 1e-12, noisy_steps = 100.0;
enum { CUTS = 40, HEIGHTS = 12, ACROSS = 4 };

typedef struct {
    double complex omega; /* Re >= 0, Im > 0 */
    double noise;         /* how far rounding may have moved it */
} mode;

typedef struct {
    const th_matching *matching;
    double rate; /* c^2 */
    th_region *region;
    mode *found; /* [count] */
    int count, room;
} search;

static int weight(double complex root)
{
    return creal(root) == 0.0 ? 1 : 2;
}

/* Weight of the roots found with from <= Re omega < to. */
static int found_between(const search *s, double from, double to)
{
    int sum = 0;

    for (int i = 0; i < s->count; i++)
        if (creal(s->found[i].omega) >= from && creal(s->found[i].omega) < to)
            sum += weight(s->found[i].omega);
    return sum;
}

/* `last` is the last step of the root's polishing. */
static th_status add(search *s, double complex root, double last, th_error *err)
{
    const th_census *c = &s->region->census;
    const double noise = fmax(slow_noise * s->rate, noisy_steps * last);

    if (fabs(creal(root)) <= fmax(on_axis * cabs(root), noise))
        root = I * cimag(root);
    if (creal(root) < 0.0)
        root = -conj(root);
    if (!(cimag(root) > 0.0) || cimag(root) > c->im_max || creal(root) > c->re_max ||
        cabs(root) <= c->slowest)
        return TH_OK;
    for (int i = 0; i < s->count; i++)
        if (cabs(s->found[i].omega - root) <=
            fmax(same_root * cabs(root), fmax(noise, s->found[i].noise)))
            return TH_OK;
    if (s->count == s->room) {
        int room = s->room > 0 ? 2 * s->room : 64;
        mode *grown = th_stretch(s->region->workspace, s->found, (size_t)room * sizeof *grown);

        if (grown == NULL)
            return th_fail(err, TH_ENOMEM, "census: %d modes", room);
        s->found = grown;
        s->room = room;
    }
    s->found[s->count++] = (mode){root, noise};
    return TH_OK;
}

/* Polish from a start; finding nothing is no failure. */
static th_status try_from(search *s, double complex start, double reach, th_error *err)
{
    double re = creal(start), im = cimag(start), last;

    if (th_matching_polish(s->matching, reach, &re, &im, &last, NULL) != TH_OK)
        return TH_OK;
    return add(s, re + I * im, last, err);
}

/* Start where |F/F'| is smallest along a path: there a mode is close. */
static th_status try_path(search *s, const th_path *path, th_error *err)
{
    th_status st = TH_OK;

    for (int i = 1; st == TH_OK && i + 1 < path->count; i++) {
        const double here = cabs(path->node[i].rate);
        const double complex start = path->node[i].omega - 1.0 / path->node[i].rate;

        if (here < cabs(path->node[i - 1].rate) || here < cabs(path->node[i + 1].rate))
            continue;
        st = try_from(s, start, 4.0 / here, err);
    }
    return st;
}

static th_status try_imaginary_axis(search *s, th_error *err)
{
    const double low = s->region->census.slowest, high = s->region->census.im_max;
    const int starts = 48;
    th_status st = TH_OK;

    for (int i = 0; st == TH_OK && i < starts; i++) {
        const double at = low * pow(high / low, (i + 0.5) / starts);

        st = try_from(s, I * at, 2.0 * at, err);
    }
    return st;
}

static th_status try_strip(search *s, double from, double to, th_error *err)
{
    const double high = s->region->census.im_max;
    th_status st = TH_OK;

    for (int i = 0; st == TH_OK && i < ACROSS; i++)
        for (int j = 0; st == TH_OK && j < HEIGHTS; j++) {
            const double x = from + (to - from) * (i + 0.5) / ACROSS;
            /* denser towards the real axis */
            const double y = high * pow((j + 0.5) / HEIGHTS, 3.0);

            st = try_from(s, x + I * y, fmax(to - from, y), err);
        }
    return st;
}

/* M(x), and the modes close to the line Re omega = x. */
static th_status count_below(search *s, double x, int *modes, th_error *err)
{
    const th_path *bottom = &s->region->bottom, *lid = &s->region->lid;
    const double high = s->region->census.im_max;
    th_path line = {.workspace = s->region->workspace};
    const th_node *under = NULL, *over = NULL, *end;
    double turns = 0.0;
    th_status st;

    for (int i = 0; i < bottom->count; i++) /* nearest samples on the real axis and on the lid */
        if (under == NULL || fabs(creal(bottom->node[i].omega) - x) < fabs(creal(under->omega) - x))
            under = &bottom->node[i];
    for (int i = 0; i < lid->count; i++)
        if (cimag(lid->node[i].omega) >= high * (1.0 - 1e-12) &&
            (over == NULL || fabs(creal(lid->node[i].omega) - x) < fabs(creal(over->omega) - x)))
            over = &lid->node[i];
    st = th_path_start(&line, s->matching, true, under->omega, err);
    if (st == TH_OK)
        st = th_path_go(&line, creal(under->omega) + I * high, err);
    if (st == TH_OK)
        st = try_path(s, &line, err);
    if (st == TH_OK) {
        end = &line.node[line.count - 1];
        turns = under->phase + end->phase + carg(over->value * conj(end->value)) +
                (th_path_phase(lid) - over->phase);
        *modes = (int)floor(turns / M_PI + 0.5);
        if (fabs(turns / M_PI - *modes) > 0.05)
            st = th_fail(err, TH_EUNDECIDED,
                         "census: the modes with |Re omega| < %g add up to %.3f, not to a whole "
                         "number",
                         x, turns / M_PI);
    }
    s->region->census.evaluations += line.evaluations;
    th_path_clear(&line);
    return st;
}

/* Make the roots found with from <= Re omega < to weigh as much as M(to) - M(from). */
static th_status fill(search *s, double from, double to, int wanted, int before, int depth,
                      th_error *err)
{
    double middle = 0.5 * (from + to);
    const th_path *bottom = &s->region->bottom;
    double nearest = HUGE_VAL, cut = middle;
    int below = 0;
    th_status st;

    if (found_between(s, from, to) == wanted)
        return TH_OK;
    st = try_strip(s, from, to, err);
    if (st != TH_OK || found_between(s, from, to) == wanted)
        return st;
    if (depth == CUTS)
        return th_fail(err, TH_EUNDECIDED,
                       "census: %d modes lie between Re omega = %g and %g, %d are found", wanted,
                       from, to, found_between(s, from, to));
    for (int i = 0; i < bottom->count; i++) { /* cuts stand on samples */
        const double x = creal(bottom->node[i].omega);

        if (x > from && x < to && fabs(x - middle) < nearest) {
            nearest = fabs(x - middle);
            cut = x;
        }
    }
    if (nearest == HUGE_VAL)
        return th_fail(err, TH_EUNDECIDED,
                       "census: %d modes lie between Re omega = %g and %g, %d are found", wanted,
                       from, to, found_between(s, from, to));
    st = count_below(s, cut, &below, err);
    if (st == TH_OK)
        st = fill(s, from, cut, below - before, before, depth + 1, err);
    return st == TH_OK ? fill(s, cut, to, wanted - (below - before), below, depth + 1, err) : st;
}

static int by_growth(const void *a, const void *b)
{
    const double *x = a, *y = b;

    if (x[1] != y[1])
        return x[1] > y[1] ? -1 : 1;
    return (x[0] > y[0]) - (x[0] < y[0]);
}

static th_status search_all(search *s, th_error *err)
{
    const th_census *c = &s->region->census;
    th_status st = try_path(s, &s->region->bottom, err);

    if (st == TH_OK && found_between(s, 0.0, HUGE_VAL) != c->growing)
        st = try_imaginary_axis(s, err);
    if (st == TH_OK)
        st = fill(s, 0.0, c->re_max, c->growing, 0, 0, err);
    return st;
}

th_status th_census_find(const th_flow *flow, const th_matching *matching, double omega_top,
                         th_census *out, double (**omega)[2], int *count, th_error *err)
{
    th_region region;
    search s = {.matching = matching, .region = &region};
    th_status st;

    if (flow == NULL || matching == NULL || out == NULL || omega == NULL || count == NULL)
        return th_fail(err, TH_EINVAL,
                       "census: want a flow, its matching function and places for "
                       "the results");
    *omega = NULL;
    *count = 0;
    if (th_flow_ends(flow).kind != TH_ENDS_OPEN)
        return th_fail(err, TH_EINVAL, "census: modes are found for open ends only");
    st = th_region_count(flow, matching, omega_top, &region, err);
    s.rate = th_flow_sound_max(flow) * th_flow_sound_max(flow);
    if (st == TH_OK)
        st = search_all(&s, err);
    *out = region.census;
    if (st == TH_OK) {
        *omega = th_alloc((size_t)s.count, sizeof **omega);
        if (*omega == NULL)
            st = th_fail(err, TH_ENOMEM, "census: %d modes", s.count);
    }
    if (st == TH_OK) {
        *count = s.count;
        for (int i = 0; i < s.count; i++) {
            (*omega)[i][0] = creal(s.found[i].omega);
            (*omega)[i][1] = cimag(s.found[i].omega);
        }
        qsort(*omega, (size_t)s.count, sizeof **omega, by_growth);
    }
    th_give(region.workspace, s.found);
    th_region_clear(&region);
    return st;
}
