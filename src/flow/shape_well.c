/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape well: the exact flow through an attractive square well. A plateau of length gap with
 * n = m^2, c = m, v = 1/m (m the upstream Mach number, upstream n = c = 1) between two half grey
 * solitons n = m^2 + (1 - m^2) tanh^2(sqrt(1 - m^2) s), s the distance from the plateau in upstream
 * healing lengths. The well has the depth (1/m - m)^2/2 on the plateau. c^2 is proportional to n.
 * Goes in: values of the keys. Comes out: a flow of three pieces. May call: flow, shapes (rules),
 * status.
 *
 * Symbols: m Mach number, N and c_u upstream density and sound speed, kappa = sqrt(1 - m^2) c_u
 * inverse soliton width, T = tanh(kappa s), S = sech^2(kappa s).
 * To add a shape see shapes.c. Proved by tests/test_flow.c. */
#include "shapes.h"

#include <math.h>

enum { SOUND_UPSTREAM, MACH, GAP, KEYS };

typedef struct {
    double density, c_u, m;
    double half;  /* of the plateau */
    double rise;  /* 1 - m^2 */
    double kappa; /* inverse width of the soliton */
} well;

static void eval(const void *ctx, int piece, double x, th_flow_point *point)
{
    const well *w = ctx;
    double side = piece < 1 ? -1 : 1; /* of the plateau */
    double s = fmax(0, side * x - w->half);
    double e = exp(-2 * w->kappa * s), t = (1 - e) / (1 + e), sech2 = 4 * e / ((1 + e) * (1 + e));
    double m2 = w->m * w->m, r; /* r = n/N */

    if (piece == 1) {
        *point = (th_flow_point){.n = w->density * m2, .v = w->c_u / w->m, .c = w->c_u * w->m};
        return;
    }
    r = t * t > 0.5 ? 1 - w->rise * sech2 : m2 + w->rise * t * t;
    point->n = w->density * r;
    point->v = w->m * w->c_u / r;
    point->c = w->c_u * sqrt(r);
    /* T' = kappa S, S' = -2 kappa S T */
    point->dn = side * w->density * w->rise * 2 * w->kappa * t * sech2;
    point->ddn = w->density * w->rise * 2 * w->kappa * w->kappa * sech2 * (sech2 - 2 * t * t);
    point->dv = -point->v * point->dn / point->n;
    point->dc = point->c * point->dn / (2 * point->n);
}

static th_status build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    const double *value = setup->value;
    const th_ends *ends = &setup->ends;
    static const bool uniform[3] = {false, true, false};
    double m = value[MACH], c_u = value[SOUND_UPSTREAM], rise = (1 - m) * (1 + m);
    double kappa = sqrt(rise) * c_u, half = value[GAP] / 2, reach;
    double edge[4];
    /* v = J/n varies faster than n when m is small: n doubles over m/kappa. */
    th_feature feature[2] = {{.x = -half, .width = m / kappa}, {.x = half, .width = m / kappa}};
    th_flow_spec spec = {.eval = eval,
                         .pieces = 3,
                         .edge = edge,
                         .uniform = uniform,
                         .features = 2,
                         .feature = feature};
    well *w = NULL;
    th_status st;

    if (ends->kind == TH_ENDS_RING)
        return th_fail_key(err, TH_EINVAL, "kind",
                           "shape well cannot close on a ring: its solitons need open ends or "
                           "walls");
    w = th_take(setup->workspace, 1, sizeof *w);
    if (w == NULL)
        return th_fail(err, TH_ENOMEM, "shape well: its parameters");
    *w = (well){
        .density = setup->density, .c_u = c_u, .m = m, .half = half, .rise = rise, .kappa = kappa};
    reach = th_tail_reach(4 * rise, 1 / kappa, c_u);
    edge[0] = -half - reach;
    edge[1] = -half;
    edge[2] = half;
    edge[3] = half + reach;
    spec.ctx = w;
    st = th_shape_flow(setup, &spec, out, err);
    if (st != TH_OK)
        th_give(setup->workspace, w);
    return st;
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
