/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape step: uniform density and speed; the sound speed jumps
 * sound_upstream -> sound_pocket -> sound_downstream at x = -gap/2 and gap/2. Goes in: values of
 * the keys. Comes out: a flow of uniform pieces. May call: flow, shapes (rules), status.
 * To add a shape see shapes.c. Proved by tests/test_flow.c. */
#include "shapes.h"

#include <math.h>

enum { SPEED, SOUND_UPSTREAM, SOUND_POCKET, SOUND_DOWNSTREAM, GAP, KEYS };

typedef struct {
    double n, v;
    double c[3];
    int first; /* piece 0 is c[first] */
} step;

static void eval(const void *ctx, int piece, double x, th_flow_point *point)
{
    const step *s = ctx;

    (void)x;
    *point = (th_flow_point){.n = s->n, .v = s->v, .c = s->c[piece + s->first]};
}

static th_status build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    const double *value = setup->value;
    const th_ends *ends = &setup->ends;
    static const bool uniform[3] = {true, true, true};
    bool ring = ends->kind == TH_ENDS_RING;
    double half = value[GAP] / 2, seam = ends->circumference / 2;
    double edge[4] = {-seam, -half, half, seam};
    th_flow_spec spec = {.eval = eval, .uniform = uniform};
    step *s = NULL;
    th_status st;

    st = th_shape_fits_ring(ends, value[SOUND_UPSTREAM], value[SOUND_DOWNSTREAM], value[GAP], err);
    if (st != TH_OK)
        return st;
    s = th_take(setup->workspace, 1, sizeof *s);
    if (s == NULL)
        return th_fail(err, TH_ENOMEM, "shape step: its parameters");
    s->n = setup->density;
    s->v = value[SPEED];
    s->c[0] = value[SOUND_UPSTREAM];
    s->c[1] = value[SOUND_POCKET];
    s->c[2] = value[SOUND_DOWNSTREAM];
    s->first = ring ? 0 : 1; /* other ends: the pocket is the only piece */
    spec.ctx = s;
    spec.pieces = ring ? 3 : 1;
    spec.edge = ring ? edge : edge + 1;
    st = th_shape_flow(setup, &spec, out, err);
    if (st != TH_OK)
        th_give(setup->workspace, s);
    return st;
}

const th_shape th_shape_step = {
    .name = "step",
    .doc = "uniform density and speed, sound speed in two steps at -gap/2 and gap/2",
    .keys = KEYS,
    .key = {[SPEED] = {.key = "speed",
                       .dimension = TH_DIM_SPEED,
                       .below = HUGE_VAL,
                       .fixed_by_ring = true,
                       .doc = "speed of the flow, uniform"},
            [SOUND_UPSTREAM] = {.key = "sound_upstream",
                                .dimension = TH_DIM_SPEED,
                                .below = HUGE_VAL,
                                .doc = "sound speed upstream of the pocket"},
            [SOUND_POCKET] = {.key = "sound_pocket",
                              .dimension = TH_DIM_SPEED,
                              .below = HUGE_VAL,
                              .doc = "sound speed in the pocket"},
            [SOUND_DOWNSTREAM] = {.key = "sound_downstream",
                                  .dimension = TH_DIM_SPEED,
                                  .below = HUGE_VAL,
                                  .doc = "sound speed downstream of the pocket"},
            [GAP] = {.key = "gap",
                     .dimension = TH_DIM_LENGTH,
                     .below = HUGE_VAL,
                     .doc = "length of the pocket"}},
    .build = build,
};
