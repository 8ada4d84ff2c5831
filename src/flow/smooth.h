/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A smooth curve through measured values, private to src/flow. What goes in: rows x, y with or
 * without standard deviations. What comes out: a spline of degree 5 on as few intervals as the rows
 * ask for, what is uncertain about it, and how noisy the rows are.
 *
 * The curve f minimises  Sum w (y - f)^2 + lambda Int f'''^2 dx,  w = 1/sigma^2, with
 * lambda = l^6 times the weight per length: a wave of wave number k in the rows is damped by 1/(1 +
 * (k l)^6). l is the strength. Given the rows, f has the covariance s^2 (B' W B + lambda P)^-1:
 * "Bayesian confidence intervals for the cross-validated smoothing spline", J. R. Statist. Soc. B
 * 45, 133 (1983). Depends on spline, band, workspace. Proved by tests/test_smooth.c. */
#ifndef TH_FLOW_SMOOTH_H
#define TH_FLOW_SMOOTH_H

#include <stdbool.h>
#include "../workspace.h"
#include "twinhorizon/status.h"

typedef struct {
    int rows;            /* > 2 TH_SPLINE_LOCAL */
    const double *x;     /* [rows] ascending */
    const double *y;     /* [rows] */
    const double *sigma; /* [rows] standard deviations; NULL: unknown, the same for all */
    double strength;     /* l; < 0: by generalised cross-validation */
    int directions_max;
} th_smooth_rows;

typedef struct {
    th_workspace *workspace;
    int intervals;     /* <= TH_SMOOTH_INTERVALS */
    double *knot;      /* [intervals + 1] */
    double *coef;      /* [th_spline_size(intervals)] */
    double *inverse;   /* band of A^-1: the covariance of coef over spread^2 */
    int directions;    /* coef + sum of direction[i] times independent standard normal numbers */
    double *direction; /* [directions][th_spline_size(intervals)] */
    double dropped;    /* share of the variance at the rows that no direction held; the directions
                          were widened by 1/sqrt(1 - dropped) for it */
    double strength;   /* l in force */
    bool chosen;       /* by cross-validation */
    double freedom;    /* degrees of freedom of the curve */
    double noise;      /* standard deviation of the rows about it */
    double spread;     /* s: sigma = 1 or as given must be multiplied by this, > 0 */
    double together;   /* part of it: 1, or more where residuals of neighbours go together */
    bool known;        /* rows had a sigma */
} th_smooth;

/* More pieces of a flow than this cost more than they tell. */
enum { TH_SMOOTH_INTERVALS = 195 };

/**
 * Fit. Intervals are halved where that lowers the residuals by more than noise explains, so that
 * the knots smooth too; with a given strength they are halved down to it, and it alone smooths.
 * Without sigma s^2 = RSS/(rows - freedom); with sigma s^2 is the same of the weighted
 * residuals where that exceeds 1, else 1. Both grow where residuals of neighbouring rows go
 * together: the noise is not that of independent rows, or the curve cannot follow. Generalised
 * cross-validation: "Smoothing noisy data with spline functions", Numer. Math. 31, 377 (1979);
 * three quarters of the strength it finds are taken.
 * @retval TH_EINVAL  strength = 0 and too few rows in some place for a unique curve; sigma beyond
 *                    what can be squared
 * @retval TH_ENOMEM  memory is short
 * On failure *out is empty. Cost: proportional to the rows.
 */
TH_MUST_USE th_status th_smooth_fit(const th_smooth_rows *rows, th_workspace *workspace,
                                    th_smooth *out, th_error *err);

void th_smooth_clear(th_smooth *fit);

/** One standard deviation of the curve at x. */
double th_smooth_deviation(const th_smooth *fit, double x);

#endif
