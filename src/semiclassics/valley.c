/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Whether a pocket can be treated semiclassically, and its turning points. In: a flow, a pocket.
 * Out: th_valley. Calls flow, alloc.
 *
 * Symbols: b(x) top of the band at x, 0 at both horizons: a valley of -b. Turning points are where
 * b is omega; where b dips there are more than two. Proof: tests/test_semiclassics.c. */
#include "inside.h"

#include <gsl/gsl_sort.h>
#include <math.h>

#include "alloc.h"

/* Sides of an edge that differ by less are equal up to how a callback computes them. */
#define JUMP_TOLERANCE 1e-10
/* A dip of b by less than this part of its maximum is rounding. */
#define DIP_TOLERANCE 1e-9
/* Even samples between the horizons, as dense as th_flow_create probes a piece, times four; and
 * around each feature x + width sinh(j/GRADE), j = -GRADES .. GRADES: out to 70 widths. */
enum { EVEN = 256, GRADES = 40 };
#define GRADE 8.0
/* Golden section leaves 1e-8 of the bracket: b at a smooth maximum is then exact to rounding. */
enum { GOLDEN_STEPS = 40 };
/* Halvings from pocket size to the rounding of x. */
enum { BISECTIONS = 100 };

static double top_at(const th_flow *flow, double x)
{
    th_flow_point p;

    th_flow_at(flow, x, &p);
    return th_band_top(p.v, p.c);
}

static bool apart(double a, double b)
{
    return fabs(a - b) > JUMP_TOLERANCE * fabs(a);
}

/* Edges between the horizons; on a ring an edge also lies one circumference on. */
static th_status no_jumps(const th_valley *valley, double around, th_error *err)
{
    const th_flow *flow = valley->flow;
    const int pieces = th_flow_pieces(flow);
    int edges;
    const double *edge = th_flow_edges(flow, &edges);

    for (int i = 1; i < edges; i++) {
        const bool seam = i == pieces;
        const bool here = edge[i] >= valley->left && edge[i] <= valley->right;
        const bool next = around > 0 && edge[i] + around <= valley->right;
        th_flow_point l, r;

        if ((!here && !next) || (seam && around == 0))
            continue;
        th_flow_eval(flow, i - 1, edge[i], &l);
        th_flow_eval(flow, seam ? 0 : i, seam ? edge[0] : edge[i], &r);
        if (apart(l.n, r.n) || apart(l.v, r.v) || apart(l.c, r.c))
            return th_fail(err, TH_ENONE,
                           "semiclassics: the flow jumps at x = %g inside the pocket, want n, v "
                           "and c continuous from horizon to horizon",
                           edge[i]);
    }
    return TH_OK;
}

static th_status find_horizons(th_valley *valley, double around, th_error *err)
{
    int count;
    const th_horizon *h = th_flow_horizons(valley->flow, &count);
    int found = 0;

    for (int i = 0; i < count; i++) {
        const bool white = h[i].kind == TH_HORIZON_WHITE &&
                           (h[i].x == valley->right || h[i].x + around == valley->right);
        const bool black = h[i].kind == TH_HORIZON_BLACK && h[i].x == valley->left;

        if (!white && !black)
            continue;
        if (h[i].sharp || !(h[i].kappa > 0))
            return th_fail(err, TH_ENONE, "semiclassics: the %s horizon %s",
                           h[i].kind == TH_HORIZON_BLACK ? "black-hole" : "white-hole",
                           h[i].sharp ? "is sharp" : "has surface gravity 0");
        *(white ? &valley->white : &valley->black) = h[i];
        found += white ? 2 : 1;
    }
    return found == 3 ? TH_OK
                      : th_fail(err, TH_EBUG, "semiclassics: horizons of the pocket at x = %g",
                                valley->left);
}

/* Places to look at b, ascending; x == NULL only counts them (for an upper bound). */
static size_t places(const th_valley *valley, double around, double *x)
{
    int features;
    const th_feature *f = th_flow_features(valley->flow, &features);
    const int images = around > 0 ? 2 : 1;
    size_t n = 0;

    if (x == NULL)
        return EVEN + 1 + (size_t)features * (size_t)images * (2 * GRADES + 1);
    for (int i = 0; i <= EVEN; i++)
        x[n++] = valley->left + (valley->right - valley->left) * i / EVEN;
    for (int i = 0; i < features * images; i++)
        for (int j = -GRADES; j <= GRADES; j++) {
            const th_feature *at = &f[i % features];
            const double y = at->x + (i / features) * around + at->width * sinh(j / GRADE);

            if (y > valley->left && y < valley->right)
                x[n++] = y;
        }
    gsl_sort(x, 1, n);
    return n;
}

/* The maximum of b between the neighbours of its largest sample. */
static void refine_peak(th_valley *valley, double low, double high)
{
    const double golden = 0.6180339887498949;

    for (int i = 0; i < GOLDEN_STEPS; i++) {
        const double a = high - golden * (high - low), b = low + golden * (high - low);
        const double top_a = top_at(valley->flow, a), top_b = top_at(valley->flow, b);

        if (top_a > valley->top) {
            valley->top = top_a;
            valley->peak = a;
        }
        if (top_b > valley->top) {
            valley->top = top_b;
            valley->peak = b;
        }
        if (top_a > top_b)
            high = b;
        else
            low = a;
    }
}

/* The lowest place from which b rises again on the way from its maximum to a horizon. */
static void find_dip(th_valley *valley, const double *top, int best, int end)
{
    const int step = end > best ? 1 : -1;
    double least = top[best];

    for (int i = best; i != end + step; i += step) {
        least = fmin(least, top[i]);
        if (top[i] > least + DIP_TOLERANCE * valley->top)
            valley->single = fmin(valley->single, least);
    }
}

static th_status look(th_valley *valley, double around, th_error *err)
{
    th_status st = TH_EBUG;
    const size_t most = places(valley, around, NULL);
    double *x = th_alloc(most, sizeof *x), *top = th_alloc(most, sizeof *top);
    double low = HUGE_VAL, high = -HUGE_VAL;
    int n, best = 0;

    if (x == NULL || top == NULL) {
        st = th_fail(err, TH_ENOMEM, "semiclassics: room for %zu samples of the pocket", most);
        goto done;
    }
    n = (int)places(valley, around, x);
    for (int i = 0; i < n; i++) {
        th_flow_point p;

        th_flow_at(valley->flow, x[i], &p);
        top[i] = th_band_top(p.v, p.c);
        if (top[i] > top[best])
            best = i;
        low = fmin(low, log(p.n / p.c));
        high = fmax(high, log(p.n / p.c));
    }
    valley->impedance = high - low;
    valley->peak = x[best];
    valley->top = top[best];
    if (best == 0 || best == n - 1) {
        st = th_fail(err, TH_ENONE, "semiclassics: the pocket at x = %g is too shallow to resolve",
                     valley->left);
        goto done;
    }
    refine_peak(valley, x[best - 1], x[best + 1]);
    valley->single = valley->top;
    find_dip(valley, top, best, 0);
    find_dip(valley, top, best, n - 1);
    st = TH_OK;
done:
    free(top);
    free(x);
    return st;
}

th_status th_valley_look(const th_flow *flow, int pocket, th_valley *out, th_error *err)
{
    int count;
    const th_pocket *p = th_flow_pockets(flow, &count);
    const th_ends ends = th_flow_ends(flow);
    int edges;
    const double *edge = th_flow_edges(flow, &edges);
    /* as th_flow_pockets has it, to the last bit */
    const double around = ends.kind == TH_ENDS_RING ? edge[edges - 1] - edge[0] : 0;
    th_status st = TH_EBUG;

    if (pocket < 0 || pocket >= count)
        return th_fail(err, TH_EINVAL, "semiclassics: pocket = %d, want 0 <= pocket < %d", pocket,
                       count);
    *out = (th_valley){.flow = flow, .left = p[pocket].left, .right = p[pocket].right};
    st = find_horizons(out, around, err);
    if (st == TH_OK)
        st = no_jumps(out, around, err);
    if (st == TH_OK)
        st = look(out, around, err);
    return st;
}

/* b is above omega at `above`, below it at `below`: the last place above. */
static double turn(const th_flow *flow, double omega, double above, double below)
{
    for (int i = 0; i < BISECTIONS; i++) {
        const double middle = above / 2 + below / 2;

        if (middle == above || middle == below)
            break;
        if (top_at(flow, middle) > omega)
            above = middle;
        else
            below = middle;
    }
    return above;
}

void th_valley_turns(const th_valley *valley, double omega, double *left, double *right)
{
    *left = turn(valley->flow, omega, valley->peak, valley->left);
    *right = turn(valley->flow, omega, valley->peak, valley->right);
}
