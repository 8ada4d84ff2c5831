/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Horizons and pockets. Goes in: a flow and its samples. Comes out: where v - c changes sign, the
 * surface gravity there, the supersonic pockets and the top of their negative-energy band. May
 * call: sample, flow (evaluation), status.
 *
 * Symbols: n density, v speed, c sound speed, kappa = |d(c - v)/dx| surface gravity, k wave number,
 * s = k^2, omega frequency.
 * To add a number to th_pocket: a measure of one point and one line in fill_pocket.
 * Proved by tests/test_flow.c. */
#include "inside.h"

#include <gsl/gsl_math.h>
#include <stdlib.h>

/* v - c jumps at an edge when its two sides differ by more than this part of v; less is the noise
 * of a callback that computes the two sides differently. */
#define JUMP_TOLERANCE 1e-12
/* Halvings of a bracket: leave 1e-21 of the distance of two samples, below the rounding of x. */
enum { BISECTIONS = 70 };

double th_band_top(double v, double c)
{
    /* d omega/dk = 0 gives s^2/4 + s (c^2 - v^2/4) - c^2 (v^2 - c^2) = 0 for s = k^2, with
     * the positive root s = 2 (v^2/4 - c^2 + r), r = v sqrt(v^2/16 + c^2/2). */
    double b = v * v / 4 - c * c, r = v * sqrt(v * v / 16 + c * c / 2), s, p;

    if (!(v > c))
        return 0;
    s = b > 0 ? 2 * (b + r) : 2 * c * c * (v - c) * (v + c) / (r - b); /* without cancellation */
    /* omega = k (v - p), p = sqrt(c^2 + s/4), v - p = (v^2 - c^2 - s/4)/(v + p). */
    p = sqrt(c * c + s / 4);
    return sqrt(s) * ((v - c) * (v + c) - s / 4) / (v + p);
}

static double band_top(const th_flow_point *p)
{
    return th_band_top(p->v, p->c);
}

static double undulation_squared(const th_flow_point *p)
{
    return 4 * (p->v - p->c) * (p->v + p->c);
}

static double mach(const th_flow_point *p)
{
    return p->v / p->c;
}

/* The horizon between neighbouring samples, exactly one of which is supersonic. Neighbours across
 * the seam of a ring are the last and the first; a horizon there gets the position of the last. */
static th_horizon locate(const th_flow *flow, const th_flow_sample *left,
                         const th_flow_sample *right)
{
    bool black = th_flow_side(&right->point) > 0;
    const th_flow_point *l = &left->point, *r = &right->point;
    th_horizon h = {.kind = black ? TH_HORIZON_BLACK : TH_HORIZON_WHITE};
    double super = black ? right->x : left->x, other = black ? left->x : right->x;
    th_flow_point p = black ? *r : *l; /* the supersonic side */

    if (left->piece != right->piece || left > right) { /* at an edge or the seam */
        double jump = fabs((r->v - r->c) - (l->v - l->c));

        h.x = left->x;
        h.sharp = jump > JUMP_TOLERANCE * fmax(l->v, r->v);
        h.speed = (l->v + r->v) / 2;
    } else {
        for (int i = 0; i < BISECTIONS; i++) {
            double middle = super / 2 + other / 2;
            th_flow_point m;

            if (middle == super || middle == other)
                break;
            th_flow_eval(flow, left->piece, middle, &m);
            if (th_flow_side(&m) > 0) {
                super = middle;
                p = m;
            } else {
                other = middle;
            }
        }
        h.x = super;
        h.speed = p.v;
    }
    if (!h.sharp) {
        h.kappa = fabs(p.dc - p.dv);
        h.temperature = h.kappa / (2 * M_PI);
    }
    return h;
}

/* A crossing: sample index of its left neighbour, and the horizon. */
typedef struct {
    int left;
    th_horizon horizon;
} crossing;

/* All crossings in ascending order. Between samples of opposite sign, zeros aside, lies exactly
 * one: where the supersonic side begins. */
static int find_crossings(const th_flow *flow, const th_flow_sample *sample, int count,
                          crossing *found)
{
    bool ring = flow->ends.kind == TH_ENDS_RING;
    int first = 0, last, n = 0, steps;

    while (first < count && th_flow_side(&sample[first].point) == 0)
        first++;
    if (first == count)
        return 0;
    last = first;
    /* On a ring go once around, back to the first sample that has a sign. */
    steps = ring ? count : count - 1 - first;
    for (int s = 1; s <= steps; s++) {
        int i = (first + s) % count, side = th_flow_side(&sample[i].point), left, right;

        if (side == 0)
            continue;
        if (side != th_flow_side(&sample[last].point)) {
            left = side > 0 ? (i + count - 1) % count : last;
            right = (left + 1) % count;
            found[n].left = left;
            found[n++].horizon = locate(flow, &sample[left], &sample[right]);
        }
        last = i;
    }
    return n;
}

static int compare(const void *a, const void *b)
{
    const crossing *p = a, *q = b;

    return (p->left > q->left) - (p->left < q->left);
}

/* The pocket whose samples run from index first on, n of them (around the seam of a ring). */
static th_pocket fill_pocket(const th_flow *flow, const th_flow_sample *sample, int count,
                             int first, int n)
{
    static const th_flow_measure measure[3] = {band_top, undulation_squared, mach};
    double largest[3];
    th_pocket pocket = {0};

    for (int m = 0; m < 3; m++) {
        int best = first % count;

        for (int i = 1; i < n; i++) {
            int at = (first + i) % count;

            if (measure[m](&sample[at].point) > measure[m](&sample[best].point))
                best = at;
        }
        largest[m] = th_flow_refine(flow, sample, count, best, measure[m]);
    }
    pocket.omega_max = largest[0];
    pocket.undulation = sqrt(largest[1]);
    pocket.mach = largest[2];
    return pocket;
}

static int fill_pockets(th_flow *flow, const th_flow_sample *sample, int count, const crossing *at,
                        int crossings)
{
    bool ring = flow->ends.kind == TH_ENDS_RING;
    int n = 0;

    for (int i = 0; i < crossings; i++) {
        bool wraps = i == crossings - 1;
        const crossing *black = &at[i], *white = &at[wraps ? 0 : i + 1];

        if (black->horizon.kind != TH_HORIZON_BLACK || (wraps && !ring))
            continue;
        flow->pocket[n] = fill_pocket(flow, sample, count, black->left + 1,
                                      white->left - black->left + (wraps ? count : 0));
        flow->pocket[n].left = black->horizon.x;
        flow->pocket[n].right =
            white->horizon.x + (wraps ? flow->edge[flow->pieces] - flow->edge[0] : 0);
        n++;
    }
    return n;
}

th_status th_flow_find_horizons(th_flow *flow, const th_flow_sample *sample, int count,
                                th_error *err)
{
    th_status st = TH_EBUG;
    crossing *at = th_take(flow->workspace, (size_t)count, sizeof *at);
    int n;

    if (at == NULL) {
        st = th_fail(err, TH_ENOMEM, "horizons: room for %d crossings", count);
        goto done;
    }
    n = find_crossings(flow, sample, count, at);
    qsort(at, (size_t)n, sizeof *at, compare);
    flow->horizon = th_take(flow->workspace, (size_t)n, sizeof *flow->horizon);
    flow->pocket = th_take(flow->workspace, (size_t)n, sizeof *flow->pocket);
    if (flow->horizon == NULL || flow->pocket == NULL) {
        st = th_fail(err, TH_ENOMEM, "horizons: %d of them", n);
        goto done;
    }
    flow->horizons = n;
    for (int i = 0; i < n; i++)
        flow->horizon[i] = at[i].horizon;
    flow->pockets = fill_pockets(flow, sample, count, at, n);
    st = TH_OK;
done:
    th_give(flow->workspace, at);
    return st;
}

double th_flow_band_limit(const th_flow *flow)
{
    const double sound = th_flow_sound_max(flow);
    const int pieces = th_flow_pieces(flow);
    const bool open = th_flow_ends(flow).kind == TH_ENDS_OPEN;
    const th_pocket *pocket;
    const double *edge;
    double top = 0.0;
    int pockets, edges;

    pocket = th_flow_pockets(flow, &pockets);
    edge = th_flow_edges(flow, &edges);
    for (int i = 0; i < pockets; i++)
        top = fmax(top, pocket[i].omega_max);
    for (int i = open ? -1 : 0; i < pieces + (open ? 1 : 0); i++)
        for (int side = 0; side < 2; side++) {
            const int at = i < 0 ? 0 : i >= pieces ? pieces : i + side;
            th_flow_point point;

            th_flow_eval(flow, i, edge[at], &point);
            top = fmax(top, th_band_top(point.v, point.c));
        }
    return top > 0.0 ? top : 0.25 * sound * sound;
}
