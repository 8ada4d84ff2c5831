/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape well: the exact flow through an attractive square well. A plateau of length gap with
 * n = m^2, c = m, v = 1/m (m the upstream Mach number, upstream n = c = 1) between two half grey
 * solitons n = m^2 + (1 - m^2) tanh^2(sqrt(1 - m^2) s), s the distance from the plateau in upstream
 * healing lengths. The well has the depth (1/m - m)^2/2 on the plateau. c^2 is proportional to n.
 * Goes in: values of the keys. Comes out: a flow of three pieces. May call: soliton, status.
 *
 * Symbols: m Mach number, c_u upstream sound speed, kappa = sqrt(1 - m^2) c_u inverse soliton
 * width. To add a shape see shapes.c. Proved by tests/test_flow.c. */
#include "soliton.h"

#include <math.h>

enum { SOUND_UPSTREAM, MACH, GAP, KEYS };

static th_status build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    double m = setup->value[MACH], c_u = setup->value[SOUND_UPSTREAM];
    double kappa = sqrt((1 - m) * (1 + m)) * c_u;

    /* v = J/n varies faster than n when m is small: n doubles over m/kappa. */
    return th_soliton_flow(setup, c_u, m, setup->value[GAP], 0, m * m, m / kappa, out, err);
}

const th_shape th_shape_well = {
    .name = "well",
    .doc = "exact flow through an attractive square well: a supersonic plateau between two half "
           "grey solitons",
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
                     .doc = "length of the supersonic plateau"}},
    .build = build,
};
