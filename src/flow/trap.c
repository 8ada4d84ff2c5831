/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * External potentials, see trap.h. May call: data, smooth, spline, status.
 * Symbols: f form of the potential, w width, t = (x + half)/w.
 * To add a profile: a word, its edges in th_trap_make, its formula in th_trap_value.
 * Proved by tests/test_potential.c. */
#include "trap.h"

#include "spline.h"

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
#define FLAT_SHARE 3e-2
enum { FLAT_LOOKS = 64 };
/* Departure from the level of an end, over the range of a table, that the core begins with; and how
 * many places are looked at. */
#define CORE_SHARE 1e-5
enum { CORE_LOOKS = 2000 };

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

static double curve(const th_smooth *fit, double x)
{
    const int i = th_spline_find(fit->intervals, fit->knot, x);
    double power[TH_SPLINE_LOCAL];

    th_spline_powers(fit->intervals, fit->knot, fit->coef + i, i, x, power);
    return power[0];
}

/* Mean of the curve over the outer part of the table, and its largest departure from that. */
static double level(const th_smooth *fit, double end, double inwards, double *most)
{
    double sum = 0;

    *most = 0;
    for (int i = 0; i < FLAT_LOOKS; i++)
        sum += curve(fit, end + inwards * (i + 0.5) / FLAT_LOOKS) / FLAT_LOOKS;
    for (int i = 0; i < FLAT_LOOKS; i++)
        *most = fmax(*most, fabs(curve(fit, end + inwards * (i + 0.5) / FLAT_LOOKS) - sum));
    return sum;
}

/* The core begins where the curve leaves its level at this end by more than a share of its range or
 * what the noise of the rows leaves in it. */
static double core(const th_smooth *fit, double end, double other, double value, double range)
{
    const double least = fmax(CORE_SHARE * range, fit->noise / 2);
    double at = end;

    for (int i = 1; i < CORE_LOOKS; i++) {
        const double x = end + (other - end) * i / CORE_LOOKS;

        if (fabs(curve(fit, x) - value) > least)
            break;
        at = x;
    }
    return at;
}

static th_status make_table(th_trap *t, const th_data *table, th_error *err)
{
    const th_smooth_rows rows = {.rows = th_data_rows(table),
                                 .x = th_data_values(table, TH_DATA_X),
                                 .y = th_data_values(table, TH_DATA_POTENTIAL),
                                 .sigma = th_data_values(table, TH_DATA_POTENTIAL + TH_DATA_ERROR),
                                 .strength = -1};
    double left, right, reach, low, high;
    th_status st;

    if (rows.y == NULL)
        return th_fail_key(err, TH_EINVAL, "file", "%s has no column potential",
                           th_data_path(table));
    st = th_smooth_fit(&rows, NULL, &t->fit, err);
    if (st != TH_OK)
        return st;
    left = rows.x[0];
    right = rows.x[rows.rows - 1];
    low = high = rows.y[0];
    for (int i = 0; i < rows.rows; i++) {
        low = fmin(low, rows.y[i]);
        high = fmax(high, rows.y[i]);
    }
    if (!(high > low))
        return th_fail_key(err, TH_EINVAL, "file", "%s: the potential is the same everywhere",
                           th_data_path(table));
    reach = FLAT_PART * (right - left);
    for (int side = 0; side < 2; side++) {
        double most;
        const double here =
            side == 0 ? level(&t->fit, left, reach, &most) : level(&t->fit, right, -reach, &most);

        if (most > FLAT_SHARE * (high - low))
            return th_fail_key(err, TH_EINVAL, "file",
                               "%s: the potential is not constant at its %s end: over the outer "
                               "%g %% of the table it changes by %.2g %% of its range, want %g %%",
                               th_data_path(table), side == 0 ? "left" : "right", 100 * FLAT_PART,
                               100 * most / (high - low), 100 * FLAT_SHARE);
        *(side == 0 ? &t->first : &t->last) = here;
    }
    set_edges(t, left, right, 0, 0);
    t->core[0] = core(&t->fit, left, right, t->first, high - low);
    t->core[1] = core(&t->fit, right, left, t->last, high - low);
    t->last -= t->first;
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
    th_smooth_clear(&trap->fit);
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
        return piece < 0 ? 0 : piece >= t->pieces ? t->last : curve(&t->fit, x) - t->first;
    }
    return 0;
}

double th_trap_next_cut(const th_trap *t, double x)
{
    if (t->fit.intervals > 0 && x >= t->edge[0] && x < t->edge[1]) {
        const int i = th_spline_find(t->fit.intervals, t->fit.knot, x);

        return t->fit.knot[i + 1] > x ? t->fit.knot[i + 1] : HUGE_VAL;
    }
    for (int i = 0; i <= t->pieces; i++)
        if (t->edge[i] > x)
            return t->edge[i];
    return HUGE_VAL;
}

int th_trap_piece(const th_trap *t, double x)
{
    int piece = -1;

    while (piece < t->pieces && x >= t->edge[piece + 1])
        piece++;
    return piece;
}

double th_trap_plateau(const th_trap *t)
{
    const bool one = t->kind == TH_TRAP_STEP || t->kind == TH_TRAP_BARRIER;

    return one ? t->edge[t->pieces] : 0;
}
