/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape tanh: uniform density and speed, sound speed with two smooth edges
 * as in edges.h with f = c, their centres placed so that each edge alone has its horizon, c = v, at
 * -gap/2 or gap/2. Goes in: values of the keys. Comes out: a flow whose edges are smooth pieces,
 * with uniform ones between and (on a ring) around them where the tails have fallen below rounding.
 * May call: edges, flow, status.
 *
 * To add a shape see shapes.c. Proved by tests/test_flow.c. */
#include "edges.h"

#include <math.h>

enum { SPEED, SOUND_UPSTREAM, SOUND_POCKET, SOUND_DOWNSTREAM, WIDTH_BLACK, WIDTH_WHITE, GAP, KEYS };

typedef struct {
    double n, v;
    th_edges c;
} smooth;

static void eval(const void *ctx, int piece, double x, th_flow_point *point)
{
    const smooth *s = ctx;
    double c[3];

    th_edges_eval(&s->c, piece, x, c);
    *point = (th_flow_point){.n = s->n, .v = s->v, .c = c[0], .dc = c[1]};
}

static th_status place(th_edges *c, int which, double horizon, double v, const char *name,
                       th_error *err)
{
    if (th_edges_place(c, which, horizon, v))
        return TH_OK;
    return th_fail_key(err, TH_EINVAL, "speed",
                       "speed = %.15g does not lie between %s = %.15g and sound_pocket = %.15g", v,
                       name, c->edge[which].outer, c->pocket);
}

static th_status build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    const double *value = setup->value;
    const th_ends *ends = &setup->ends;
    th_status st = TH_EBUG;
    th_error inner = {0};
    double half = value[GAP] / 2;
    th_feature feature[2];
    th_flow_spec spec = {.eval = eval};
    smooth *s = NULL;

    st = th_shape_fits_ring(ends, value[SOUND_UPSTREAM], value[SOUND_DOWNSTREAM], value[GAP], err);
    if (st != TH_OK)
        return st;
    s = th_take(setup->workspace, 1, sizeof *s);
    if (s == NULL)
        return th_fail(err, TH_ENOMEM, "shape tanh: its parameters");
    s->n = setup->density;
    s->v = value[SPEED];
    s->c = (th_edges){
        .name = "sound speed",
        .pocket = value[SOUND_POCKET],
        .edge = {{.side = -1, .width = value[WIDTH_BLACK], .outer = value[SOUND_UPSTREAM]},
                 {.side = 1, .width = value[WIDTH_WHITE], .outer = value[SOUND_DOWNSTREAM]}},
        .sound = {value[SOUND_UPSTREAM], value[SOUND_POCKET], value[SOUND_DOWNSTREAM]}};
    st = place(&s->c, 0, -half, s->v, "sound_upstream", err);
    if (st != TH_OK)
        goto done;
    st = place(&s->c, 1, half, s->v, "sound_downstream", err);
    if (st != TH_OK)
        goto done;
    st = th_edges_cut(&s->c, ends, half, err);
    if (st != TH_OK)
        goto done;
    th_edges_spec(&s->c, &spec, feature);
    spec.ctx = s;
    st = th_shape_flow(setup, &spec, out, &inner);
    if (st == TH_OK)
        s = NULL;                                     /* the flow owns it */
    else if (st == TH_EINVAL && inner.key[0] == '\0') /* the one rule not checked above: c > 0 */
        st = th_fail_key(err, TH_EINVAL, "gap",
                         "gap = %.15g: the edges overlap so far that the sound speed falls to "
                         "zero or below",
                         value[GAP]);
    else if (err != NULL)
        *err = inner;
done:
    th_give(setup->workspace, s);
    return st;
}

const th_shape th_shape_tanh = {
    .name = "tanh",
    .doc = "uniform density and speed, sound speed with two tanh edges, horizons at -gap/2 and "
           "gap/2",
    .keys = KEYS,
    .key = {[SPEED] = {.key = "speed",
                       .dimension = TH_DIM_SPEED,
                       .below = HUGE_VAL,
                       .fixed_by_ring = true,
                       .doc = "speed of the flow, uniform, between the sound speeds of each edge"},
            [SOUND_UPSTREAM] = {.key = "sound_upstream",
                                .dimension = TH_DIM_SPEED,
                                .below = HUGE_VAL,
                                .doc = "sound speed far upstream; equal to sound_pocket: no "
                                       "black-hole edge"},
            [SOUND_POCKET] = {.key = "sound_pocket",
                              .dimension = TH_DIM_SPEED,
                              .below = HUGE_VAL,
                              .doc = "sound speed in the pocket"},
            [SOUND_DOWNSTREAM] = {.key = "sound_downstream",
                                  .dimension = TH_DIM_SPEED,
                                  .below = HUGE_VAL,
                                  .doc = "sound speed far downstream; equal to sound_pocket: no "
                                         "white-hole edge"},
            [WIDTH_BLACK] = {.key = "width_black",
                             .dimension = TH_DIM_LENGTH,
                             .below = HUGE_VAL,
                             .doc = "width of the black-hole edge"},
            [WIDTH_WHITE] = {.key = "width_white",
                             .dimension = TH_DIM_LENGTH,
                             .below = HUGE_VAL,
                             .doc = "width of the white-hole edge"},
            [GAP] = {.key = "gap",
                     .dimension = TH_DIM_LENGTH,
                     .below = HUGE_VAL,
                     .doc = "distance of the two horizons, each edge taken alone"}},
    .build = build,
};
