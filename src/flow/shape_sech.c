/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape sech: uniform density and speed, c^2 = sound_upstream^2 - depth sech^2(x/width). Goes in:
 * values of the keys. Comes out: a flow of one piece, on a ring between uniform ones when there is
 * room. May call: flow, shapes (rules), status.
 * Symbols: D depth, w width, t = x/w. To add a shape see shapes.c. Proved by tests/test_flow.c. */
#include "shapes.h"

#include <math.h>

enum { SPEED, SOUND_UPSTREAM, DEPTH, WIDTH, KEYS };

typedef struct {
    double n, v, c_u, depth, width;
    int smooth; /* the piece that is not uniform */
} sech;

static void eval(const void *ctx, int piece, double x, th_flow_point *point)
{
    const sech *s = ctx;
    double t = x / s->width, e = exp(-2 * fabs(t));
    double sech2 = 4 * e / ((1 + e) * (1 + e)), c2;

    *point = (th_flow_point){.n = s->n, .v = s->v, .c = s->c_u};
    if (piece != s->smooth)
        return;
    c2 = s->c_u * s->c_u - s->depth * sech2;
    point->c = sqrt(c2);
    point->dc = s->depth * sech2 * tanh(t) / (s->width * point->c); /* (c^2)' = 2 c c' */
}

static th_status check(const double *value, const th_ends *ends, double relative, th_error *err)
{
    double c_u = value[SOUND_UPSTREAM], left;

    if (!(c_u * c_u - value[DEPTH] > 0))
        return th_fail_key(err, TH_EINVAL, "depth",
                           "depth = %.15g, want less than sound_upstream^2 = %.15g", value[DEPTH],
                           c_u * c_u);
    left = relative * exp(-ends->circumference / value[WIDTH]);
    if (ends->kind == TH_ENDS_RING && left > TH_SEAM_TOLERANCE)
        return th_fail_key(err, TH_EINVAL, "circumference",
                           "circumference = %.15g is too short for width = %.15g: at the seam c^2 "
                           "still differs by %.3g (relative), want < %g",
                           ends->circumference, value[WIDTH], left, TH_SEAM_TOLERANCE);
    return TH_OK;
}

static th_status build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    const double *value = setup->value;
    const th_ends *ends = &setup->ends;
    static const bool three[3] = {true, false, true}, one[1] = {false};
    double c_u = value[SOUND_UPSTREAM], relative = 4 * value[DEPTH] / (c_u * c_u);
    double reach = th_tail_reach(relative, value[WIDTH], c_u), seam = ends->circumference / 2;
    bool ring = ends->kind == TH_ENDS_RING, room = ring && seam > reach;
    double edge[4] = {-seam, -reach, reach, seam};
    th_feature centre = {.x = 0, .width = value[WIDTH]};
    th_flow_spec spec = {.eval = eval, .features = 1, .feature = &centre};
    sech *s = NULL;
    th_status st;

    st = check(value, ends, relative, err);
    if (st != TH_OK)
        return st;
    s = th_take(setup->workspace, 1, sizeof *s);
    if (s == NULL)
        return th_fail(err, TH_ENOMEM, "shape sech: its parameters");
    *s = (sech){.n = setup->density,
                .v = value[SPEED],
                .c_u = c_u,
                .depth = value[DEPTH],
                .width = value[WIDTH],
                .smooth = room ? 1 : 0};
    if (ring && !room) { /* the tails reach the seam */
        edge[1] = -seam;
        edge[2] = seam;
    }
    spec.ctx = s;
    spec.pieces = room ? 3 : 1;
    spec.edge = room ? edge : edge + 1;
    spec.uniform = room ? three : one;
    st = th_shape_flow(setup, &spec, out, err);
    if (st != TH_OK)
        th_give(setup->workspace, s);
    return st;
}

const th_shape th_shape_sech = {
    .name = "sech",
    .doc = "uniform density and speed, c^2 = sound_upstream^2 - depth sech^2(x/width)",
    .keys = KEYS,
    .key = {[SPEED] = {.key = "speed",
                       .dimension = TH_DIM_SPEED,
                       .below = HUGE_VAL,
                       .fixed_by_ring = true,
                       .doc = "speed of the flow, uniform"},
            [SOUND_UPSTREAM] = {.key = "sound_upstream",
                                .dimension = TH_DIM_SPEED,
                                .below = HUGE_VAL,
                                .doc = "sound speed far from the pocket, on both sides"},
            [DEPTH] = {.key = "depth",
                       .dimension = TH_DIM_SPEED_SQUARED,
                       .below = HUGE_VAL,
                       .doc = "how far c^2 falls in the middle, less than sound_upstream^2"},
            [WIDTH] = {.key = "width",
                       .dimension = TH_DIM_LENGTH,
                       .below = HUGE_VAL,
                       .doc = "width of the dip of c^2"}},
    .build = build,
};
