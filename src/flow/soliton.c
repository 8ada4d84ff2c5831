/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A plateau between two pieces of grey solitons, see soliton.h. May call: flow, shapes (rules),
 * workspace, status.
 *
 * Symbols: m Mach number, N and c_u density and sound speed far away, k inverse width of the
 * soliton, y = k s + start, T = tanh y, S = sech^2 y, r = n/N.
 * Proved by tests/test_flow.c (wells) and tests/test_barriers.c. */
#include "soliton.h"

#include <math.h>

typedef struct {
    double density, c_u, m;
    double half; /* of the plateau */
    double rise; /* 1 - m^2 */
    double k;
    double start;
    double inside; /* r on the plateau */
} pair;

static void eval(const void *ctx, int piece, double x, th_flow_point *point)
{
    const pair *w = ctx;
    double side = piece < 1 ? -1 : 1; /* of the plateau */
    double y = w->k * fmax(0, side * x - w->half) + w->start;
    double e = exp(-2 * y), t = (1 - e) / (1 + e), sech2 = 4 * e / ((1 + e) * (1 + e));
    double r = w->inside;

    if (piece != 1) /* of two equal forms the one that cancels less */
        r = t * t > 0.5 ? 1 - w->rise * sech2 : w->m * w->m + w->rise * t * t;
    *point = (th_flow_point){.n = w->density * r, .v = w->m * w->c_u / r, .c = w->c_u * sqrt(r)};
    if (piece == 1)
        return;
    /* T' = k S, S' = -2 k S T */
    point->dn = side * w->density * w->rise * 2 * w->k * t * sech2;
    point->ddn = w->density * w->rise * 2 * w->k * w->k * sech2 * (sech2 - 2 * t * t);
    point->dv = -point->v * point->dn / point->n;
    point->dc = point->c * point->dn / (2 * point->n);
}

th_status th_soliton_flow(const th_flow_setup *setup, double c_u, double m, double gap,
                          double start, double inside, double width, th_flow **out, th_error *err)
{
    static const bool uniform[3] = {false, true, false};
    double rise = (1 - m) * (1 + m), k = sqrt(rise) * c_u, half = gap / 2;
    double reach = th_tail_reach(4 * rise * exp(-2 * start), 1 / k, c_u);
    double edge[4] = {-half - reach, -half, half, half + reach};
    th_feature feature[2] = {{.x = -half, .width = width}, {.x = half, .width = width}};
    th_flow_spec spec = {.eval = eval,
                         .pieces = 3,
                         .edge = edge,
                         .uniform = uniform,
                         .features = 2,
                         .feature = feature};
    pair *w = NULL;
    th_status st;

    if (setup->ends.kind == TH_ENDS_RING)
        return th_fail_key(err, TH_EINVAL, "kind",
                           "shape %s cannot close on a ring: its solitons need open ends or walls",
                           setup->shape->name);
    w = th_take(setup->workspace, 1, sizeof *w);
    if (w == NULL)
        return th_fail(err, TH_ENOMEM, "shape %s: its parameters", setup->shape->name);
    *w = (pair){.density = setup->density,
                .c_u = c_u,
                .m = m,
                .half = half,
                .rise = rise,
                .k = k,
                .start = start,
                .inside = inside};
    spec.ctx = w;
    st = th_shape_flow(setup, &spec, out, err);
    if (st != TH_OK)
        th_give(setup->workspace, w);
    return st;
}
