/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape tanh: uniform density and speed, sound speed with two smooth edges,
 *   c(x) = c_p + (c_u - c_p) B(x) + (c_d - c_p) W(x),
 *   B = (1 - tanh((x - x_b)/w_b))/2, W = (1 + tanh((x - x_w)/w_w))/2,
 * their centres placed so that each edge alone has its horizon, c = v, at -gap/2 or gap/2. An edge
 * with equal sound speeds on both sides is absent. Goes in: values of the keys. Comes out: a flow
 * whose edges are smooth pieces, with uniform ones between and (on a ring) around them where the
 * tails have fallen below rounding. May call: flow, shapes (rules), status.
 *
 * Symbols: c_u, c_p, c_d upstream, pocket, downstream sound speed; x_b, w_b centre and width of the
 * black-hole edge, x_w, w_w of the white-hole edge.
 * To add a shape see shapes.c. Proved by tests/test_flow.c. */
#include "shapes.h"

#include <math.h>

#include "../alloc.h"

enum { SPEED, SOUND_UPSTREAM, SOUND_POCKET, SOUND_DOWNSTREAM, WIDTH_BLACK, WIDTH_WHITE, GAP, KEYS };

enum { PIECES_MAX = 5 };

/* One edge. In the direction `side` (-1 black, 1 white) the sound speed goes from the pocket's to
 * `outer`. */
typedef struct {
    double side, x, width, outer;
    bool present;
} slope;

typedef struct {
    double n, v, c_p;
    slope edge[2]; /* black, white */
    int pieces;
    double at[PIECES_MAX + 1];
    bool uniform[PIECES_MAX];
    double sound[PIECES_MAX]; /* of the uniform pieces */
    double left, right;       /* sound speed outside */
} smooth;

static void eval(const void *ctx, int piece, double x, th_flow_point *point)
{
    const smooth *s = ctx;
    double base = s->c_p, rest = 0;

    *point = (th_flow_point){.n = s->n, .v = s->v};
    if (piece < 0 || piece >= s->pieces || s->uniform[piece]) {
        point->c = piece < 0 ? s->left : piece >= s->pieces ? s->right : s->sound[piece];
        return;
    }
    for (int i = 0; i < 2; i++) {
        const slope *e = &s->edge[i];
        double t, g, rise = e->outer - s->c_p;

        if (!e->present)
            continue;
        /* Outwards of its centre an edge is counted from its outer value, so that what is added to
         * base is small and base exact: (1 + tanh t)/2 = 1 - g/(1 + g), g = exp(-2 t). */
        t = e->side * (x - e->x) / e->width;
        g = exp(-2 * fabs(t));
        if (t > 0) {
            base = base == s->c_p ? e->outer : base + rise;
            rest -= rise * g / (1 + g);
        } else {
            rest += rise * g / (1 + g);
        }
        point->dc += e->side * rise * 2 * g / ((1 + g) * (1 + g)) / e->width;
    }
    point->c = base + rest;
}

/* The centre of an edge from the place of its horizon: c = v where, going outwards,
 * (1 + tanh t)/2 = (v - c_p)/(outer - c_p), thus exp(2 t) = (v - c_p)/(outer - v). */
static th_status place(slope *e, double horizon, double v, double c_p, const char *name,
                       th_error *err)
{
    double ratio = (v - c_p) / (e->outer - v);

    e->present = e->outer != c_p;
    e->x = horizon;
    if (!e->present)
        return TH_OK;
    if (!(ratio > 0) || !isfinite(ratio))
        return th_fail_key(err, TH_EINVAL, "speed",
                           "speed = %.15g does not lie between %s = %.15g and sound_pocket = %.15g",
                           v, name, e->outer, c_p);
    e->x = horizon - e->side * e->width / 2 * log(ratio);
    return TH_OK;
}

/* How far from the edge's centre c differs from `value` by less than rounding. */
static double reach(const smooth *s, const slope *e, double value)
{
    return th_tail_reach(2 * fabs(e->outer - s->c_p) / value, e->width, value);
}

/* Relative deviation of c^2 from `value` squared at distance x from the edge's centre. */
static double tail(const smooth *s, const slope *e, double x, double value)
{
    return 2 * fabs(e->outer - s->c_p) / value * exp(-2 * fabs(x) / e->width);
}

static th_status check_seam(const smooth *s, double seam, th_error *err)
{
    double left = 0;

    for (int i = 0; i < 2; i++) {
        const slope *e = &s->edge[i];

        if (!e->present)
            continue;
        if (!(fabs(e->x) < seam))
            return th_fail_key(err, TH_EINVAL, "gap",
                               "the edge of sound speed centred at %.6g does not fit on a ring of "
                               "circumference %.15g",
                               e->x, 2 * seam);
        left += fmax(tail(s, e, seam - e->x, s->left), tail(s, e, seam + e->x, s->left));
    }
    if (left > TH_SEAM_TOLERANCE)
        return th_fail_key(err, TH_EINVAL, "circumference",
                           "circumference = %.15g is too short: at the seam c^2 still differs by "
                           "%.3g (relative), want < %g",
                           2 * seam, left, TH_SEAM_TOLERANCE);
    return TH_OK;
}

static void add_piece(smooth *s, double right, bool uniform, double sound)
{
    s->uniform[s->pieces] = uniform;
    s->sound[s->pieces] = sound;
    s->at[++s->pieces] = right;
}

/* Cut the flow into pieces: [uniform on a ring] edge [uniform plateau] edge [uniform on a ring]. */
static void cut(smooth *s, const th_ends *ends, double half)
{
    const slope *b = &s->edge[0], *w = &s->edge[1];
    bool ring = ends->kind == TH_ENDS_RING;
    double seam = ends->circumference / 2, first = HUGE_VAL, last = -HUGE_VAL, low, high;

    if (!b->present && !w->present) { /* uniform throughout */
        s->at[0] = ring ? -seam : -half;
        add_piece(s, ring ? seam : half, true, s->c_p);
        return;
    }
    for (int i = 0; i < 2; i++) {
        const slope *e = &s->edge[i];

        if (e->present) {
            first = fmin(first, e->x - reach(s, e, s->left));
            last = fmax(last, e->x + reach(s, e, s->right));
        }
    }
    low = b->present ? b->x + reach(s, b, s->c_p) : first;
    high = w->present ? w->x - reach(s, w, s->c_p) : last;
    s->at[0] = first;
    if (ring) {
        s->at[0] = -seam;
        if (first > -seam)
            add_piece(s, first, true, s->left);
    }
    last = ring ? fmin(last, seam) : last;
    if (b->present && w->present && low < high) {
        add_piece(s, low, false, 0);
        add_piece(s, high, true, s->c_p);
    }
    add_piece(s, last, false, 0);
    if (ring && last < seam)
        add_piece(s, seam, true, s->right);
}

static th_status build(const double *value, const bool *given, double density, const th_ends *ends,
                       th_flow **out, th_error *err)
{
    th_status st = TH_EBUG;
    th_error inner = {0};
    double half = value[GAP] / 2;
    th_feature feature[2];
    th_flow_spec spec = {.eval = eval, .release = free, .feature = feature};
    smooth *s = NULL;

    (void)given;
    st = th_shape_fits_ring(ends, value[SOUND_UPSTREAM], value[SOUND_DOWNSTREAM], value[GAP], err);
    if (st != TH_OK)
        return st;
    s = th_alloc(1, sizeof *s);
    if (s == NULL)
        return th_fail(err, TH_ENOMEM, "shape tanh: its parameters");
    s->n = density;
    s->v = value[SPEED];
    s->c_p = value[SOUND_POCKET];
    s->left = value[SOUND_UPSTREAM];
    s->right = value[SOUND_DOWNSTREAM];
    s->edge[0] = (slope){.side = -1, .width = value[WIDTH_BLACK], .outer = s->left};
    s->edge[1] = (slope){.side = 1, .width = value[WIDTH_WHITE], .outer = s->right};
    st = place(&s->edge[0], -half, s->v, s->c_p, "sound_upstream", err);
    if (st != TH_OK)
        goto done;
    st = place(&s->edge[1], half, s->v, s->c_p, "sound_downstream", err);
    if (st != TH_OK)
        goto done;
    if (ends->kind == TH_ENDS_RING) {
        st = check_seam(s, ends->circumference / 2, err);
        if (st != TH_OK)
            goto done;
    }
    cut(s, ends, half);
    for (int i = 0; i < 2; i++)
        if (s->edge[i].present)
            feature[spec.features++] = (th_feature){.x = s->edge[i].x, .width = s->edge[i].width};
    spec.ctx = s;
    spec.pieces = s->pieces;
    spec.edge = s->at;
    spec.uniform = s->uniform;
    st = th_flow_create(&spec, ends, out, &inner);
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
    free(s);
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
