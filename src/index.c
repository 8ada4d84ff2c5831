/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Static index by Pruefer angles. Goes in: a flow with open subsonic ends. Comes out: the number of
 * negative eigenvalues of K and the margin to its next change. May call: flow, status.
 *
 * Symbols: K eta = -(n eta')' + q eta with q = 4 n (c^2 - v^2); y = eta, z = n eta':
 *   y' = z/n, z' = q y.
 * Pruefer angle theta = pi turns + phi, tan phi = y s/z, 0 <= phi < pi, with a scale s > 0 that may
 * change from step to step: zeros of y are the multiples of pi, whatever s, and theta grows through
 * them with x. k = 2 sqrt|c^2 - v^2| wave number or decay rate; h step, negative leftwards;
 * Omega = ((a, b), (c, -a)) exponent of one step.
 * With s = n k a uniform stretch turns theta by exactly k x (supersonic) or towards pi/4
 * (subsonic): long evanescent stretches do not stiffen it.
 * To treat other ends give their angle at the edge in place of pi/4 and 3 pi/4.
 * Proved by tests/test_index.c. */
#include "twinhorizon/index.h"

#include <float.h>
#include <gsl/gsl_math.h>

/* Error of the angle allowed to two half steps, estimated from the whole one, before it is taken
 * out: see EXTRAPOLATION_GAIN. */
#define STEP_TOLERANCE 3e-14
/* The error of a step of order 6 falls by 2^6 when it is halved: the difference of one and two
 * steps is 63 times the error of the two. */
#define HALVING_GAIN 63
/* Taking the estimated error out leaves one of order 8, since the step is symmetric in x. Measured
 * on 1600 flows of all smooth shapes against steps of 3e-17: with this part of the estimate as the
 * error of a step, the angle is off by less than a third of its error. A few hundred steps stay
 * below 1e-12. */
#define EXTRAPOLATION_GAIN 30
/* A step is at most this part of the scale of a feature nearby (see th_feature), so that none is
 * stepped over, and of its piece. */
#define FEATURE_PART 0.5
#define PIECE_PART   0.0625
/* Steps for one piece: a few are needed a healing length, so that these cross 4e4 of them, in a
 * third of a second. A flow that needs more is not smooth. */
enum { STEPS_MAX = 200000 };
/* s = n k is kept above this part of n c near v = c, where any scale will do. */
#define SCALE_FLOOR 1e-6
/* Roundings of one step: of the exponent, of its exponential and of the new direction. */
#define STEP_ROUNDINGS 4

/* A solution at one place: (y, z) up to a factor, y >= 0, and phi in [0, pi). */
typedef struct {
    double turns; /* whole, half turns so far */
    double y, z;
    double scale; /* s of the last step */
    double error; /* of theta in that scale, radians */
} angle;

/* Traceless 2 x 2 matrix ((a, b), (c, -a)). */
typedef struct {
    double a, b, c;
} exponent;

static exponent add(exponent x, double f, exponent y)
{
    return (exponent){x.a + f * y.a, x.b + f * y.b, x.c + f * y.c};
}

static exponent commutator(exponent x, exponent y)
{
    return (exponent){x.b * y.c - y.b * x.c, 2 * (x.a * y.b - y.a * x.b),
                      2 * (x.c * y.a - y.c * x.a)};
}

/* Same solution, other scale: tan phi' = (s'/s) tan phi; the error goes with d phi'/d phi. */
static void rescale(angle *t, double scale)
{
    double w = t->z / t->scale, f = scale / t->scale;

    t->error *= f * (t->y * t->y + w * w) / (f * f * t->y * t->y + w * w);
    t->scale = scale;
}

/* (y, z/s) -> exp(Omega) (y, z/s), counting the zeros of y on the way; direction = sign of h. */
static void turn(angle *t, exponent omega, double direction)
{
    double y = t->y, w = t->z / t->scale, u, v, norm, spread;
    double square = omega.a * omega.a + omega.b * omega.c; /* Omega^2 = square x 1 */
    double mu = sqrt(fabs(square)), even, odd, det = 1;    /* exp = even x 1 + odd x Omega */

    if (square > 0) { /* scaled by exp(-mu): only the direction matters */
        double fade = exp(-2 * mu);

        even = (1 + fade) / 2;
        odd = -expm1(-2 * mu) / (2 * mu);
        det = fade;
    } else { /* whole half turns are put aside: exp(Omega pi/mu) = -1 */
        double halves = nearbyint(mu / M_PI), rest = mu - halves * M_PI;

        t->turns += copysign(halves, direction);
        even = cos(rest);
        odd = mu > 0 ? sin(rest) / mu : 1;
    }
    u = even * y + odd * (omega.a * y + omega.b * w);
    v = even * w + odd * (omega.c * y - omega.a * w);
    norm = sqrt((u * u + v * v) / (y * y + w * w));
    if (!(norm > 0)) { /* a decaying solution, lost in rounding: nothing is known any more */
        t->error = HUGE_VAL;
        return;
    }
    spread = det / (norm * norm); /* d theta(after)/d theta(before) */
    t->error = t->error * spread + DBL_EPSILON * (STEP_ROUNDINGS / norm + mu * spread);
    /* What is left turns by less than pi: forwards when sin(phi' - phi) ~ u w - v y > 0. */
    if (u < 0 || (u == 0 && v < 0)) {
        t->turns += u * w - v * y > 0 || u == 0 ? 1 : -1;
        u = -u;
        v = -v;
    }
    norm = sqrt(u * u + v * v);
    t->y = u / norm;
    t->z = v / norm * t->scale;
}

static double phi(const angle *t)
{
    return atan2(t->y, t->z / t->scale);
}

/* theta(a) - theta(b), both in the same scale. */
static double difference(const angle *a, const angle *b)
{
    return (a->turns - b->turns) * M_PI + (phi(a) - phi(b));
}

/* theta -> theta + delta, delta small. */
static void shift(angle *t, double delta)
{
    double y = t->y, w = t->z / t->scale;

    t->y = y + delta * w;
    t->z = (w - delta * y) * t->scale;
    if (t->y < 0) {
        t->turns += delta > 0 ? 1 : -1;
        t->y = -t->y;
        t->z = -t->z;
    }
}

static double natural_scale(const th_flow_point *p)
{
    double k = 2 * sqrt(fabs((p->c - p->v) * (p->c + p->v)));

    return p->n * fmax(k, SCALE_FLOOR * p->c);
}

/* h times the matrix of (y, z/s)' at one point. */
static exponent rate(const th_flow_point *p, double scale, double h)
{
    return (exponent){0, h * scale / p->n, h * 4 * p->n * (p->c - p->v) * (p->c + p->v) / scale};
}

/* One step of order 6: exponent of the Magnus series on the three Gauss-Legendre points,
 * "The Magnus expansion and some of its applications", Phys. Rep. 470, 151 (2009), section 5.4. */
static void step(const th_flow *flow, int piece, double x, double h, angle *t)
{
    const double root = 3.8729833462074168852; /* sqrt 15 */
    exponent r[3], a1, a2, a3, c1, c2, omega;
    th_flow_point p[3];
    double scale;

    for (int i = 0; i < 3; i++)
        th_flow_eval(flow, piece, x + h * (0.5 + (i - 1) * root / 10), &p[i]);
    scale = natural_scale(&p[1]);
    rescale(t, scale);
    for (int i = 0; i < 3; i++)
        r[i] = rate(&p[i], scale, h);
    a1 = r[1];
    a2 = add((exponent){0}, root / 3, add(r[2], -1, r[0]));
    a3 = add((exponent){0}, 10.0 / 3, add(add(r[2], -2, r[1]), 1, r[0]));
    c1 = commutator(a1, a2);
    c2 = add((exponent){0}, -1.0 / 60, commutator(a1, add(c1, 2, a3)));
    omega = commutator(add(add(c1, -20, a1), -1, a3), add(a2, 1, c2));
    omega = add(add(a1, 1.0 / 12, a3), 1.0 / 240, omega);
    turn(t, omega, h);
    /* c^2 - v^2 inherits roundings of c^2 and v^2. */
    t->error += DBL_EPSILON * fabs(h) * 4 * p[1].n * (p[1].c * p[1].c + p[1].v * p[1].v) / scale;
}

/* Largest step at x that cannot miss a feature. */
static double step_limit(const th_flow *flow, double x, double length)
{
    const th_feature *f;
    double limit = PIECE_PART * length;
    int n;

    f = th_flow_features(flow, &n);
    for (int i = 0; i < n; i++)
        limit = fmin(limit, FEATURE_PART * fmax(f[i].width, fabs(x - f[i].x)));
    return limit;
}

static th_status cross_smooth(const th_flow *flow, int piece, double from, double to, angle *t,
                              th_error *err)
{
    double length = fabs(to - from), direction = to > from ? 1 : -1, x = from, h = length;

    for (int attempt = 0; x != to; attempt++) {
        double left = fabs(to - x), whole, gain, wrong;
        angle one = *t, two = *t;

        if (attempt == STEPS_MAX)
            return th_fail(err, TH_ECONVERGE,
                           "static index: %d steps do not cross the piece from %.9g to %.9g, it is "
                           "not smooth at x = %.9g",
                           STEPS_MAX, from, to, x);
        h = fmin(h, step_limit(flow, x, length));
        whole = h >= left ? to - x : direction * h;
        step(flow, piece, x, whole, &one);
        step(flow, piece, x, whole / 2, &two);
        step(flow, piece, x + whole / 2, whole / 2, &two);
        rescale(&one, two.scale);
        gain = difference(&two, &one) / HALVING_GAIN;
        wrong = fabs(gain);
        if (wrong <= STEP_TOLERANCE) {
            x = h >= left ? to : x + whole;
            *t = two;
            shift(t, gain);
            t->error += wrong / EXTRAPOLATION_GAIN;
        }
        /* the error of a step grows like its 7th power */
        h = fabs(whole) * fmin(2, fmax(0.2, 0.9 * pow(STEP_TOLERANCE / wrong, 1.0 / 7)));
    }
    return TH_OK;
}

/* Follow a solution from one place in a piece to another in it. */
static th_status cross(const th_flow *flow, int piece, double from, double to, angle *t,
                       th_error *err)
{
    th_flow_point p;
    double scale;

    if (from == to)
        return TH_OK;
    if (!th_flow_piece_uniform(flow, piece))
        return cross_smooth(flow, piece, from, to, t, err);
    th_flow_eval(flow, piece, from, &p);
    scale = natural_scale(&p);
    rescale(t, scale);
    turn(t, rate(&p, scale, to - from), to - from);
    return TH_OK;
}

/* The solution that decays outwards: eta'/eta = k on the left and -k on the right, phi = pi/4 and
 * 3 pi/4 in the scale n k. */
static angle decaying(const th_flow_point *end, double side)
{
    double scale = natural_scale(end);

    return (angle){.y = 1, .z = side * scale, .scale = scale, .error = DBL_EPSILON};
}

/* Where the two solutions meet: the middle of the longest pocket, else of the flow. Inside a pocket
 * the angle neither locks nor runs away, so that the margin is of the order of the change that a
 * parameter makes. */
static double meeting_place(const th_flow *flow)
{
    const th_pocket *p;
    const double *edge;
    int n, best = 0;

    p = th_flow_pockets(flow, &n);
    for (int i = 1; i < n; i++)
        if (p[i].right - p[i].left > p[best].right - p[best].left)
            best = i;
    if (n > 0)
        return p[best].left / 2 + p[best].right / 2;
    edge = th_flow_edges(flow, &n);
    return edge[0] / 2 + edge[n - 1] / 2;
}

static th_status check(const th_flow *flow, th_flow_point end[2], th_error *err)
{
    int pieces = th_flow_pieces(flow);

    if (th_flow_ends(flow).kind != TH_ENDS_OPEN)
        return th_fail(err, TH_EINVAL, "static index: the flow must have open ends");
    th_flow_eval(flow, -1, 0, &end[0]);
    th_flow_eval(flow, pieces, 0, &end[1]);
    for (int i = 0; i < 2; i++)
        if (!(end[i].v < end[i].c))
            return th_fail(err, TH_ENONE,
                           "static index: none exists, the %s end is not subsonic (v = %.9g, "
                           "c = %.9g)",
                           i == 0 ? "left" : "right", end[i].v, end[i].c);
    return TH_OK;
}

th_status th_index_open(const th_flow *flow, th_index *out, th_error *err)
{
    th_flow_point end[2], middle;
    const double *edge;
    angle left, right;
    double x, passed, nearest, scale;
    int edges, pieces;
    th_status st;

    if (flow == NULL || out == NULL)
        return th_fail(err, TH_EINVAL,
                       "static index: a flow and a place for the result are needed");
    st = check(flow, end, err);
    if (st != TH_OK)
        return st;
    edge = th_flow_edges(flow, &edges);
    pieces = edges - 1;
    x = meeting_place(flow);
    left = decaying(&end[0], 1);
    right = decaying(&end[1], -1);
    for (int p = 0; p < pieces && edge[p] < x; p++) {
        st = cross(flow, p, edge[p], fmin(x, edge[p + 1]), &left, err);
        if (st != TH_OK)
            return st;
    }
    for (int p = pieces - 1; p >= 0 && edge[p + 1] > x; p--) {
        st = cross(flow, p, edge[p + 1], fmax(x, edge[p]), &right, err);
        if (st != TH_OK)
            return st;
    }
    th_flow_at(flow, x, &middle);
    scale = natural_scale(&middle);
    rescale(&left, scale);
    rescale(&right, scale);
    /* Angles keep their order along x: the left solution has passed the right one j + 1 times, j
     * >= 0, when the difference here exceeds j pi; at j pi they are one solution, K eta = 0. */
    passed = difference(&left, &right);
    nearest = fmax(0, nearbyint(passed / M_PI));
    out->margin = passed - nearest * M_PI;
    out->error = left.error + right.error + DBL_EPSILON * (fabs(left.turns) + fabs(right.turns));
    out->count = (int)nearest + (out->margin > out->error ? 1 : 0);
    if (fabs(out->margin) <= out->error)
        return th_fail(err, TH_EUNDECIDED,
                       "static index: %d or %d, an eigenvalue of K is zero to %.3g (error %.3g)",
                       out->count, out->count + 1, fabs(out->margin), out->error);
    return TH_OK;
}
