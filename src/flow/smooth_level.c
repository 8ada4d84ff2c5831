/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Penalised spline fits on given knots, see smooth_level.h for what goes in and out and for the
 * symbols. May call: spline, band, workspace, status.
 * To choose l by another rule: score. Proved by tests/test_smooth.c. */
#include "smooth_level.h"

#include <math.h>
#include <string.h>

#include "band.h"
#include "spline.h"

/* The strength taken, over the one that cross-validation finds. That one predicts best, with as
 * much bias as noise, and error bars hold the noise only. The bias goes with l^6 and falls to a
 * sixth. Measured on a flow with 3 % noise: the error of a weak mode's growth rate goes from -1.4
 * standard deviations in the mean to -0.2, and the deviation of the strong mode grows by a tenth.
 */
static const double caution = 0.75;
/* Strengths tried: from this many mean distances of rows, where the shortest wave that rows can
 * show is damped by 1e-7, to the length of the table, in steps of this factor, then golden
 * section. */
static const double weakest = 0.02, factor_step = 1.5;
enum { GOLDEN_STEPS = 20 };

enum { LOCAL = TH_SPLINE_LOCAL };

typedef th_smooth_level level;

double th_smooth_weight(const th_smooth_rows *r, int i)
{
    return r->sigma != NULL ? 1 / (r->sigma[i] * r->sigma[i]) : 1;
}

static double lambda(const th_smooth_measure *w, double l)
{
    return w->weight / w->length * pow(l, 6);
}

void th_smooth_level_give(th_workspace *ws, level *v)
{
    th_give(ws, v->knot);
    th_give(ws, v->interval);
    th_give(ws, v->basis);
    th_give(ws, v->residual);
    th_give(ws, v->m);
    th_give(ws, v->p);
    th_give(ws, v->a);
    th_give(ws, v->inverse);
    th_give(ws, v->coef);
    th_give(ws, v->gradient);
    th_give(ws, v->step);
}

bool th_smooth_level_take(th_workspace *ws, int rows, level *v)
{
    const size_t n = (size_t)th_spline_size(TH_SMOOTH_FINE), many = (size_t)rows;

    v->knot = th_take(ws, TH_SMOOTH_FINE + 1, sizeof *v->knot);
    v->interval = th_take(ws, many, sizeof *v->interval);
    v->basis = th_take(ws, many * LOCAL, sizeof *v->basis);
    v->residual = th_take(ws, many, sizeof *v->residual);
    v->m = th_take(ws, n * TH_BAND, sizeof *v->m);
    v->p = th_take(ws, n * TH_BAND, sizeof *v->p);
    v->a = th_take(ws, n * TH_BAND, sizeof *v->a);
    v->inverse = th_take(ws, n * TH_BAND, sizeof *v->inverse);
    v->coef = th_take(ws, n, sizeof *v->coef);
    v->gradient = th_take(ws, n, sizeof *v->gradient);
    v->step = th_take(ws, n, sizeof *v->step);
    return v->knot != NULL && v->interval != NULL && v->basis != NULL && v->residual != NULL &&
           v->m != NULL && v->p != NULL && v->a != NULL && v->inverse != NULL && v->coef != NULL &&
           v->gradient != NULL && v->step != NULL;
}

/* Values of the B-splines and bands for the knots of a level. */
static void assemble(const th_smooth_measure *w, level *v)
{
    const th_smooth_rows *r = w->rows;
    int at = 0;

    v->size = th_spline_size(v->intervals);
    memset(v->m, 0, (size_t)v->size * TH_BAND * sizeof *v->m);
    for (int i = 0; i < r->rows; i++) {
        double *b = v->basis + i * LOCAL;
        const double wi = th_smooth_weight(r, i);

        while (at < v->intervals - 1 && r->x[i] >= v->knot[at + 1])
            at++;
        v->interval[i] = at;
        th_spline_basis(v->intervals, v->knot, at, r->x[i], b);
        for (int j = 0; j < LOCAL; j++) {
            for (int k = 0; k <= j; k++)
                v->m[(at + j) * TH_BAND + j - k] += wi * b[j] * b[k];
        }
    }
    th_spline_roughness(v->intervals, v->knot, v->p);
}

/* A = M + lambda P and its factor. */
static bool factorise(const th_smooth_measure *w, level *v, double l)
{
    const double strong = lambda(w, l);

    for (int i = 0; i < v->size * TH_BAND; i++)
        v->a[i] = v->m[i] + strong * v->p[i];
    return th_band_factor(v->size, v->a);
}

/* r, B'W r and Sum w r^2 of the coefficients in force. */
static void look(const th_smooth_measure *w, level *v)
{
    const th_smooth_rows *r = w->rows;

    v->rss = 0;
    memset(v->gradient, 0, (size_t)v->size * sizeof *v->gradient);
    for (int i = 0; i < r->rows; i++) {
        const double *b = v->basis + i * LOCAL, *c = v->coef + v->interval[i];
        double *g = v->gradient + v->interval[i];
        double left = r->y[i];
        const double wi = th_smooth_weight(r, i);

        for (int j = 0; j < LOCAL; j++)
            left -= b[j] * c[j];
        for (int j = 0; j < LOCAL; j++)
            g[j] += wi * b[j] * left;
        v->residual[i] = left;
        v->rss += wi * left * left;
    }
}

/* step = A^-1 (B'W r - lambda P c): what leads from c to the solution of the strength in a. */
static void correct(const th_smooth_measure *w, level *v, double l)
{
    const double strong = lambda(w, l);

    th_band_times(v->size, v->p, v->coef, v->step);
    for (int j = 0; j < v->size; j++)
        v->step[j] = v->gradient[j] - strong * v->step[j];
    th_band_solve(v->size, v->a, v->step);
}

/* Move c to the solution of strength l, whose factor is in a. */
static void move(const th_smooth_measure *w, level *v, double l)
{
    correct(w, v, l);
    for (int j = 0; j < v->size; j++)
        v->coef[j] += v->step[j];
    v->strength = l;
    look(w, v);
}

/* Generalised cross-validation of strength l, c staying where it is: with d the step to the
 * solution, RSS(c + d) = RSS(c) - 2 d'B'W r + d'M d, without cancellation. */
static double score(const th_smooth_measure *w, level *v, double l)
{
    double rss, left;

    if (!factorise(w, v, l))
        return HUGE_VAL;
    correct(w, v, l);
    rss = v->rss + th_band_form(v->size, v->m, v->step, v->step);
    for (int j = 0; j < v->size; j++)
        rss -= 2 * v->step[j] * v->gradient[j];
    th_band_inverse(v->size, v->a, v->inverse);
    left = w->rows->rows - th_band_trace(v->size, v->inverse, v->m);
    return fmax(rss, 0) / (left * left);
}

/* Strength of the lowest score. */
static double choose(const th_smooth_measure *w, level *v, double low)
{
    const double ratio = 0.61803398874989484820;
    double best = low, value = HUGE_VAL, a, b, x[2], f[2];

    for (double l = low; l <= w->length; l *= factor_step) {
        const double here = score(w, v, l);

        if (here < value) {
            value = here;
            best = l;
        }
    }
    a = log(best / factor_step);
    b = log(best * factor_step);
    for (int i = 0; i < 2; i++) {
        x[i] = i == 0 ? b - ratio * (b - a) : a + ratio * (b - a);
        f[i] = score(w, v, exp(x[i]));
    }
    for (int i = 0; i < GOLDEN_STEPS; i++) {
        const int worse = f[0] < f[1];

        if (worse == 1) {
            b = x[1];
            x[1] = x[0];
            f[1] = f[0];
        } else {
            a = x[0];
            x[0] = x[1];
            f[0] = f[1];
        }
        x[1 - worse] = worse == 1 ? b - ratio * (b - a) : a + ratio * (b - a);
        f[1 - worse] = score(w, v, exp(x[1 - worse]));
    }
    return exp(x[f[0] < f[1] ? 0 : 1]);
}

th_status th_smooth_level_fit(const th_smooth_measure *w, level *v, th_error *err)
{
    const double given = w->rows->strength;
    double l = given >= 0 ? given : weakest * w->length / w->rows->rows;

    assemble(w, v);
    while (!factorise(w, v, l)) {
        if (given >= 0 || l > w->length)
            return th_fail(err, TH_EINVAL,
                           "the rows do not determine a curve of strength %g: too few in some "
                           "place, or with too large errors",
                           l);
        l *= factor_step;
    }
    memset(v->coef, 0, (size_t)v->size * sizeof *v->coef);
    look(w, v);
    move(w, v, l);
    move(w, v, l); /* once more: residuals to rounding */
    if (given < 0) {
        l = caution * choose(w, v, l);
        if (!factorise(w, v, l))
            return th_fail(err, TH_EBUG, "smooth: strength %g was tried before", l);
        move(w, v, l);
        move(w, v, l);
    }
    th_band_inverse(v->size, v->a, v->inverse);
    v->trace = th_band_trace(v->size, v->inverse, v->m);
    return TH_OK;
}

double th_smooth_variance(const th_smooth_measure *w, const level *v)
{
    const double found = v->rss / fmax(w->rows->rows - v->trace, 1);

    return w->rows->sigma != NULL ? fmax(found, 1) : found;
}
