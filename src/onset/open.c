/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Switch-on lengths with open ends. In: a setup, and what is known of the points before it on a
 * line of a map. Out: the lengths x_j at which the mismatch angle A(x) of the static operator is
 * j pi. May call: index, flow, onset (list), status.
 *
 * Symbols: x length, A angle in radians, j order = growing modes below x_j, s = dA/dx slope.
 * th_index gives margin = A - pi round(A/pi) and count = the number of multiples of pi passed.
 * Every root is kept between a sample where A < j pi and one where A > j pi, and found by secants
 * that start from a foreseen length and slope.
 * Proved by tests/test_onset.c. */
#include <float.h>
#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "alloc.h"
#include "onset/inside.h"
#include "onset/root.h"
#include "twinhorizon/index.h"

/* The search starts at this part of the shortest healing length, or of upto if that is less: far
 * below any length that means something, whatever is searched. */
#define LOWEST 1e-9
/* Longest search, in shortest healing lengths: a thousand times the longest condensate. Angles are
 * then good to nine digits still. */
#define LONGEST 1e6
/* The shortest length at which a shape makes a flow is found to this part of it. */
#define SHORTEST 1e-3
/* Most changes that are listed: hours of work, and more than anyone reads. */
enum { CHANGES_MAX = 100000 };
/* A root is found when the next step is below this part of its length; the step is made still, and
 * what is left of it is smaller by the error of the slope. */
#define STEP_SMALL 1e-12
/* An angle farther than this from its multiple of pi where the steps have ended is a jump. */
#define JUMP 1e-5
/* Error of A that is taken for its noise before one is known; measured on smooth edges. */
#define ANGLE_NOISE 1e-12
/* Rounds for one root: twelve secants, and a hundred of which every second one halves (root.c). */
enum { ROUNDS = 120 };

typedef struct {
    double x, angle, error;
} sample;

typedef struct {
    const th_flow_setup *setup;
    int key;
} search;

/* Shortest healing length 1/c of the flow of the setup's own length, else of length `upto`. */
static th_status healing(const search *w, double upto, double *xi, th_error *err)
{
    const double own = w->setup->given[w->key] ? w->setup->value[w->key] : upto;
    const th_flow_setup at = th_onset_setup(w->setup, w->key, own);
    th_flow *flow = NULL;
    th_status st = th_flow_build(&at, &flow, err);

    if (st == TH_OK)
        *xi = 1 / th_flow_sound_max(flow);
    th_flow_destroy(flow);
    return st;
}

/* From where to search; TH_EINVAL when upto is out of reach. */
static th_status choose_start(const search *w, double upto, double *start, th_error *err)
{
    double xi = 0;
    th_status st = healing(w, upto, &xi, err);

    *start = LOWEST * fmin(upto, xi);
    if (st == TH_OK && upto > LONGEST * xi)
        return th_fail(err, TH_EINVAL,
                       "onset: upto is %.3g healing lengths, the search ends at %g: ask for less",
                       upto / xi, LONGEST);
    return st;
}

static th_status measure(const search *w, double x, sample *out, th_error *err)
{
    const th_flow_setup at = th_onset_setup(w->setup, w->key, x);
    th_index index;
    th_flow *flow = NULL;
    th_status st = th_flow_build(&at, &flow, err);

    if (st != TH_OK)
        return st;
    st = th_index_open(flow, &index, err);
    th_flow_destroy(flow);
    if (st != TH_OK && st != TH_EUNDECIDED) /* undecided: A is a multiple of pi to its error */
        return st;
    *out = (sample){.x = x, .error = index.error};
    out->angle = index.margin + M_PI * (index.count - (index.margin > index.error ? 1 : 0));
    return TH_OK;
}

/* Where the shape makes no flow of length `low`: the shortest that it makes, to
 * SHORTEST, by halving on a logarithmic scale. */
static th_status shortest(const search *w, double low, double high, sample *out, th_error *err)
{
    th_error ignored;
    th_status st = measure(w, high, out, err);

    while (st == TH_OK && high > (1 + SHORTEST) * low) {
        const double middle = sqrt(low * high);
        const th_status there = measure(w, middle, out, &ignored);

        if (there == TH_OK)
            high = middle;
        else if (there == TH_EINVAL || there == TH_ECONVERGE)
            low = middle;
        else
            return th_fail(err, there, "%s", ignored.text);
    }
    return st == TH_OK ? measure(w, high, out, err) : st;
}

/* Orders below the angle: the growing modes there. */
static int passed(const sample *s)
{
    return s->angle > 0 ? (int)ceil(s->angle / M_PI) : 0;
}

/* The root of A = order pi, foreseen at `guess` (0: not at all), in the bracket of `root`. */
static th_status refine(const search *w, int order, double guess, th_root *root, th_onset *out,
                        th_error *err)
{
    const double target = order * M_PI;
    double x = guess > root->low && guess < root->high ? guess : root->low / 2 + root->high / 2;

    for (int round = 0; round < ROUNDS; round++) {
        sample now;
        double next;
        th_status st = measure(w, x, &now, err);

        if (st != TH_OK)
            return st;
        next = th_root_next(root, x, now.angle - target);
        if (fabs(root->step) <= STEP_SMALL * x ||
            (round > 0 && fabs(now.angle - target) <= now.error)) {
            if (fabs(now.angle - target) > JUMP + now.error)
                return th_fail(
                    err, TH_EUNDECIDED,
                    "onset: the flow jumps at %.9g, beyond it another stationary flow is "
                    "taken, so there is no switch-on of order %d",
                    x, order);
            *out = (th_onset){.order = order,
                              .gap = x - root->step,
                              .gap_error =
                                  now.error / root->slope + fabs(root->step) + DBL_EPSILON * x,
                              .kind = order % 2 == 0 ? TH_ONSET_GROWING : TH_ONSET_PAIR,
                              .change = 1};
            return TH_OK;
        }
        x = next;
    }
    return th_fail(err, TH_EUNDECIDED,
                   "onset: order %d lies between %.15g and %.15g but is not found in %d rounds",
                   order, root->low, root->high, (int)ROUNDS);
}

/* ---- foreseeing along a line ----------------------------------------------------------------- */

/* The polynomial through the known lengths of this order at the newest points; 0: none is. */
static double foresee(const th_trail *trail, int order, double place)
{
    double sum = 0;
    int first = trail->count;

    if (order >= trail->orders)
        return 0;
    while (first > 0 && trail->gap[first - 1][order] > 0)
        first--;
    for (int i = first; i < trail->count; i++) {
        double term = trail->gap[i][order];

        for (int k = first; k < trail->count; k++)
            if (k != i)
                term *= (place - trail->at[k]) / (trail->at[i] - trail->at[k]);
        sum += term;
    }
    return sum;
}

static th_status widen(th_trail *trail, int orders, th_error *err)
{
    double **row[TH_TRAIL_POINTS + 1];

    if (orders <= trail->orders)
        return TH_OK;
    for (int i = 0; i < TH_TRAIL_POINTS; i++)
        row[i] = &trail->gap[i];
    row[TH_TRAIL_POINTS] = &trail->slope;
    for (int i = 0; i <= TH_TRAIL_POINTS; i++) {
        double *more = realloc(*row[i], (size_t)orders * sizeof *more);

        if (more == NULL)
            return th_fail(err, TH_ENOMEM, "onset: %d orders", orders);
        for (int k = trail->orders; k < orders; k++)
            more[k] = 0;
        *row[i] = more;
    }
    trail->orders = orders;
    return TH_OK;
}

/* Add a point; the oldest goes when there is no room. */
static th_status remember(th_trail *trail, double place, const th_onset_list *list,
                          const double *slope, th_error *err)
{
    const int orders = list->count > 0 ? list->onset[list->count - 1].order + 1 : 0;
    th_status st = widen(trail, orders, err);

    if (st != TH_OK)
        return st;
    if (trail->count == TH_TRAIL_POINTS) {
        double *oldest = trail->gap[0];

        for (int i = 1; i < TH_TRAIL_POINTS; i++) {
            trail->gap[i - 1] = trail->gap[i];
            trail->at[i - 1] = trail->at[i];
        }
        trail->gap[--trail->count] = oldest;
    }
    for (int k = 0; k < trail->orders; k++)
        trail->gap[trail->count][k] = 0;
    for (int i = 0; i < list->count; i++) {
        trail->gap[trail->count][list->onset[i].order] = list->onset[i].gap;
        trail->slope[list->onset[i].order] = slope[i];
    }
    trail->at[trail->count++] = place;
    return TH_OK;
}

void th_trail_clear(th_trail *trail)
{
    for (int i = 0; i < TH_TRAIL_POINTS; i++)
        free(trail->gap[i]);
    free(trail->slope);
    *trail = (th_trail){0};
}

/* ---- all orders of one setup ----------------------------------------------------------------- */

th_status th_onset_open(const th_flow_setup *setup, const th_onset_options *options, double place,
                        th_trail *trail, th_onset_list *out, th_error *err)
{
    const search w = {setup, th_shape_length(setup->shape)};
    const th_trail nothing = {0}, *known = trail != NULL ? trail : &nothing;
    sample low, top;
    double *slopes = NULL, slope, start = 0;
    int last;
    th_status st = choose_start(&w, options->upto, &start, err);

    if (st != TH_OK)
        return st;
    st = measure(&w, start, &low, err);
    if (st == TH_EINVAL || st == TH_ECONVERGE)
        st = shortest(&w, start, options->upto, &low, err);
    if (st == TH_OK)
        st = measure(&w, options->upto, &top, err);
    if (st != TH_OK)
        return st;
    out->from = low.x;
    out->to = top.x;
    out->before = passed(&low);
    last = passed(&top);
    out->complete = options->orders == 0 || last - out->before <= options->orders;
    if (!out->complete)
        last = out->before + options->orders;
    if (last - out->before > CHANGES_MAX)
        return th_fail(err, TH_EINVAL,
                       "onset: %d changes up to there, want at most %d: ask for fewer orders or a "
                       "shorter upto",
                       last - out->before, (int)CHANGES_MAX);
    if (last > out->before)
        slopes = th_alloc((size_t)(last - out->before), sizeof *slopes);
    if (last > out->before && slopes == NULL)
        return th_fail(err, TH_ENOMEM, "onset: %d orders", last - out->before);
    slope = (top.angle - low.angle) / (top.x - low.x);
    for (int order = out->before; st == TH_OK && order < last; order++) {
        double guess = foresee(known, order, place);
        th_root root = {.low = low.x, .high = top.x, .slope = slope, .noise = ANGLE_NOISE};
        th_onset *next = th_onset_add(out);

        if (next == NULL) {
            st = th_fail(err, TH_ENOMEM, "onset: %d orders", last);
            break;
        }
        if (guess > 0)
            root.slope = known->slope[order];
        else if (order > out->before)
            guess = next[-1].gap + M_PI / slope;
        st = refine(&w, order, guess, &root, next, err);
        low.x = root.low;
        slope = slopes[order - out->before] = root.slope;
    }
    if (st == TH_OK && trail != NULL)
        st = remember(trail, place, out, slopes, err);
    free(slopes);
    return st;
}
