/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * External potentials, see trap.h. May call: data, status, GSL splines.
 * Symbols: f form of the potential, w width, t = (x + half)/w.
 * To add a profile: a word, its edges in th_trap_make, its formula in th_trap_value.
 * Proved by tests/test_potential.c. */
#include "trap.h"

#include <math.h>

const char *const th_trap_word[] = {"well", "step", "barrier", "barriers", "table", NULL};

/* A tail is constant where it has fallen to this part of the depth: tanh edges and Gaussians in
 * widths. (1 - tanh 20)/2 = 4e-18; exp(-6.4^2) = 2e-18. */
#define TANH_REACH  20.0
#define GAUSS_REACH 6.4
/* The same to a millionth. */
#define TANH_CORE  7.0
#define GAUSS_CORE 3.7
/* A table must be flat at its ends: over the outer parts of this length it may differ from its
 * value there by this share of its whole range. */
#define FLAT_PART  0.03
#define FLAT_SHARE 1e-3

static double step_up(double t) /* (1 + tanh t)/2 without cancellation */
{
    return t < 0 ? exp(2 * t) / (1 + exp(2 * t)) : 1 / (1 + exp(-2 * t));
}

/* One piece from left - reach to right + reach, with its core. */
static void set_edges(th_trap *t, double left, double right, double reach, double core)
{
    t->pieces = 1;
    t->edge[0] = left - reach;
    t->edge[1] = right + reach;
    t->core[0] = left - core;
    t->core[1] = right + core;
}

/* Largest departure from the value at an end over the outer part of the table. */
static double departure(const double *x, const double *v, int rows, bool left)
{
    const double reach = FLAT_PART * (x[rows - 1] - x[0]), end = left ? v[0] : v[rows - 1];
    double most = 0;

    for (int i = 0; i < rows; i++)
        if (left ? x[i] - x[0] <= reach : x[rows - 1] - x[i] <= reach)
            most = fmax(most, fabs(v[i] - end));
    return most;
}

static th_status make_table(th_trap *t, const th_data *table, th_error *err)
{
    const double *x = th_data_values(table, TH_DATA_X);
    const double *v = th_data_values(table, TH_DATA_POTENTIAL);
    const int rows = th_data_rows(table);
    double low, high;

    if (v == NULL)
        return th_fail_key(err, TH_EINVAL, "file", "%s has no column potential",
                           th_data_path(table));
    low = high = v[0];
    for (int i = 0; i < rows; i++) {
        low = fmin(low, v[i]);
        high = fmax(high, v[i]);
    }
    if (!(high > low))
        return th_fail_key(err, TH_EINVAL, "file", "%s: the potential is the same everywhere",
                           th_data_path(table));
    for (int side = 0; side < 2; side++) {
        const double off = departure(x, v, rows, side == 0) / (high - low);

        if (off > FLAT_SHARE)
            return th_fail_key(err, TH_EINVAL, "file",
                               "%s: the potential is not constant at its %s end: over the outer "
                               "%g %% of the table it changes by %.2g %% of its range, want %g %%",
                               th_data_path(table), side == 0 ? "left" : "right", 100 * FLAT_PART,
                               100 * off, 100 * FLAT_SHARE);
    }
    t->spline = gsl_spline_alloc(gsl_interp_steffen, (size_t)rows);
    if (t->spline == NULL)
        return th_fail(err, TH_ENOMEM, "potential: a spline of %d rows", rows);
    if (gsl_spline_init(t->spline, x, v, (size_t)rows) != 0)
        return th_fail(err, TH_EBUG, "potential: the spline of a table");
    t->first = v[0];
    t->last = v[rows - 1] - v[0];
    set_edges(t, x[0], x[rows - 1], 0, 0);
    return TH_OK;
}

th_status th_trap_make(th_trap_kind kind, double gap, double width, const th_data *table,
                       th_trap *out, th_error *err)
{
    const double half = gap / 2;

    *out = (th_trap){.kind = kind, .half = half, .width = width};
    if ((kind == TH_TRAP_BARRIER || kind == TH_TRAP_BARRIERS) && !(width > 0))
        return th_fail_key(err, TH_EINVAL, "width", "width = 0, a barrier wants > 0");
    switch (kind) {
    case TH_TRAP_WELL:
        out->features = 2;
        out->feature[0] = (th_feature){-half, width};
        out->feature[1] = (th_feature){half, width};
        set_edges(out, -half, half, TANH_REACH * width, TANH_CORE * width);
        return TH_OK;
    case TH_TRAP_STEP:
        out->features = 1;
        out->feature[0] = (th_feature){0, width};
        set_edges(out, 0, 0, TANH_REACH * width, TANH_CORE * width);
        if (!(width > 0))
            out->pieces = 0; /* nothing between the two constants */
        return TH_OK;
    case TH_TRAP_BARRIER:
        out->features = 1;
        out->feature[0] = (th_feature){0, width};
        set_edges(out, 0, 0, GAUSS_REACH * width, GAUSS_CORE * width);
        return TH_OK;
    case TH_TRAP_BARRIERS:
        out->features = 2;
        out->feature[0] = (th_feature){-half, width};
        out->feature[1] = (th_feature){half, width};
        set_edges(out, -half, half, GAUSS_REACH * width, GAUSS_CORE * width);
        return TH_OK;
    case TH_TRAP_TABLE:
        return make_table(out, table, err);
    }
    return th_fail(err, TH_EBUG, "potential: profile %d", (int)kind);
}

void th_trap_clear(th_trap *trap)
{
    if (trap->spline != NULL)
        gsl_spline_free(trap->spline);
    trap->spline = NULL;
}

double th_trap_value(const th_trap *t, int piece, double x)
{
    const double w = t->width;
    double a, b;

    switch (t->kind) {
    case TH_TRAP_WELL: /* -(tanh edges), each alone -1 inside */
        if (w > 0)
            return piece < 0 || piece >= t->pieces
                       ? 0 /* the difference of two steps, written as a product */
                       : -step_up((x + t->half) / w) * step_up((t->half - x) / w) *
                             -expm1(-4 * t->half / w);
        return piece == 0 ? -1 : 0;
    case TH_TRAP_STEP:
        return piece < 0 ? 0 : piece >= t->pieces || !(w > 0) ? -1 : -step_up(x / w);
    case TH_TRAP_BARRIER:
        return piece < 0 || piece >= t->pieces ? 0 : exp(-(x / w) * (x / w));
    case TH_TRAP_BARRIERS:
        a = (x + t->half) / w;
        b = (x - t->half) / w;
        return piece < 0 || piece >= t->pieces ? 0 : exp(-a * a) + exp(-b * b);
    case TH_TRAP_TABLE:
        return piece < 0            ? 0
               : piece >= t->pieces ? t->last
                                    : gsl_spline_eval(t->spline, x, NULL) - t->first;
    }
    return 0;
}

int th_trap_piece(const th_trap *t, double x)
{
    int piece = -1;

    while (piece < t->pieces && x >= t->edge[piece + 1])
        piece++;
    return piece;
}

bool th_trap_has_plateau(const th_trap *t)
{
    return t->kind != TH_TRAP_TABLE;
}

double th_trap_plateau(const th_trap *t)
{
    const bool one = t->kind == TH_TRAP_STEP || t->kind == TH_TRAP_BARRIER;

    return one ? t->edge[t->pieces] : 0;
}
