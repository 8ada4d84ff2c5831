/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * From the rows of a table to its curves: which columns there are, logarithms and their errors, the
 * flux, whether the ends are uniform, and the note. Goes in: th_table_plan. Comes out: th_table.
 * May call: data, smooth, table, status.
 *
 * Symbols: J flux, e value of a curve at an end, s standard deviation.
 * To accept other columns: check_columns and th_table_make. Proved by tests/test_table_flow.c. */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "table.h"

/* A curve is fitted to log y, then to f + (y - e^f)/e^f, whose mean is f whatever the noise of y
 * and whose error does not go with it: one pass leaves half a per cent at 10 % noise, two 1e-4. */
enum { PASSES = 2 };
/* An end is uniform when the curve keeps this close to its mean there, relatively, or as close as
 * so many standard deviations of the curve: at 40 places of a table or so that are independent,
 * noise passes 5 in one of 50 000 tables. */
static const double uniform_share = 0.02, uniform_deviations = 5.0;
/* Places of an end that are looked at, and rows it needs for a mean. */
enum { PLACES = 64, ROWS_MIN = 3 };
/* The error of the mean flux is that of the means of so many stretches of rows: then a flux that
 * drifts along x counts, not only noise. */
enum { STRETCHES = 8 };

/* Share of the variance that error bars may leave out without a word. */
static const double told = 0.01;
/* Stated errors may be too small by this factor without a word: in 300 rows it differs from 1 by
 * 0.04 by chance. */
static const double told_factor = 1.1;
/* Relative noise below this is that of computed tables: rounding, or too few rows. */
static const double told_noise = 1e-6;
/* [flow] density and the table's own may differ by this, relatively: by the calibration of a
 * camera, not by a unit. */
static const double same_density = 0.1;

typedef struct {
    const th_table_plan *plan;
    th_table *table;
    int rows;
    double *x;     /* [rows] */
    double *value; /* [rows] of a column, signs taken off, in the order of x */
    double *error; /* [rows] or unused */
    double *y;     /* [rows] what is fitted */
    double *sigma; /* [rows] of y */
} reader;

static const char *curve_name(const th_table *t, int curve)
{
    return th_data_name(curve == TH_TABLE_SOUND ? TH_DATA_SOUND
                        : t->density            ? TH_DATA_DENSITY
                                                : TH_DATA_SPEED);
}

/* Columns against keys. */
static th_status check_columns(const th_table_plan *p, th_error *err)
{
    const bool speed = th_data_values(p->data, TH_DATA_SPEED) != NULL;
    const bool sound = th_data_values(p->data, TH_DATA_SOUND) != NULL;
    const bool density = th_data_values(p->data, TH_DATA_DENSITY) != NULL;

    if (!speed && !density)
        return th_fail_key(err, TH_EINVAL, "file",
                           "the table has neither a column speed nor a column density");
    if (!speed && !(p->flux > 0))
        return th_fail_key(err, TH_EINVAL, "flux",
                           "flux is missing, a table with a density and no speed needs it");
    if (speed && p->flux > 0)
        return th_fail_key(err, TH_EINVAL, "flux", "flux = %.15g, but the table has a speed",
                           p->flux);
    if (!sound && !(p->state.c_u > 0))
        return th_fail_key(err, TH_EINVAL, "sound_upstream",
                           "sound_upstream is missing, a table without a column sound needs it");
    if (sound && p->state.c_u > 0)
        return th_fail_key(err, TH_EINVAL, "sound_upstream",
                           "sound_upstream = %.15g, but the table has a column sound",
                           p->state.c_u);
    return TH_OK;
}

/* Place of row i of the flow in the table: a mirrored table is read backwards. */
static int row_at(const reader *r, int i)
{
    return r->table->mirrored ? r->rows - 1 - i : i;
}

/* A column and its error, by absolute value; false when it has no error. */
static bool load(const reader *r, th_data_column column, double *value, double *error)
{
    const double *from = th_data_values(r->plan->data, column);
    const double *wrong = th_data_values(r->plan->data, column + TH_DATA_ERROR);

    for (int i = 0; i < r->rows; i++) {
        value[i] = fabs(from[row_at(r, i)]);
        if (wrong != NULL)
            error[i] = wrong[row_at(r, i)];
    }
    return wrong != NULL;
}

/* Fit a curve to the logarithm of a column. */
static th_status fit(reader *r, int curve, th_data_column column, th_error *err)
{
    th_smooth *s = &r->table->fit[curve];
    const bool known = load(r, column, r->value, r->error);
    /* the first curve leaves half of the directions to the second, which takes what is left */
    const int most = curve + 1 < r->table->curves ? TH_TABLE_DIRECTIONS / 2 : TH_TABLE_DIRECTIONS;
    th_smooth_rows rows = {.rows = r->rows,
                           .x = r->x,
                           .y = r->y,
                           .sigma = known ? r->sigma : NULL,
                           .strength = r->plan->smoothing,
                           .directions_max = most - r->table->fit[0].directions * curve};
    th_error why = {0};

    for (int pass = 0; pass < PASSES; pass++) {
        th_status st;

        for (int i = 0; i < r->rows; i++) {
            double f = log(r->value[i]), power[TH_SPLINE_LOCAL];

            r->y[i] = f;
            if (pass > 0) {
                const int at = th_spline_find(s->intervals, s->knot, r->x[i]);

                th_spline_powers(s->intervals, s->knot, s->coef + at, at, r->x[i], power);
                f = power[0];
                r->y[i] = f + r->value[i] / exp(f) - 1;
            }
            r->sigma[i] = r->error[i] / exp(f);
        }
        th_smooth_clear(s);
        st = th_smooth_fit(&rows, r->plan->workspace, s, &why);
        if (st != TH_OK)
            return th_fail_key(err, st, r->plan->smoothing >= 0 ? "smoothing" : "file",
                               "column %s: %s", th_data_name(column), why.text);
    }
    return TH_OK;
}

/* J of rows with density and speed: the weighted mean of log n v, and how far rows are from it. */
static th_status find_flux(reader *r, th_error *err)
{
    th_table_flux *flux = &r->table->flux;
    double *const product = r->y, *const weight = r->sigma;
    double mean[STRETCHES], heavy[STRETCHES], sum = 0, total = 0;
    bool known = load(r, TH_DATA_DENSITY, r->value, r->error);

    for (int i = 0; i < r->rows; i++) {
        product[i] = log(r->value[i]);
        weight[i] = known ? r->error[i] * r->error[i] / (r->value[i] * r->value[i]) : 0;
    }
    known = load(r, TH_DATA_SPEED, r->value, r->error) && known;
    for (int i = 0; i < r->rows; i++) {
        product[i] += log(r->value[i]);
        weight[i] += known ? r->error[i] * r->error[i] / (r->value[i] * r->value[i]) : 1;
        weight[i] = known ? 1 / weight[i] : 1;
    }
    for (int b = 0, i = 0; b < STRETCHES; b++) {
        mean[b] = heavy[b] = 0;
        for (; i < (int)((long)r->rows * (b + 1) / STRETCHES); i++) {
            mean[b] += weight[i] * product[i];
            heavy[b] += weight[i];
        }
        sum += mean[b];
        total += heavy[b];
        mean[b] /= heavy[b];
    }
    flux->flux = exp(sum / total);
    for (int b = 0; b < STRETCHES; b++)
        flux->uncertainty += heavy[b] / total * pow(mean[b] - sum / total, 2) / (STRETCHES - 1);
    flux->uncertainty = sqrt(flux->uncertainty);
    for (int i = 0; i < r->rows; i++) {
        const double off = exp(product[i] - sum / total) - 1;

        flux->rms += off * off / r->rows;
        if (fabs(off) > fabs(flux->worst)) {
            flux->worst = off;
            flux->worst_at = r->x[i];
        }
    }
    flux->rms = sqrt(flux->rms);
    if (!isfinite(flux->flux) || !isfinite(flux->rms))
        return th_fail_key(err, TH_EINVAL, "file", "density times speed of the table overflows");
    return TH_OK;
}

/* Rows enough on the tapers, and curves that keep close to their means there. */
static th_status check_ends(const reader *r, th_error *err)
{
    const th_table *t = r->table;

    for (int curve = 0; curve < t->curves; curve++)
        for (int i = 0; i < 2 * (PLACES + 1); i++) {
            const bool right = i > PLACES;
            const double u = (double)(right ? i - PLACES - 1 : i) / PLACES * t->taper;
            const double x = right ? t->last - u : t->first + u;
            const th_smooth *s = &t->fit[curve];
            const int at = th_spline_find(s->intervals, s->knot, x);
            const double e = t->end[curve][right];
            double power[TH_SPLINE_LOCAL], off, allowed;

            th_spline_powers(s->intervals, s->knot, s->coef + at, at, x, power);
            off = expm1(power[0] - e);
            allowed = fmax(uniform_share, uniform_deviations * th_smooth_deviation(s, x));
            if (!(fabs(off) <= allowed))
                return th_fail_key(
                    err, TH_EINVAL, "file",
                    "%s is not uniform at the %s end: at x = %.6g it is %.3g %% %s its mean %.6g "
                    "over the taper, want within %.3g %%",
                    curve_name(t, curve), right ? "right" : "left", t->mirrored ? -x : x,
                    100 * fabs(off), off > 0 ? "above" : "below", exp(e), 100 * allowed);
        }
    return TH_OK;
}

static th_status check_taper(const reader *r, th_error *err)
{
    const th_table *t = r->table;
    int rows[2] = {0, 0};

    if (!(t->taper < (t->last - t->first) / 2))
        return th_fail_key(err, TH_EINVAL, "taper",
                           "taper = %.15g, want less than half the table's length %.15g", t->taper,
                           t->last - t->first);
    for (int i = 0; i < r->rows; i++) {
        rows[0] += r->x[i] <= t->first + t->taper;
        rows[1] += r->x[i] >= t->last - t->taper;
    }
    for (int end = 0; end < 2; end++)
        if (rows[end] < ROWS_MIN)
            return th_fail_key(err, TH_EINVAL, "taper",
                               "taper = %.15g holds %d rows at the %s end, want %d or more",
                               t->taper, rows[end], end == 0 ? "left" : "right", ROWS_MIN);
    return TH_OK;
}

/* The transverse equation of state needs the density itself, not only its ratio. */
static th_status check_density(const th_table *t, th_error *err)
{
    const double upstream = exp(t->end[TH_TABLE_MAIN][0]);

    if (t->density && t->state.a > 0 && !(fabs(upstream / t->state.n_u - 1) <= same_density))
        return th_fail_key(err, TH_EINVAL, "density",
                           "density = %.9g, but the table's is %.9g upstream", t->state.n_u,
                           upstream);
    return TH_OK;
}

/* The curves of a reader whose arrays are there. */
static th_status make(reader *r, th_error *err)
{
    const th_table_plan *p = r->plan;
    th_table *t = r->table;
    const double *x = th_data_values(p->data, TH_DATA_X);
    const double *speed = th_data_values(p->data, TH_DATA_SPEED);
    th_status st;

    t->mirrored = speed != NULL && speed[0] < 0;
    for (int i = 0; i < r->rows; i++)
        r->x[i] = t->mirrored ? -x[row_at(r, i)] : x[i];
    t->first = r->x[0];
    t->last = r->x[r->rows - 1];
    st = check_taper(r, err);
    if (st == TH_OK && t->density && speed != NULL)
        st = find_flux(r, err);
    else if (t->density)
        t->flux.flux = p->flux;
    if (st == TH_OK)
        st = fit(r, TH_TABLE_MAIN, t->density ? TH_DATA_DENSITY : TH_DATA_SPEED, err);
    if (st == TH_OK && t->curves > TH_TABLE_SOUND)
        st = fit(r, TH_TABLE_SOUND, TH_DATA_SOUND, err);
    if (st == TH_OK)
        st = th_table_cut(t, err);
    if (st == TH_OK)
        st = check_ends(r, err);
    return st == TH_OK ? check_density(t, err) : st;
}

th_status th_table_make(const th_table_plan *plan, th_table *out, th_error *err)
{
    reader r = {.plan = plan, .table = out, .rows = th_data_rows(plan->data)};
    const size_t rows = (size_t)r.rows;
    th_status st = check_columns(plan, err);

    *out = (th_table){.workspace = plan->workspace,
                      .density = th_data_values(plan->data, TH_DATA_DENSITY) != NULL,
                      .curves = th_data_values(plan->data, TH_DATA_SOUND) != NULL ? 2 : 1,
                      .state = plan->state,
                      .stretch = plan->stretch,
                      .taper = plan->taper};
    if (st != TH_OK)
        return st;
    r.x = th_take(plan->workspace, rows, sizeof *r.x);
    r.value = th_take(plan->workspace, rows, sizeof *r.value);
    r.error = th_take(plan->workspace, rows, sizeof *r.error);
    r.y = th_take(plan->workspace, rows, sizeof *r.y);
    r.sigma = th_take(plan->workspace, rows, sizeof *r.sigma);
    if (r.x == NULL || r.value == NULL || r.error == NULL || r.y == NULL || r.sigma == NULL)
        st = th_fail(err, TH_ENOMEM, "table: no memory for %d rows", r.rows);
    else
        st = make(&r, err);
    th_give(plan->workspace, r.x);
    th_give(plan->workspace, r.value);
    th_give(plan->workspace, r.error);
    th_give(plan->workspace, r.y);
    th_give(plan->workspace, r.sigma);
    if (st != TH_OK)
        th_table_clear(out);
    return st;
}

void th_table_note(const th_table *t, int rows, char *note, size_t size)
{
    const double length = t->last - t->first;
    th_flow_point end[2];
    size_t used = (size_t)snprintf(note, size, "%d rows", rows);

    for (int c = 0; c < t->curves && used < size; c++) {
        const th_smooth *s = &t->fit[c];

        used +=
            (size_t)snprintf(note + used, size - used,
                             "; %s: noise %.2g %%, %.3g degrees of freedom on %d intervals, "
                             "smoothing %.3g %% of the table's length%s",
                             curve_name(t, c), 100 * s->noise, s->freedom, s->intervals,
                             100 * s->strength / length, s->chosen ? " by cross-validation" : "");
        if (s->known && s->spread > told_factor * s->together && used < size)
            used += (size_t)snprintf(note + used, size - used, ", stated errors times %.3g",
                                     s->spread / s->together);
        if (s->together > 1 && s->noise > told_noise && used < size)
            used += (size_t)snprintf(note + used, size - used,
                                     ", neighbouring rows go together, so error bars times %.2g",
                                     s->together);
        if (s->dropped > told && used < size)
            used += (size_t)snprintf(
                note + used, size - used,
                ", in too many directions, so that error bars hold %.2g %% of its variance and are "
                "widened",
                100 * (1 - s->dropped));
    }
    if (t->flux.rms > 0 && used < size)
        used += (size_t)snprintf(
            note + used, size - used,
            "; density times speed varies by %.2g %% (rms), %.2g %% at most, %.3g %% down the "
            "table; its mean is uncertain by %.2g %%",
            100 * t->flux.rms, 100 * fabs(t->flux.worst),
            100 * (t->flux.worst_at - t->first) / length, 100 * t->flux.uncertainty);
    th_table_eval(t, -1, 0, &end[0]);
    th_table_eval(t, t->pieces, 0, &end[1]);
    if (used < size)
        used += (size_t)snprintf(note + used, size - used,
                                 "; uniform ends over tapers of %.3g %% of the length, v/c = %.4g "
                                 "and %.4g, density downstream %.4g of upstream%s",
                                 100 * t->taper / length, end[0].v / end[0].c, end[1].v / end[1].c,
                                 end[1].n / end[0].n,
                                 t->mirrored ? "; mirrored, since all speeds were < 0" : "");
}
