/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape barriers: the exact flow through two repulsive delta barriers gap apart. Goes in: values of
 * the keys. Comes out: a flow of three pieces. May call: soliton, status.
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
 * Symbols: m Mach number, c_u upstream sound speed, kappa = sqrt(1 - m^2) c_u inverse soliton
 * width, a = atanh(T0). To add a shape see shapes.c. Proved by tests/test_barriers.c. */
#include "soliton.h"

#include <math.h>

enum { SOUND_UPSTREAM, MACH, GAP, KEYS };

static th_status build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    double m = setup->value[MACH], c_u = setup->value[SOUND_UPSTREAM];
    double kappa = sqrt((1 - m) * (1 + m)) * c_u;
    double q = sqrt(1 + 8 / (m * m)), a = atanh(sqrt(2 / (3 + q)));

    /* The zeros of n nearest to the barrier are at kappa s = -a +- i asin(m). */
    return th_soliton_flow(setup, c_u, m, setup->value[GAP], a, m * m * (1 + q) / 4,
                           hypot(a, asin(m)) / kappa, out, err);
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
