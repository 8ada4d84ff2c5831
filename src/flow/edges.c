/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Two tanh edges between three values, see edges.h. May call: flow, shapes (rules), status.
 *
 * Symbols: f the profile, rise = outer - f_p of an edge, t its scaled distance outwards from the
 * centre, g = exp(-2 |t|), T = tanh t.
 * To add a third edge: edge[] and th_edges_cut. Proved by tests/test_flow.c and
 * tests/test_edges.c. */
#include "edges.h"

#include <math.h>

bool th_edges_place(th_edges *edges, int which, double x, double value)
{
    th_edge *e = &edges->edge[which];
    /* going outwards (1 + tanh t)/2 = (value - f_p)/(outer - f_p), thus
     * exp(2 t) = (value - f_p)/(outer - value) */
    double ratio = (value - edges->pocket) / (e->outer - value);

    e->present = e->outer != edges->pocket;
    e->x = x;
    if (!e->present)
        return true;
    if (!(ratio > 0) || !isfinite(ratio))
        return false;
    e->x = x - e->side * e->width / 2 * log(ratio);
    return true;
}

/* Relative deviation of f^2 from `value` squared at distance x from the edge's centre. */
static double tail(const th_edges *s, const th_edge *e, double x, double value)
{
    return 2 * fabs(e->outer - s->pocket) / value * exp(-2 * fabs(x) / e->width);
}

/* How far from the edge's centre f differs from `value` by less than rounding. */
static double reach(const th_edges *s, const th_edge *e, double value, double sound)
{
    return th_tail_reach(tail(s, e, 0, value), e->width, sound);
}

static th_status check_seam(const th_edges *s, double seam, th_error *err)
{
    double left = 0;

    for (int i = 0; i < 2; i++) {
        const th_edge *e = &s->edge[i];

        if (!e->present)
            continue;
        if (!(fabs(e->x) < seam))
            return th_fail_key(err, TH_EINVAL, "gap",
                               "the edge of %s centred at %.6g does not fit on a ring of "
                               "circumference %.15g",
                               s->name, e->x, 2 * seam);
        left += fmax(tail(s, e, seam - e->x, e->outer), tail(s, e, seam + e->x, e->outer));
    }
    if (left > TH_SEAM_TOLERANCE)
        return th_fail_key(err, TH_EINVAL, "circumference",
                           "circumference = %.15g is too short: at the seam the square of the %s "
                           "still differs by %.3g (relative), want < %g",
                           2 * seam, s->name, left, TH_SEAM_TOLERANCE);
    return TH_OK;
}

static void add_piece(th_edges *s, double right, bool uniform, double value)
{
    s->uniform[s->pieces] = uniform;
    s->value[s->pieces] = value;
    s->at[++s->pieces] = right;
}

th_status th_edges_cut(th_edges *s, const th_ends *ends, double half, th_error *err)
{
    const th_edge *b = &s->edge[0], *w = &s->edge[1];
    bool ring = ends->kind == TH_ENDS_RING;
    double seam = ends->circumference / 2, first = HUGE_VAL, last = -HUGE_VAL, low, high;

    if (ring) {
        th_status st = check_seam(s, seam, err);

        if (st != TH_OK)
            return st;
    }
    if (!b->present && !w->present) { /* uniform throughout */
        s->at[0] = ring ? -seam : -half;
        add_piece(s, ring ? seam : half, true, s->pocket);
        return TH_OK;
    }
    for (int i = 0; i < 2; i++) {
        const th_edge *e = &s->edge[i];

        if (e->present) {
            first = fmin(first, e->x - reach(s, e, b->outer, s->sound[0]));
            last = fmax(last, e->x + reach(s, e, w->outer, s->sound[2]));
        }
    }
    low = b->present ? b->x + reach(s, b, s->pocket, s->sound[1]) : first;
    high = w->present ? w->x - reach(s, w, s->pocket, s->sound[1]) : last;
    s->at[0] = first;
    if (ring) {
        s->at[0] = -seam;
        if (first > -seam)
            add_piece(s, first, true, b->outer);
    }
    last = ring ? fmin(last, seam) : last;
    if (b->present && w->present && low < high) {
        add_piece(s, low, false, 0);
        add_piece(s, high, true, s->pocket);
    }
    add_piece(s, last, false, 0);
    if (ring && last < seam)
        add_piece(s, seam, true, w->outer);
    return TH_OK;
}

void th_edges_eval(const th_edges *s, int piece, double x, double f[3])
{
    double base = s->pocket, rest = 0;

    f[1] = f[2] = 0;
    if (piece < 0 || piece >= s->pieces || s->uniform[piece]) {
        f[0] = piece < 0            ? s->edge[0].outer
               : piece >= s->pieces ? s->edge[1].outer
                                    : s->value[piece];
        return;
    }
    for (int i = 0; i < 2; i++) {
        const th_edge *e = &s->edge[i];
        double t, g, sech2, rise = e->outer - s->pocket;

        if (!e->present)
            continue;
        /* Outwards of its centre an edge is counted from its outer value, so that what is added to
         * base is small and base exact: (1 + tanh t)/2 = 1 - g/(1 + g). */
        t = e->side * (x - e->x) / e->width;
        g = exp(-2 * fabs(t));
        sech2 = 4 * g / ((1 + g) * (1 + g));
        if (t > 0) {
            base = base == s->pocket ? e->outer : base + rise;
            rest -= rise * g / (1 + g);
        } else {
            rest += rise * g / (1 + g);
        }
        f[1] += e->side * rise * sech2 / (2 * e->width); /* T' = sech^2 t */
        f[2] -= rise * copysign((1 - g) / (1 + g), t) * sech2 / (e->width * e->width);
    }
    f[0] = base + rest;
}

void th_edges_spec(const th_edges *s, th_flow_spec *spec, th_feature *feature)
{
    spec->pieces = s->pieces;
    spec->edge = s->at;
    spec->uniform = s->uniform;
    spec->feature = feature;
    spec->features = 0;
    for (int i = 0; i < 2; i++)
        if (s->edge[i].present)
            feature[spec->features++] = (th_feature){.x = s->edge[i].x, .width = s->edge[i].width};
}
