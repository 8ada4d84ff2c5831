/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Curves of a table as a flow: pieces, smooth ends, n, v, c with derivatives, moved copies. Goes
 * in: fitted curves. Comes out: values. May call: smooth, spline, state, workspace, status.
 *
 * Symbols: f, h the curves, e their values at the ends, S step, t place on a taper, J flux.
 * To add a curve: th_table_curve and evaluate. Proved by tests/test_table_flow.c. */
#include "table.h"

#include <math.h>
#include <string.h>

enum { LOCAL = TH_SPLINE_LOCAL };
/* A knot this close to the end of a taper, relative to the table, is taken for it: shorter pieces
 * would be lost in rounding. */
static const double same_place = 1e-6;

static double *powers(const th_table *t, int curve, int piece)
{
    return t->power + ((size_t)curve * (size_t)t->pieces + (size_t)piece) * LOCAL;
}

/* -1 on the taper of the left end, 1 on that of the right one, 0 between. */
static int side(const th_table *t, int piece)
{
    const double middle = (t->left[piece] + t->left[piece + 1]) / 2;

    return middle < t->first + t->taper ? -1 : middle > t->last - t->taper ? 1 : 0;
}

/* Merge ascending knots into the edges. */
static void merge(th_table *t, const double *knot, int count)
{
    double *edge = t->left;
    int n = t->pieces + 1;

    for (int i = 0; i < count; i++) {
        int at = n;

        while (at > 0 && edge[at - 1] > knot[i])
            at--;
        if ((at > 0 && knot[i] - edge[at - 1] <= same_place * (t->last - t->first)) ||
            (at < n && edge[at] - knot[i] <= same_place * (t->last - t->first)))
            continue;
        memmove(edge + at + 1, edge + at, (size_t)(n - at) * sizeof *edge);
        edge[at] = knot[i];
        n++;
    }
    t->pieces = n - 1;
}

/* Polynomials of a curve on the pieces, and its means over the tapers. */
static void fill(th_table *t, int curve, const th_smooth *fit, const double *coef)
{
    for (int i = 0; i < 2; i++)
        t->end[curve][i] = 0;
    for (int piece = 0; piece < t->pieces; piece++) {
        const double a = t->left[piece], length = t->left[piece + 1] - a;
        const int at = th_spline_find(fit->intervals, fit->knot, a + length / 2);
        const int where = side(t, piece);
        double *p = powers(t, curve, piece), sum = 0;

        th_spline_powers(fit->intervals, fit->knot, coef + at, at, a, p);
        for (int q = LOCAL - 1; q >= 0; q--) /* Int of the piece over its length */
            sum = sum * length + p[q] / (q + 1);
        if (where != 0)
            t->end[curve][where > 0] += sum * length / t->taper;
    }
}

/* S(u), S', S'': 0 at u = 0, 1 at u = 1, five derivatives zero at both, S' = 2772 u^5 (1 - u)^5. */
static void step(double u, double s[3])
{
    const double u5 = pow(u, 5), r = 1 - u, r4 = r * r * r * r;

    s[0] = u5 * u * (462 + u * (-1980 + u * (3465 + u * (-3080 + u * (1386 - 252 * u)))));
    s[1] = 2772 * u5 * r4 * r;
    s[2] = 13860 * pow(u, 4) * r4 * (1 - 2 * u);
}

/* A curve with its derivatives in x of the table. */
static void evaluate(const th_table *t, int curve, int piece, double x, double f[3])
{
    const double *p = powers(t, curve, piece);
    const double s = x - t->left[piece];
    const int where = side(t, piece);
    double e, bend[3], slope;

    f[0] = p[0] + s * (p[1] + s * (p[2] + s * (p[3] + s * (p[4] + s * p[5]))));
    f[1] = p[1] + s * (2 * p[2] + s * (3 * p[3] + s * (4 * p[4] + s * 5 * p[5])));
    f[2] = 2 * p[2] + s * (6 * p[3] + s * (12 * p[4] + s * 20 * p[5]));
    if (where == 0)
        return;
    e = t->end[curve][where > 0];
    step(fmin(1, (where < 0 ? x - t->first : t->last - x) / t->taper), bend);
    slope = -where / t->taper; /* du/dx */
    f[2] = f[2] * bend[0] + 2 * f[1] * bend[1] * slope + (f[0] - e) * bend[2] * slope * slope;
    f[1] = f[1] * bend[0] + (f[0] - e) * bend[1] * slope;
    f[0] = e + (f[0] - e) * bend[0];
}

void th_table_eval(const void *ctx, int piece, double x, th_flow_point *point)
{
    const th_table *t = ctx;
    const double *e = t->end[TH_TABLE_MAIN];
    const double sign = t->density ? 1 : -1; /* log n = sign f + constant */
    const double v_u = t->density ? t->flux.flux / exp(e[0]) : exp(e[0]);
    const bool outside = piece < 0 || piece >= t->pieces;
    double f[3] = {e[piece > 0], 0, 0}, h[3] = {t->end[TH_TABLE_SOUND][piece > 0], 0, 0};
    double ratio;

    if (!outside)
        evaluate(t, TH_TABLE_MAIN, piece, x / t->stretch, f);
    if (!outside && t->curves > TH_TABLE_SOUND)
        evaluate(t, TH_TABLE_SOUND, piece, x / t->stretch, h);
    f[1] *= sign / t->stretch;
    f[2] *= sign / (t->stretch * t->stretch);
    ratio = exp(sign * (f[0] - e[0]));
    *point = (th_flow_point){.n = t->state.n_u * ratio, .v = v_u / ratio};
    point->dn = point->n * f[1];
    point->ddn = point->n * (f[1] * f[1] + f[2]);
    point->dv = -point->v * f[1];
    if (t->curves > TH_TABLE_SOUND) {
        point->c = exp(h[0]);
        point->dc = point->c * h[1] / t->stretch;
    } else {
        point->c = th_state_sound(&t->state, point->n);
        point->dc = th_state_sound_slope(&t->state, point->n) * point->dn;
    }
}

th_status th_table_cut(th_table *t, th_error *err)
{
    size_t most = 3;

    for (int c = 0; c < t->curves; c++)
        most += (size_t)t->fit[c].intervals + 1;
    t->left = th_take(t->workspace, most, sizeof *t->left);
    t->power = th_take(t->workspace, TH_TABLE_CURVES * most * LOCAL, sizeof *t->power);
    if (t->left == NULL || t->power == NULL)
        return th_fail(err, TH_ENOMEM, "table: %zu pieces", most);
    t->left[0] = t->first;
    t->left[1] = t->first + t->taper;
    t->left[2] = t->last - t->taper;
    t->left[3] = t->last;
    t->pieces = 3;
    for (int c = 0; c < t->curves; c++)
        merge(t, t->fit[c].knot, t->fit[c].intervals + 1);
    for (int c = 0; c < t->curves; c++)
        fill(t, c, &t->fit[c], t->fit[c].coef);
    return TH_OK;
}

void th_table_clear(th_table *t)
{
    for (int c = 0; c < TH_TABLE_CURVES; c++)
        th_smooth_clear(&t->fit[c]);
    th_give(t->workspace, t->left);
    th_give(t->workspace, t->power);
    t->left = t->power = NULL;
}

int th_table_directions(const th_table *t)
{
    return t->fit[TH_TABLE_MAIN].directions + t->fit[TH_TABLE_SOUND].directions +
           (t->flux.uncertainty > 0);
}

th_status th_table_move(const th_table *t, int direction, double sigmas, th_table *out,
                        th_error *err)
{
    const size_t pieces = (size_t)t->pieces;
    double coef[TH_SMOOTH_INTERVALS + TH_SPLINE_DEGREE];
    int curve = 0;

    *out = *t;
    out->workspace = NULL;
    memset(out->fit, 0, sizeof out->fit);
    out->left = th_take(NULL, pieces + 1, sizeof *out->left);
    out->power = th_take(NULL, TH_TABLE_CURVES * pieces * LOCAL, sizeof *out->power);
    if (out->left == NULL || out->power == NULL) {
        th_table_clear(out);
        return th_fail(err, TH_ENOMEM, "table: %d pieces", t->pieces);
    }
    memcpy(out->left, t->left, (pieces + 1) * sizeof *out->left);
    memcpy(out->power, t->power, TH_TABLE_CURVES * pieces * LOCAL * sizeof *out->power);
    while (curve < t->curves && direction >= t->fit[curve].directions)
        direction -= t->fit[curve++].directions;
    if (curve == t->curves) { /* the last direction: the flux */
        out->flux.flux *= exp(sigmas * t->flux.uncertainty);
    } else {
        const th_smooth *fit = &t->fit[curve];
        const int n = th_spline_size(fit->intervals);

        for (int j = 0; j < n; j++)
            coef[j] = fit->coef[j] + sigmas * fit->direction[direction * n + j];
        fill(out, curve, fit, coef);
    }
    return TH_OK;
}
