/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape continuity: the density varies with the speed, n v = J. The speed has two tanh edges, as in
 * edges.h with f = v; n = J/v and c follows from the equation of state of state.h. The centres are
 * placed so that each edge alone has its horizon, v = c, at -gap/2 or gap/2. On a ring the winding
 * fixes speed_upstream, which is also speed_downstream. Goes in: values of the keys. Comes out: a
 * flow whose edges are smooth pieces. May call: edges, state, flow, status.
 *
 * Symbols: v_u, v_p, v_d upstream, pocket, downstream speed; v_h speed at a horizon; n_u, c_u
 * upstream density and sound speed; L circumference; x_b, x_w centres of the edges.
 * To add a shape see shapes.c. Proved by tests/test_edges.c. */
#include "edges.h"
#include "state.h"

#include <gsl/gsl_math.h>

/* Halvings of a bracket: to the last bit of a double, whatever its start. */
enum { HALVINGS = 200 };

enum {
    SPEED_UPSTREAM,
    SPEED_POCKET,
    SPEED_DOWNSTREAM,
    SOUND_UPSTREAM,
    WIDTH_BLACK,
    WIDTH_WHITE,
    GAP,
    STATE,
    SCATTERING_LENGTH,
    KEYS
};

typedef struct {
    double flux;
    th_state_eq state;
    th_edges v;
} river;

static void eval(const void *ctx, int piece, double x, th_flow_point *point)
{
    const river *r = ctx;
    double v[3], slope, curve;

    th_edges_eval(&r->v, piece, x, v);
    slope = v[1] / v[0];
    curve = v[2] / v[0];
    point->n = r->flux / v[0];
    point->dn = -point->n * slope; /* n = J/v */
    point->ddn = point->n * (2 * slope * slope - curve);
    point->v = v[0];
    point->dv = v[1];
    point->c = th_state_sound(&r->state, point->n);
    point->dc = th_state_sound_slope(&r->state, point->n) * point->dn;
}

/* The speed at which v = c: v - c(J/v) grows with v. */
static double horizon_speed(const river *r)
{
    double low = 0, high = r->v.edge[0].outer + r->state.c_u;

    for (int i = 0; i < HALVINGS; i++) { /* at v = high n < n_u, so c < c_u < v */
        double v = low + (high - low) / 2;

        if (v < th_state_sound(&r->state, r->flux / v))
            low = v;
        else
            high = v;
    }
    return low + (high - low) / 2;
}

/* Flux, sound speeds and centres for given speeds. */
static th_status arrange(river *r, double n_u, double gap, th_error *err)
{
    static const char *const key[2] = {"speed_upstream", "speed_downstream"};
    double v_h;

    r->flux = n_u * r->v.edge[0].outer;
    r->v.sound[0] = r->state.c_u;
    r->v.sound[1] = th_state_sound(&r->state, r->flux / r->v.pocket);
    r->v.sound[2] = th_state_sound(&r->state, r->flux / r->v.edge[1].outer);
    v_h = horizon_speed(r);
    for (int i = 0; i < 2; i++)
        if (!th_edges_place(&r->v, i, r->v.edge[i].side * gap / 2, v_h))
            return th_fail_key(err, TH_EINVAL, key[i],
                               "%s = %.15g and speed_pocket = %.15g are both %s the speed %.12g at "
                               "which v = c, so this edge has no horizon",
                               key[i], r->v.edge[i].outer, r->v.pocket,
                               r->v.pocket > v_h ? "above" : "below", v_h);
    return TH_OK;
}

/* Closed integral of v less 2 pi winding; the tails beyond the seam are below TH_SEAM_TOLERANCE.
 * Int B = x_b + L/2, Int W = L/2 - x_w. */
static double excess(const river *r, const th_ends *ends)
{
    double outside = ends->circumference + r->v.edge[0].x - r->v.edge[1].x;

    return r->v.pocket * ends->circumference + (r->v.edge[0].outer - r->v.pocket) * outside -
           2 * M_PI * ends->winding;
}

/* speed_upstream between 0 and c_u, on a ring, such that the winding is right. */
static th_status close_ring(river *r, const th_flow_setup *setup, th_error *err)
{
    double gap = setup->value[GAP], low = 0, high = fmin(r->state.c_u, r->v.pocket);

    for (int i = 0; i < HALVINGS; i++) {
        double v = low + (high - low) / 2;
        th_error ignored;

        r->v.edge[0].outer = r->v.edge[1].outer = v;
        /* without a horizon the speed is too low: v_h falls with v_u, slower than it */
        if (arrange(r, setup->density, gap, &ignored) == TH_OK && excess(r, &setup->ends) > 0)
            high = v;
        else
            low = v;
    }
    if (arrange(r, setup->density, gap, err) == TH_OK && low > 0 &&
        fabs(excess(r, &setup->ends)) <= 1e-9 * 2 * M_PI * setup->ends.winding)
        return TH_OK;
    return th_fail_key(err, TH_EINVAL, "winding",
                       "winding = %d: no speed_upstream below sound_upstream = %.15g and "
                       "speed_pocket = %.15g makes the closed integral of v 2 pi x winding",
                       setup->ends.winding, r->state.c_u, r->v.pocket);
}

static th_status check_ring(const th_flow_setup *setup, th_error *err)
{
    double v_u = setup->value[SPEED_UPSTREAM], v_d = setup->value[SPEED_DOWNSTREAM];

    if (setup->given[SPEED_UPSTREAM] && setup->given[SPEED_DOWNSTREAM] && v_u != v_d)
        return th_fail_key(err, TH_EINVAL, "speed_downstream",
                           "speed_downstream = %.15g must equal speed_upstream = %.15g on a ring, "
                           "where the two meet",
                           v_d, v_u);
    return th_shape_fits_ring(&setup->ends, 0, 0, setup->value[GAP], err);
}

static th_status build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    const double *value = setup->value;
    bool ring = setup->ends.kind == TH_ENDS_RING;
    th_status st = TH_EBUG;
    th_error inner = {0};
    th_feature feature[2];
    th_flow_spec spec = {.eval = eval, .scattering = value[SCATTERING_LENGTH]};
    river *r = NULL;
    double v_u = value[SPEED_UPSTREAM], v_d = value[SPEED_DOWNSTREAM];

    st = th_state_check((int)value[STATE], value[SCATTERING_LENGTH], err);
    if (st == TH_OK && ring)
        st = check_ring(setup, err);
    if (st != TH_OK)
        return st;
    r = th_take(setup->workspace, 1, sizeof *r);
    if (r == NULL)
        return th_fail(err, TH_ENOMEM, "shape continuity: its parameters");
    if (ring)
        v_u = v_d = setup->given[SPEED_UPSTREAM] ? v_u : setup->given[SPEED_DOWNSTREAM] ? v_d : 0;
    r->state = (th_state_eq){
        .n_u = setup->density, .c_u = value[SOUND_UPSTREAM], .a = value[SCATTERING_LENGTH]};
    r->v = (th_edges){.name = "speed",
                      .pocket = value[SPEED_POCKET],
                      .edge = {{.side = -1, .width = value[WIDTH_BLACK], .outer = v_u},
                               {.side = 1, .width = value[WIDTH_WHITE], .outer = v_d}}};
    if (ring && v_u == 0)
        st = close_ring(r, setup, err);
    else
        st = arrange(r, setup->density, value[GAP], err);
    if (st == TH_OK)
        st = th_edges_cut(&r->v, &setup->ends, value[GAP] / 2, err);
    if (st != TH_OK)
        goto done;
    th_edges_spec(&r->v, &spec, feature);
    spec.ctx = r;
    st = th_shape_flow(setup, &spec, out, &inner);
    if (st == TH_OK)
        r = NULL;                                     /* the flow owns it */
    else if (st == TH_EINVAL && inner.key[0] == '\0') /* the one rule not checked above: v > 0 */
        st = th_fail_key(err, TH_EINVAL, "gap",
                         "gap = %.15g: the edges overlap so far that the speed falls to zero or "
                         "below",
                         value[GAP]);
    else if (err != NULL)
        *err = inner;
done:
    th_give(setup->workspace, r);
    return st;
}

const th_shape th_shape_continuity = {
    .name = "continuity",
    .doc = "speed with two tanh edges, density from n v = J, sound speed from the equation of "
           "state; horizons at -gap/2 and gap/2",
    .keys = KEYS,
    .key = {[SPEED_UPSTREAM] = {.key = "speed_upstream",
                                .dimension = TH_DIM_SPEED,
                                .below = HUGE_VAL,
                                .fixed_by_ring = true,
                                .doc = "speed far upstream; equal to speed_pocket: no black-hole "
                                       "edge"},
            [SPEED_POCKET] = {.key = "speed_pocket",
                              .dimension = TH_DIM_SPEED,
                              .below = HUGE_VAL,
                              .doc = "speed in the pocket"},
            [SPEED_DOWNSTREAM] = {.key = "speed_downstream",
                                  .dimension = TH_DIM_SPEED,
                                  .below = HUGE_VAL,
                                  .fixed_by_ring = true,
                                  .doc = "speed far downstream; equal to speed_pocket: no "
                                         "white-hole edge"},
            [SOUND_UPSTREAM] = {.key = "sound_upstream",
                                .dimension = TH_DIM_SPEED,
                                .below = HUGE_VAL,
                                .doc = "sound speed far upstream"},
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
                     .doc = "distance of the two horizons, each edge taken alone"},
            [STATE] = TH_STATE_KEY,
            [SCATTERING_LENGTH] = TH_SCATTERING_KEY},
    .closes_itself = true,
    .build = build,
};
