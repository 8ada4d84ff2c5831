/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Probing a flow: a graded row of samples that resolves every feature, local maxima between
 * samples, and the integral of v. Goes in: a flow with pieces, features and ends. Comes out:
 * numbers that th_flow_create checks and keeps. May call: flow (evaluation), status.
 *
 * Symbols: v speed, c sound speed, w width of a feature, j place in the row around a feature.
 * To probe more densely lower GRADE_STEP or raise EVEN_STEPS; nothing else depends on them.
 * Proved by tests/test_flow.c (narrow edges, shallow pockets, ring integrals). */
#include "inside.h"

#include <float.h>
#include <gsl/gsl_sort.h>
#include <math.h>

/* Even samples of a piece that is not uniform: resolve whatever has no feature of its own. */
enum { EVEN_STEPS = 64 };
/* Samples around a feature lie at x + w sinh(j GRADE_STEP): eight a width in the middle, and eight
 * per factor e of distance outside. */
#define GRADE_STEP 0.125
/* Distances beyond this many widths are as good as infinite; keeps j a small integer. */
#define GRADE_FAR 1e300
/* v - c below this many roundings of the larger of the two is zero. */
#define SONIC_ROUNDINGS 4
/* A peak of v - c between samples is looked at when v - c there is at most this many times its
 * change to the neighbours: on a parabola the true peak exceeds the sample by less than a quarter
 * of that change, so the factor is generous. */
#define PEAK_REACH 8
/* Golden section shrinks its bracket by 0.618 a step: 40 steps leave 1e-8 of it, and the value at a
 * smooth maximum is then exact to rounding. */
enum { GOLDEN_STEPS = 40 };
/* Adaptive integration: relative error a panel, far below the 1e-9 it is compared with, and the
 * number of halvings after which a panel is taken as it is (a jump inside a piece). */
#define PANEL_TOLERANCE 1e-13
enum { PANEL_HALVINGS = 30 };

int th_flow_side(const th_flow_point *point)
{
    double excess = point->v - point->c;

    if (fabs(excess) <= SONIC_ROUNDINGS * DBL_EPSILON * fmax(point->v, point->c))
        return 0;
    return excess > 0 ? 1 : -1;
}

static double place(double x, const th_feature *f)
{
    double far = fmax(-GRADE_FAR, fmin(GRADE_FAR, (x - f->x) / f->width));

    return asinh(far) / GRADE_STEP;
}

/* The places of one piece, unsorted, edges included; x == NULL only counts them. */
static size_t places(const th_flow *flow, int piece, double *x)
{
    double left = flow->edge[piece], right = flow->edge[piece + 1];
    int images = flow->ends.kind == TH_ENDS_RING ? 1 : 0;
    int steps = flow->uniform[piece] ? 1 : EVEN_STEPS;
    size_t n = 0;

    for (int i = 0; i <= steps; i++, n++)
        if (x != NULL)
            x[n] = i == steps ? right : left + (right - left) * i / steps;
    for (int i = 0; i < flow->features && !flow->uniform[piece]; i++)
        for (int image = -images; image <= images; image++) { /* seen across the seam */
            th_feature f = flow->feature[i];

            f.x += image * flow->ends.circumference;
            for (double j = ceil(place(left, &f)); j <= floor(place(right, &f)); j++, n++)
                if (x != NULL)
                    x[n] = fmin(right, fmax(left, f.x + f.width * sinh(j * GRADE_STEP)));
        }
    return n;
}

/* Bracketed search for the largest sign * measure on [a, b]; the best place goes to *at. */
static double golden(const th_flow *flow, int piece, double a, double b, th_flow_measure measure,
                     double sign, double *at)
{
    const double ratio = 0.61803398874989484820;
    double x[2] = {b - ratio * (b - a), a + ratio * (b - a)}, f[2];
    th_flow_point p;
    int keep;

    for (int i = 0; i < 2; i++) {
        th_flow_eval(flow, piece, x[i], &p);
        f[i] = sign * measure(&p);
    }
    for (int step = 0; step < GOLDEN_STEPS; step++) {
        if (f[0] > f[1]) { /* the maximum lies in [a, x1] */
            b = x[1];
            x[1] = x[0];
            f[1] = f[0];
            x[0] = b - ratio * (b - a);
            keep = 0;
        } else {
            a = x[0];
            x[0] = x[1];
            f[0] = f[1];
            x[1] = a + ratio * (b - a);
            keep = 1;
        }
        th_flow_eval(flow, piece, x[keep], &p);
        f[keep] = sign * measure(&p);
    }
    keep = f[0] > f[1] ? 0 : 1;
    *at = x[keep];
    return sign * f[keep];
}

double th_flow_refine(const th_flow *flow, const th_flow_sample *sample, int count, int i,
                      th_flow_measure measure)
{
    const th_flow_sample *s = &sample[i];
    double here = measure(&s->point), at, found;
    int low = i > 0 && sample[i - 1].piece == s->piece ? i - 1 : i;
    int high = i < count - 1 && sample[i + 1].piece == s->piece ? i + 1 : i;

    if (low == high || th_flow_piece_uniform(flow, s->piece))
        return here;
    found = golden(flow, s->piece, sample[low].x, sample[high].x, measure, 1, &at);
    return fmax(here, found);
}

static double excess(const th_flow_point *p)
{
    return p->v - p->c;
}

/* Does v - c, of one sign at s[-1], s[0], s[1], cross to the other between them? If so *found is a
 * sample on the other side. */
static bool hidden_peak(const th_flow *flow, const th_flow_sample *s, th_flow_sample *found)
{
    int side = th_flow_side(&s->point);
    double before = fabs(excess(&s[-1].point)), here = fabs(excess(&s->point));
    double after = fabs(excess(&s[1].point));

    if (side == 0 || th_flow_side(&s[-1].point) != side || th_flow_side(&s[1].point) != side)
        return false;
    if (s[-1].piece != s->piece || s[1].piece != s->piece || here > before || here > after)
        return false;
    if (here > PEAK_REACH * (fmax(before, after) - here))
        return false;
    found->piece = s->piece;
    (void)golden(flow, s->piece, s[-1].x, s[1].x, excess, -side, &found->x);
    th_flow_eval(flow, s->piece, found->x, &found->point);
    return th_flow_side(&found->point) == -side;
}

/* Copy the samples with hidden peaks put in place; to holds twice as many. */
static int insert_peaks(const th_flow *flow, const th_flow_sample *from, int count,
                        th_flow_sample *to)
{
    int n = 0;

    for (int i = 0; i < count; i++) {
        th_flow_sample peak;
        bool found = i > 0 && i < count - 1 && hidden_peak(flow, &from[i], &peak);

        if (found && peak.x < from[i].x)
            to[n++] = peak;
        to[n++] = from[i];
        if (found && peak.x >= from[i].x)
            to[n++] = peak;
    }
    return n;
}

th_status th_flow_sample_all(const th_flow *flow, th_flow_sample **out, int *count, th_error *err)
{
    th_status st = TH_EBUG;
    th_flow_sample *plain = NULL, *sample = NULL;
    double *x = NULL;
    bool open = flow->ends.kind == TH_ENDS_OPEN;
    size_t total = 2, most = 0;
    int n = 0;

    for (int p = 0; p < flow->pieces; p++) {
        size_t here = places(flow, p, NULL);

        total += here;
        most = here > most ? here : most;
    }
    plain = th_take(flow->workspace, total, sizeof *plain);
    sample = th_take(flow->workspace, 2 * total, sizeof *sample);
    x = th_take(flow->workspace, most, sizeof *x);
    if (plain == NULL || sample == NULL || x == NULL) {
        st = th_fail(err, TH_ENOMEM, "flow: %zu samples", total);
        goto done;
    }
    if (open)
        plain[n++] = (th_flow_sample){.piece = -1, .x = flow->edge[0]};
    for (int p = 0; p < flow->pieces; p++) {
        size_t here = places(flow, p, x);

        gsl_sort(x, 1, here); /* in place, where qsort may ask for memory */
        for (size_t i = 0; i < here; i++)
            if (i == 0 || x[i] > x[i - 1])
                plain[n++] = (th_flow_sample){.piece = p, .x = x[i]};
    }
    if (open)
        plain[n++] = (th_flow_sample){.piece = flow->pieces, .x = flow->edge[flow->pieces]};
    for (int i = 0; i < n; i++)
        th_flow_eval(flow, plain[i].piece, plain[i].x, &plain[i].point);
    *count = insert_peaks(flow, plain, n, sample);
    *out = sample;
    sample = NULL;
    st = TH_OK;
done:
    th_give(flow->workspace, x);
    th_give(flow->workspace, plain);
    th_give(flow->workspace, sample);
    return st;
}

/* Eight-point Gauss-Legendre rule on [a, b]. Nodes and weights: "Handbook of Mathematical
 * Functions", National Bureau of Standards (1964), table 25.4. */
static double panel(const th_flow *flow, int piece, double a, double b)
{
    static const double node[4] = {0.18343464249564980494, 0.52553240991632898582,
                                   0.79666647741362673959, 0.96028985649753623168};
    static const double weight[4] = {0.36268378337836198297, 0.31370664587788728734,
                                     0.22238103445337447054, 0.10122853629037625915};
    double middle = (a + b) / 2, half = (b - a) / 2, sum = 0;

    for (int i = 0; i < 4; i++) {
        th_flow_point low, high;

        th_flow_eval(flow, piece, middle - half * node[i], &low);
        th_flow_eval(flow, piece, middle + half * node[i], &high);
        sum += weight[i] * (low.v + high.v);
    }
    return half * sum;
}

static double adapt(const th_flow *flow, int piece, double a, double b, double whole, int halvings)
{
    double middle = (a + b) / 2;
    double left = panel(flow, piece, a, middle), right = panel(flow, piece, middle, b);

    if (halvings == 0 || fabs(left + right - whole) <= PANEL_TOLERANCE * fabs(whole))
        return left + right;
    return adapt(flow, piece, a, middle, left, halvings - 1) +
           adapt(flow, piece, middle, b, right, halvings - 1);
}

double th_flow_integrate_speed(const th_flow *flow, const th_flow_sample *sample, int count)
{
    double sum = 0;

    for (int i = 1; i < count; i++) {
        int piece = sample[i].piece;
        double a = sample[i - 1].x, b = sample[i].x;

        if (sample[i - 1].piece == piece)
            sum += adapt(flow, piece, a, b, panel(flow, piece, a, b), PANEL_HALVINGS);
    }
    return sum;
}
