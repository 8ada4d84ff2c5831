/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape barriers: the exact flow through two repulsive delta barriers gap apart. Goes in: values of
 * the keys. Comes out: a flow of three pieces. May call: flow, shapes (rules), status.
 *
 * In units of the upstream state (n = c = 1, v = m): the potential is 0 on both sides of a barrier,
 * so that the density n_d between them has the same flux and m^2/2 + 1 = m^2/(2 n^2) + n as the
 * upstream one. Besides n = 1 this has the root n_d = (m^2/4)(1 + q), q = sqrt(1 + 8/m^2), and
 * m^2 < n_d < m^{2/3}: supersonic for every m < 1. Outside, a grey soliton that has been cut off:
 * n = m^2 + (1 - m^2) T^2, T = tanh(sqrt(1 - m^2) s + a), s the distance from the barrier. n = n_d
 * at s = 0 asks for T0^2 = 2/(3 + q). T0 = tanh a > 0 lets n rise monotonically to 1: the kink of
 * sqrt n points down and the barrier is repulsive, Z delta(x) with
 *   2 Z = jump of (sqrt n)'/sqrt n, so that Z = (1 - m^2)^{3/2} T0 (1 - T0^2)/(2 n_d).
 * (T0 < 0 would make a dip before the kink and an attractive delta.) th_flow_potential gives the
 * regular part only, which is 0 everywhere. The horizons lie outside the barriers, n = m^{2/3}.
 *
 * Fluctuations need no condition at the barriers beyond the usual one, that eta, n eta', phi and
 * n phi' are continuous: psi = sqrt(n) e^{i theta} (1 + eta/2 + i phi) has the kink in sqrt(n), the
 * delta cancels with it, and neither n' nor V is left in the equations.
 *
 * Symbols: m Mach number, N and c_u upstream density and sound speed, kappa = sqrt(1 - m^2) c_u
 * inverse soliton width, a = atanh(T0), T = tanh(kappa s + a), S = sech^2(kappa s + a).
 * To add a shape see shapes.c. Proved by tests/test_barriers.c. */
#include "shapes.h"

#include <math.h>

enum { SOUND_UPSTREAM, MACH, GAP, KEYS };

typedef struct {
    double density, c_u, m;
    double half;   /* of the distance between the barriers */
    double rise;   /* 1 - m^2 */
    double kappa;  /* inverse width of the soliton */
    double a;      /* its argument at the barrier */
    double inside; /* n_d, in units of the upstream density */
} barriers;

static void eval(const void *ctx, int piece, double x, th_flow_point *point)
{
    const barriers *b = ctx;
    double side = piece < 1 ? -1 : 1; /* of the pocket */
    double s = fmax(0, side * x - b->half);
    double y = b->kappa * s + b->a, e = exp(-2 * y), t = tanh(y);
    double sech2 = 4 * e / ((1 + e) * (1 + e)), r = b->inside; /* r = n/N */

    if (piece != 1) /* of two equal forms the one that cancels less */
        r = t * t > 0.5 ? 1 - b->rise * sech2 : b->m * b->m + b->rise * t * t;
    *point = (th_flow_point){.n = b->density * r, .v = b->m * b->c_u / r, .c = b->c_u * sqrt(r)};
    if (piece == 1)
        return;
    /* T' = kappa S, S' = -2 kappa S T */
    point->dn = side * b->density * b->rise * 2 * b->kappa * t * sech2;
    point->ddn = b->density * b->rise * 2 * b->kappa * b->kappa * sech2 * (sech2 - 2 * t * t);
    point->dv = -point->v * point->dn / point->n;
    point->dc = point->c * point->dn / (2 * point->n);
}

static th_status build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    const double *value = setup->value;
    const th_ends *ends = &setup->ends;
    static const bool uniform[3] = {false, true, false};
    double m = value[MACH], c_u = value[SOUND_UPSTREAM], rise = (1 - m) * (1 + m);
    double kappa = sqrt(rise) * c_u, half = value[GAP] / 2;
    double q = sqrt(1 + 8 / (m * m)), t0 = sqrt(2 / (3 + q)), a = atanh(t0), reach;
    double edge[4];
    /* The zeros of n nearest to the barrier are at kappa s = -a +- i asin(m). */
    double width = hypot(a, asin(m)) / kappa;
    th_feature feature[2] = {{.x = -half, .width = width}, {.x = half, .width = width}};
    th_flow_spec spec = {.eval = eval,
                         .pieces = 3,
                         .edge = edge,
                         .uniform = uniform,
                         .features = 2,
                         .feature = feature};
    barriers *b = NULL;
    th_status st;

    if (ends->kind == TH_ENDS_RING)
        return th_fail_key(err, TH_EINVAL, "kind",
                           "shape barriers cannot close on a ring: its solitons need open ends or "
                           "walls");
    b = th_take(setup->workspace, 1, sizeof *b);
    if (b == NULL)
        return th_fail(err, TH_ENOMEM, "shape barriers: its parameters");
    *b = (barriers){.density = setup->density,
                    .c_u = c_u,
                    .m = m,
                    .half = half,
                    .rise = rise,
                    .kappa = kappa,
                    .a = a,
                    .inside = m * m * (1 + q) / 4};
    reach = th_tail_reach(4 * rise * exp(-2 * a), 1 / kappa, c_u);
    edge[0] = -half - reach;
    edge[1] = -half;
    edge[2] = half;
    edge[3] = half + reach;
    spec.ctx = b;
    st = th_shape_flow(setup, &spec, out, err);
    if (st != TH_OK)
        th_give(setup->workspace, b);
    return st;
}

const th_shape th_shape_barriers = {
    .name = "barriers",
    .doc = "exact flow through two repulsive delta barriers: a supersonic stretch between them, "
           "cut grey solitons outside",
    .keys = KEYS,
    .key = {[SOUND_UPSTREAM] = {.key = "sound_upstream",
                                .dimension = TH_DIM_SPEED,
                                .below = HUGE_VAL,
                                .fallback = 1,
                                .si_only = true,
                                .doc = "sound speed upstream; 1 in a reduced case"},
            [MACH] = {.key = "mach",
                      .dimension = TH_DIM_NUMBER,
                      .below = 1,
                      .doc = "upstream Mach number"},
            [GAP] = {.key = "gap",
                     .dimension = TH_DIM_LENGTH,
                     .below = HUGE_VAL,
                     .doc = "distance between the barriers"}},
    .build = build,
};
