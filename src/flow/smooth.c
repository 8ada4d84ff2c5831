/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Smooth curves: where the knots are, and what is uncertain. Goes in: rows, a strength. Comes out:
 * a curve, its covariance in independent directions. May call: smooth_level, spline, band,
 * workspace, status.
 *
 * Knots: an interval is halved as long as halves of all intervals fit the rows in it better than
 * noise explains. Symbols: as in smooth_level.h, and s spread.
 * To place knots by another rule: mark_worth. Proved by tests/test_smooth.c. */
#include "smooth.h"

#include <float.h>
#include <math.h>
#include <string.h>

#include "band.h"
#include "smooth_level.h"
#include "spline.h"

typedef th_smooth_level level;

/* An interval is halved when that lowers Sum w r^2 of its rows by more than this many s^2: as much
 * as one more coefficient takes from pure noise. */
static const double worth = 1.0;
/* Residuals of so many roundings of the largest value are no more than that. */
static const double roundings = 16.0;
/* Rows on either half of an interval at least: with fewer splines of degree 5 begin to follow each
 * row. */
enum { ROWS_IN_HALF = 2 };
/* Halvings of the whole before anything is asked of the rows. */
enum { FIRST_HALVINGS = 3 };
/* Neighbouring residuals correlate by less than this over sqrt(rows) where they are noise of
 * independent rows, but for one table in a thousand. */
static const double correlated = 3.0;
/* Part of the variance at the rows that the directions may leave out. */
static const double negligible = 1e-3;

enum { LOCAL = TH_SPLINE_LOCAL };

typedef struct {
    th_smooth_measure measure;
    const th_smooth_rows *rows;
    th_workspace *workspace;
    double rounding; /* weighted square of a residual that is rounding */
    level coarse, fine;
    bool *halve;  /* [TH_SMOOTH_FINE] */
    double *gain; /* [TH_SMOOTH_FINE] what halving an interval takes off Sum w r^2 */
} work;

/* Knots of `to`: those of `from` and the middles of the intervals in halve. */
static void halve(const work *w, const level *from, level *to)
{
    int n = 0;

    for (int i = 0; i < from->intervals; i++) {
        to->knot[n++] = from->knot[i];
        if (w->halve[i])
            to->knot[n++] = (from->knot[i] + from->knot[i + 1]) / 2;
    }
    to->knot[n] = from->knot[from->intervals];
    to->intervals = n;
}

/* Mark the intervals that have rows enough on both halves. */
static void mark_all(const work *w, const level *v)
{
    const th_smooth_rows *r = w->rows;
    int row = 0;

    for (int i = 0; i < v->intervals; i++) {
        const double middle = (v->knot[i] + v->knot[i + 1]) / 2;
        const bool last = i == v->intervals - 1;
        int half[2] = {0, 0};

        for (; row < r->rows && (last || r->x[row] < v->knot[i + 1]); row++)
            half[r->x[row] >= middle]++;
        w->halve[i] = half[0] >= ROWS_IN_HALF && half[1] >= ROWS_IN_HALF;
    }
}

/* Keep of the marked intervals those whose halves are worth it, and when that is too many those
 * that are worth more; false when none are left. */
static bool mark_worth(work *w)
{
    const level *c = &w->coarse, *f = &w->fine;
    const th_smooth_rows *r = w->rows;
    const double enough = worth * fmax(th_smooth_variance(&w->measure, f), w->rounding);
    int row = 0, count = c->intervals;

    for (int i = 0; i < c->intervals; i++) {
        for (w->gain[i] = 0; row < r->rows && c->interval[row] == i; row++)
            w->gain[i] += th_smooth_weight(r, row) * (c->residual[row] * c->residual[row] -
                                                      f->residual[row] * f->residual[row]);
        if (r->strength > 0 && c->knot[i + 1] - c->knot[i] > r->strength)
            w->gain[i] = HUGE_VAL; /* a given strength, and no knots, says what is smoothed */
    }
    for (int i = 0; i < c->intervals; i++) {
        w->halve[i] = w->halve[i] && w->gain[i] > enough;
        count += w->halve[i];
    }
    for (; count > TH_SMOOTH_INTERVALS; count--) { /* the one that is worth least stays whole */
        int least = -1;

        for (int i = c->intervals - 1; i >= 0; i--)
            if (w->halve[i] && (least < 0 || w->gain[i] < w->gain[least]))
                least = i;
        w->halve[least] = false;
    }
    return count > c->intervals;
}

/* Find the knots; leaves the fit on them in coarse. */
static th_status refine(work *w, th_error *err)
{
    level *c = &w->coarse, *f = &w->fine;
    th_status st;

    c->intervals = 1;
    c->knot[0] = w->rows->x[0];
    c->knot[1] = w->rows->x[w->rows->rows - 1];
    for (int i = 0; i < FIRST_HALVINGS; i++) {
        mark_all(w, c);
        halve(w, c, f);
        memcpy(c->knot, f->knot, (size_t)(f->intervals + 1) * sizeof *c->knot);
        c->intervals = f->intervals;
    }
    for (;;) {
        st = th_smooth_level_fit(&w->measure, c, err);
        if (st != TH_OK)
            return st;
        mark_all(w, c);
        halve(w, c, f);
        if (f->intervals == c->intervals)
            return TH_OK;
        st = th_smooth_level_fit(&w->measure, f, err);
        if (st != TH_OK || !mark_worth(w))
            return st;
        halve(w, c, f);
        memcpy(c->knot, f->knot, (size_t)(f->intervals + 1) * sizeof *c->knot);
        c->intervals = f->intervals;
    }
}

/* The covariance s^2 A^-1 as a sum of directions d d': each is what moves with the curve at the
 * place that is now the least certain, once what moves with the earlier places is known (the
 * pivoted Cholesky factor of the covariance at the places of the B-splines). Stops when the
 * variance at the rows that is left, s^2 tr(A^-1 M) - Sum d'M d, is negligible. */
static th_status find_directions(const work *w, const level *v, th_smooth *out, th_error *err)
{
    const int n = v->size, most = w->rows->directions_max;
    const double s2 = out->spread * out->spread, whole = s2 * v->trace;
    double *basis = th_take(w->workspace, (size_t)n * LOCAL, sizeof *basis);
    double *left = th_take(w->workspace, (size_t)n, sizeof *left); /* variance at a place */
    int *at = th_take(w->workspace, (size_t)n, sizeof *at);
    double rest = whole;
    th_status st = TH_OK;

    if (basis == NULL || left == NULL || at == NULL) {
        st = th_fail(err, TH_ENOMEM, "no memory for %d places of a curve", n);
        goto done;
    }
    for (int j = 0; j < n; j++) {
        const double x = th_spline_place(v->intervals, v->knot, j);

        at[j] = th_spline_find(v->intervals, v->knot, x);
        th_spline_basis(v->intervals, v->knot, at[j], x, basis + j * LOCAL);
        left[j] = th_smooth_deviation(out, x);
        left[j] *= left[j];
    }
    while (out->directions < most && out->directions < n && rest > negligible * whole) {
        double *d = out->direction + out->directions * n;
        double size = 0;
        int top = 0;

        for (int j = 1; j < n; j++)
            if (left[j] > left[top])
                top = j;
        memset(d, 0, (size_t)n * sizeof *d);
        for (int k = 0; k < LOCAL; k++)
            d[at[top] + k] = s2 * basis[top * LOCAL + k];
        th_band_solve(n, v->a, d);
        for (int i = 0; i < out->directions; i++) {
            const double *e = out->direction + i * n;
            double part = 0;

            for (int k = 0; k < LOCAL; k++)
                part += e[at[top] + k] * basis[top * LOCAL + k];
            for (int j = 0; j < n; j++)
                d[j] -= part * e[j];
        }
        for (int k = 0; k < LOCAL; k++)
            size += d[at[top] + k] * basis[top * LOCAL + k];
        if (!(size > 0)) /* what is left is rounding */
            break;
        for (int j = 0; j < n; j++)
            d[j] /= sqrt(size);
        for (int j = 0; j < n; j++) {
            double moves = 0;

            for (int k = 0; k < LOCAL; k++)
                moves += d[at[j] + k] * basis[j * LOCAL + k];
            left[j] = j == top ? 0 : left[j] - moves * moves;
        }
        rest -= th_band_form(n, v->m, d, d);
        out->directions++;
    }
    out->dropped = whole > 0 ? fmax(rest, 0) / whole : 0;
    for (int i = 0; i < out->directions * n; i++) /* so that their sum is the whole variance */
        out->direction[i] /= sqrt(1 - out->dropped);
done:
    th_give(w->workspace, basis);
    th_give(w->workspace, left);
    th_give(w->workspace, at);
    return st;
}

/* By how much residuals that go together in neighbouring rows make the curve less certain than as
 * many independent ones: (1 + q)/(1 - q) in the variance for residuals that fade by q a row (sum of
 * the geometric series of their correlations). 1 when they are independent. */
static double togetherness(const work *w, const level *v)
{
    const th_smooth_rows *r = w->rows;
    double q = 0;

    for (int i = 1; i < r->rows; i++)
        q += v->residual[i] * v->residual[i - 1] *
             sqrt(th_smooth_weight(r, i) * th_smooth_weight(r, i - 1));
    q = v->rss > 0 ? q / v->rss : 0;
    return q > correlated / sqrt(r->rows) ? sqrt((1 + q) / (1 - q)) : 1;
}

/* Copy what the caller keeps of a fitted level. */
static th_status hand_out(const work *w, const level *v, th_smooth *out, th_error *err)
{
    const size_t n = (size_t)v->size, many = (size_t)(v->intervals + 1);
    const int rows = w->rows->rows;
    double sum = 0;

    out->knot = th_take(w->workspace, many, sizeof *out->knot);
    out->coef = th_take(w->workspace, n, sizeof *out->coef);
    out->inverse = th_take(w->workspace, n * TH_BAND, sizeof *out->inverse);
    out->direction =
        th_take(w->workspace, n * (size_t)w->rows->directions_max, sizeof *out->direction);
    if (out->knot == NULL || out->coef == NULL || out->inverse == NULL || out->direction == NULL)
        return th_fail(err, TH_ENOMEM, "no memory for a curve of %d intervals", v->intervals);
    memcpy(out->knot, v->knot, many * sizeof *out->knot);
    memcpy(out->coef, v->coef, n * sizeof *out->coef);
    memcpy(out->inverse, v->inverse, n * TH_BAND * sizeof *out->inverse);
    for (int i = 0; i < rows; i++)
        sum += v->residual[i] * v->residual[i];
    out->intervals = v->intervals;
    out->strength = v->strength;
    out->chosen = w->rows->strength < 0;
    out->freedom = v->trace;
    out->noise = sqrt(sum / fmax(rows - v->trace, 1));
    /* rows without any noise still round */
    out->together = togetherness(w, v);
    out->spread = fmax(sqrt(th_smooth_variance(&w->measure, v)) * out->together, DBL_MIN);
    out->known = w->rows->sigma != NULL;
    return find_directions(w, v, out, err);
}

th_status th_smooth_fit(const th_smooth_rows *rows, th_workspace *workspace, th_smooth *out,
                        th_error *err)
{
    work w = {.measure = {.rows = rows}, .rows = rows, .workspace = workspace};
    double largest = 0;
    th_status st = TH_EBUG;

    *out = (th_smooth){.workspace = workspace};
    w.measure.length = rows->x[rows->rows - 1] - rows->x[0];
    for (int i = 0; i < rows->rows; i++) {
        w.measure.weight += th_smooth_weight(rows, i);
        largest = fmax(largest, fabs(rows->y[i]));
        if (!isfinite(w.measure.weight))
            return th_fail(err, TH_EINVAL, "a relative error of %g is too small to be squared",
                           rows->sigma[i]);
    }
    w.measure.weight *= 1 - 1.0 / rows->rows; /* rows stand for the distances between them */
    w.rounding = w.measure.weight / rows->rows * pow(roundings * DBL_EPSILON * largest, 2);
    w.halve = th_take(workspace, TH_SMOOTH_FINE, sizeof *w.halve);
    w.gain = th_take(workspace, TH_SMOOTH_FINE, sizeof *w.gain);
    if (w.halve == NULL || w.gain == NULL ||
        !th_smooth_level_take(workspace, rows->rows, &w.coarse) ||
        !th_smooth_level_take(workspace, rows->rows, &w.fine)) {
        st = th_fail(err, TH_ENOMEM, "no memory to fit %d rows", rows->rows);
        goto done;
    }
    st = refine(&w, err);
    if (st == TH_OK)
        st = hand_out(&w, &w.coarse, out, err);
done:
    th_smooth_level_give(workspace, &w.coarse);
    th_smooth_level_give(workspace, &w.fine);
    th_give(workspace, w.halve);
    th_give(workspace, w.gain);
    if (st != TH_OK)
        th_smooth_clear(out);
    return st;
}

void th_smooth_clear(th_smooth *fit)
{
    th_give(fit->workspace, fit->knot);
    th_give(fit->workspace, fit->coef);
    th_give(fit->workspace, fit->inverse);
    th_give(fit->workspace, fit->direction);
    *fit = (th_smooth){0};
}

double th_smooth_deviation(const th_smooth *fit, double x)
{
    const int at = th_spline_find(fit->intervals, fit->knot, x);
    double b[LOCAL], sum = 0;

    th_spline_basis(fit->intervals, fit->knot, at, x, b);
    for (int j = 0; j < LOCAL; j++)
        for (int k = 0; k <= j; k++)
            sum += (j == k ? 1 : 2) * b[j] * b[k] * fit->inverse[(at + j) * TH_BAND + j - k];
    return fit->spread * sqrt(sum);
}
