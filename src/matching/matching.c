/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The matching function. In: a flow, then omega. Out: F and dF/domega. Calls steps, transfer,
 * ends, ring.
 * Solutions that leave to the left are carried from the left end, those that leave to the right
 * from the right end, to a point in the longest pocket. After every step each pair is made
 * orthonormal, Y = Q R; det R > 0 goes into the scale. The derivative Z = dY/domega turns into
 * Z R^{-1}: F is linear in each column, so Q and Z R^{-1} carry F's derivative exactly. F sees the
 * wedge product of a pair only.
 * Proof: tests/test_matching.c. */
#include "twinhorizon/matching.h"

#include <gsl/gsl_math.h>

#include "flow/workspace.h"
#include "matching/ends.h"
#include "matching/ring.h"
#include "matching/steps.h"
#include "matching/transfer.h"

struct th_matching {
    th_workspace *workspace; /* the flow's */
    th_steps steps;
    th_ends_kind ends;
    th_end left, right;           /* open ends */
    double left_tail, right_tail; /* scaled distance of each end to the nearest horizon */
    int zeros;                    /* at omega = 0 for every flow of these ends, divided out */
};

/* Where the solutions meet: the middle of the longest pocket, or of the flow. */
static double meeting_point(const th_flow *flow)
{
    const th_pocket *pocket;
    const double *edge;
    double longest = 0.0, at;
    int pockets, edges;

    pocket = th_flow_pockets(flow, &pockets);
    edge = th_flow_edges(flow, &edges);
    at = 0.5 * (edge[0] + edge[edges - 1]);
    for (int i = 0; i < pockets; i++)
        if (pocket[i].right - pocket[i].left > longest) {
            longest = pocket[i].right - pocket[i].left;
            at = 0.5 * (pocket[i].right + pocket[i].left);
        }
    return at;
}

static th_end end_of(const th_flow *flow, const th_steps *steps, int side)
{
    const double *edge;
    th_flow_point at;
    int edges;

    edge = th_flow_edges(flow, &edges);
    th_flow_eval(flow, side < 0 ? -1 : edges - 1, edge[side < 0 ? 0 : edges - 1], &at);
    return (th_end){.density = at.n / steps->density0,
                    .speed = at.v / steps->speed0,
                    .sound = at.c / steps->speed0,
                    .side = side};
}

/* Distances from the ends to the first and last horizon, or to the middle. */
static void measure_tails(const th_flow *flow, th_matching *m)
{
    const th_horizon *horizon;
    const double *edge;
    double first, last;
    int horizons, edges;

    horizon = th_flow_horizons(flow, &horizons);
    edge = th_flow_edges(flow, &edges);
    first = last = 0.5 * (edge[0] + edge[edges - 1]);
    if (horizons > 0) {
        first = horizon[0].x;
        last = horizon[horizons - 1].x;
    }
    m->left_tail = (first - edge[0]) * m->steps.speed0;
    m->right_tail = (edge[edges - 1] - last) * m->steps.speed0;
}

th_status th_matching_create(const th_flow *flow, double omega_top, th_matching_grain grain,
                             th_matching **out, th_error *err)
{
    th_matching *m;
    th_status st;

    if (out == NULL)
        return th_fail(err, TH_EINVAL, "matching: want a place for the result");
    *out = NULL;
    if (flow == NULL || !(omega_top > 0.0 && isfinite(omega_top)))
        return th_fail(err, TH_EINVAL, "matching: want a flow and omega_top > 0, got %g",
                       omega_top);
    m = th_take(th_flow_workspace(flow), 1, sizeof *m);
    if (m == NULL)
        return th_fail(err, TH_ENOMEM, "matching: one object");
    m->workspace = th_flow_workspace(flow);
    m->ends = th_flow_ends(flow).kind;
    st = th_steps_create(flow, omega_top, grain, meeting_point(flow), &m->steps, err);
    if (st != TH_OK) {
        th_matching_destroy(m);
        return st;
    }
    m->zeros = m->ends == TH_ENDS_RING ? 2 : 0;
    if (m->ends == TH_ENDS_OPEN) {
        m->left = end_of(flow, &m->steps, -1);
        m->right = end_of(flow, &m->steps, +1);
        measure_tails(flow, m);
        m->zeros = m->left.speed > m->left.sound && m->right.speed > m->right.sound ? 0 : 1;
    }
    *out = m;
    return TH_OK;
}

void th_matching_destroy(th_matching *matching)
{
    if (matching == NULL)
        return;
    th_steps_clear(&matching->steps);
    th_give(matching->workspace, matching);
}

static double complex inner(const double complex a[4], const double complex b[4])
{
    double complex sum = 0.0;

    for (int i = 0; i < 4; i++)
        sum += conj(a[i]) * b[i];
    return sum;
}

/* y -= (along . y) along, for a unit vector along; returns the product. */
static double complex take_out(const double complex along[4], double complex y[4])
{
    const double complex overlap = inner(along, y);

    for (int i = 0; i < 4; i++)
        y[i] -= overlap * along[i];
    return overlap;
}

/* Y = Q R by Gram and Schmidt, twice for the second column; Z becomes Z R^{-1}. What Z holds of
 * the plane of Q changes F by a factor only: its trace goes into the scale, the rest into
 * nothing, before it can outgrow the part that counts. */
static void orthonormalise(th_frame *f, th_scaled *scale)
{
    const double r11 = sqrt(creal(inner(f->y[0], f->y[0])));
    double complex r12, trace;
    double r22;

    for (int i = 0; i < 4; i++) {
        f->y[0][i] /= r11;
        f->z[0][i] /= r11;
    }
    r12 = take_out(f->y[0], f->y[1]);
    r12 += take_out(f->y[0], f->y[1]);
    r22 = sqrt(creal(inner(f->y[1], f->y[1])));
    for (int i = 0; i < 4; i++) {
        f->y[1][i] /= r22;
        f->z[1][i] = (f->z[1][i] - r12 * f->z[0][i]) / r22;
    }
    trace = take_out(f->y[0], f->z[0]);
    (void)take_out(f->y[1], f->z[0]);
    (void)take_out(f->y[0], f->z[1]);
    trace += take_out(f->y[1], f->z[1]);
    th_scaled_times(scale, r11 * r22, r11 * r22 * trace);
}

/* Multiply by exp(i length sum): a factor without zeros, analytic as the sum is. It takes back what
 * the outgoing pair gains on its way through a nearly uniform tail, so that F turns slowly. */
static void unwind(th_scaled *scale, const th_pair_sum *sum, double length)
{
    const double complex exponent = I * length * sum->value;
    const double powers = floor(creal(exponent) / M_LN2);
    const double complex factor = cexp(exponent - powers * M_LN2);

    th_scaled_times(scale, factor, I * length * sum->slope * factor);
    scale->exponent += (long)powers;
}

/* The frame at an end: outgoing waves, or eta = phi = 0 at a wall. */
static th_status start(const th_matching *m, const th_end *end, double complex omega, th_frame *f,
                       th_scaled *scale, th_error *err)
{
    if (m->ends == TH_ENDS_OPEN) {
        th_pair_sum sum;
        const th_status st = th_end_frame(end, omega, f, &sum, err);

        if (st == TH_OK)
            unwind(scale, &sum, end->side < 0 ? -m->left_tail : m->right_tail);
        return st;
    }
    *f = (th_frame){0};
    f->y[0][1] = 1.0;
    f->y[1][3] = 1.0;
    return TH_OK;
}

static th_status carry(const th_matching *m, bool backwards, double complex omega, bool slope,
                       th_frame *frame, th_scaled *scale, th_error *err)
{
    const th_steps *s = &m->steps;
    const int count = backwards ? s->count - s->match : s->match;

    orthonormalise(frame, scale);
    for (int k = 0; k < count; k++) {
        const th_step *step = &s->step[backwards ? s->count - 1 - k : k];
        th_fundamental f;
        th_status st = th_transfer_expand(step, s->flux, omega, slope, &f, err);

        if (st != TH_OK)
            return st;
        for (int r = 0; r < step->repeat; r++) {
            th_transfer_carry(&f, backwards, slope, frame);
            orthonormalise(frame, scale);
        }
    }
    return TH_OK;
}

/* det [L R] and its derivative by 2 x 2 minors (Laplace expansion). */
static void determinant(const th_frame *l, const th_frame *r, double complex *value,
                        double complex *slope)
{
    static const int rows[6][4] = {{0, 1, 2, 3}, {0, 2, 1, 3}, {0, 3, 1, 2},
                                   {1, 2, 0, 3}, {1, 3, 0, 2}, {2, 3, 0, 1}};
    static const double sign[6] = {1.0, -1.0, 1.0, 1.0, -1.0, 1.0};

    *value = *slope = 0.0;
    for (int q = 0; q < 6; q++) {
        const int a = rows[q][0], b = rows[q][1], c = rows[q][2], d = rows[q][3];
        const double complex left = l->y[0][a] * l->y[1][b] - l->y[0][b] * l->y[1][a];
        const double complex right = r->y[0][c] * r->y[1][d] - r->y[0][d] * r->y[1][c];
        const double complex dleft = l->z[0][a] * l->y[1][b] - l->z[0][b] * l->y[1][a] +
                                     l->y[0][a] * l->z[1][b] - l->y[0][b] * l->z[1][a];
        const double complex dright = r->z[0][c] * r->y[1][d] - r->z[0][d] * r->y[1][c] +
                                      r->y[0][c] * r->z[1][d] - r->y[0][d] * r->z[1][c];

        *value += sign[q] * left * right;
        *slope += sign[q] * (dleft * right + left * dright);
    }
}

static th_status match(const th_matching *m, double complex omega, bool slope, th_scaled *out,
                       th_error *err)
{
    th_frame left, right;
    double complex value, change;
    th_status st;

    *out = (th_scaled){1.0, 0.0, 0};
    st = start(m, &m->left, omega, &left, out, err);
    if (st == TH_OK)
        st = start(m, &m->right, omega, &right, out, err);
    if (st == TH_OK)
        st = carry(m, false, omega, slope, &left, out, err);
    if (st == TH_OK)
        st = carry(m, true, omega, slope, &right, out, err);
    if (st != TH_OK)
        return st;
    determinant(&left, &right, &value, &change);
    th_scaled_times(out, value, change);
    return TH_OK;
}

th_status th_matching_eval(const th_matching *matching, double omega_re, double omega_im,
                           bool slope, th_matching_value *out, th_error *err)
{
    const double rate = matching->steps.speed0 * matching->steps.speed0;
    const double complex omega = (omega_re + I * omega_im) / rate;
    th_scaled e;
    th_status st;

    if (!isfinite(omega_re) || !isfinite(omega_im) || omega == 0.0)
        return th_fail(err, TH_EINVAL, "matching: omega = %g%+gi, want finite and not zero",
                       omega_re, omega_im);
    if (matching->ends == TH_ENDS_RING)
        st = th_ring_determinant(&matching->steps, omega, slope, &e, err);
    else
        st = match(matching, omega, slope, &e, err);
    if (st != TH_OK)
        return st;
    for (int i = 0; i < matching->zeros; i++)
        th_scaled_times(&e, 1.0 / omega, -1.0 / (omega * omega));
    out->re = creal(e.value);
    out->im = cimag(e.value);
    out->slope_re = slope ? creal(e.slope) / rate : 0.0;
    out->slope_im = slope ? cimag(e.slope) / rate : 0.0;
    out->exponent = e.exponent;
    return TH_OK;
}

th_status th_matching_polish(const th_matching *matching, double reach, double *omega_re,
                             double *omega_im, double *last, th_error *err)
{
    const int steps = 40;         /* quadratic: four are the rule; near double roots linear */
    const double settled = 1e-15; /* relative step at which rounding has the last word */
    const double stalled = 1e-3;  /* the same for slow modes, whose rounding is relative to c^2 */
    const double complex guess = *omega_re + I * *omega_im;
    double complex omega = guess;
    double before = HUGE_VAL;

    for (int i = 0; i < steps; i++) {
        th_matching_value f;
        double complex step;
        th_status st = th_matching_eval(matching, creal(omega), cimag(omega), true, &f, err);

        if (st != TH_OK)
            return st;
        step = (f.re + I * f.im) / (f.slope_re + I * f.slope_im);
        if (!isfinite(creal(step)) || !isfinite(cimag(step)))
            break;
        omega -= step;
        *last = cabs(step);
        if (!(cabs(omega - guess) <= reach) || omega == 0.0)
            break;
        /* done when the step is rounding, or is small and has stopped shrinking */
        if (*last <= settled * cabs(omega) ||
            (*last < stalled * cabs(omega) && *last >= 0.7 * before)) {
            *omega_re = creal(omega);
            *omega_im = cimag(omega);
            return TH_OK;
        }
        before = *last;
    }
    return th_fail(err, TH_ECONVERGE, "matching: no root within %g of omega = %g%+gi", reach,
                   creal(guess), cimag(guess));
}
