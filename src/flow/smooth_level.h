/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A penalised spline fit on given knots, private to smooth.c. What goes in: rows, knots. What comes
 * out: coefficients of the given strength or of the one that cross-validation finds.
 *
 * Symbols: B values of the B-splines at the rows, W weights, c coefficients, M = B'WB, P roughness,
 * A = M + lambda P, l strength, r residuals. Depends on spline, band, workspace. Proved by
 * tests/test_smooth.c. */
#ifndef TH_FLOW_SMOOTH_LEVEL_H
#define TH_FLOW_SMOOTH_LEVEL_H

#include "smooth.h"

/* Intervals of a level: all of a curve's, halved. */
enum { TH_SMOOTH_FINE = 2 * TH_SMOOTH_INTERVALS };

typedef struct {
    const th_smooth_rows *rows;
    double length, weight; /* of the table; weight of all rows for the distances between them */
} th_smooth_measure;

/* The rows on one set of knots. */
typedef struct {
    int intervals, size; /* size: coefficients */
    double *knot;        /* [TH_SMOOTH_FINE + 1] */
    int *interval;       /* [rows] of each row */
    double *basis;       /* [rows][LOCAL] */
    double *residual;    /* [rows] y - B c */
    double *m, *p, *a;   /* bands; a: factor of A */
    double *inverse;     /* band of A^-1 */
    double *coef;        /* [size] c, of strength l */
    double *gradient;    /* [size] B'W r */
    double *step;        /* [size] scratch */
    double strength;
    double rss;   /* Sum w r^2 */
    double trace; /* degrees of freedom, tr A^-1 M */
} th_smooth_level;

/** w of a row. */
double th_smooth_weight(const th_smooth_rows *rows, int i);

/** Arrays of a level; false when memory is short. They are given back in any case. */
bool th_smooth_level_take(th_workspace *workspace, int rows, th_smooth_level *level);
void th_smooth_level_give(th_workspace *workspace, th_smooth_level *level);

/**
 * Fit on the knots that are in level->knot.
 * @retval TH_EINVAL  the rows do not determine the coefficients
 */
TH_MUST_USE th_status th_smooth_level_fit(const th_smooth_measure *measure, th_smooth_level *level,
                                          th_error *err);

/** s^2 of a fitted level. */
double th_smooth_variance(const th_smooth_measure *measure, const th_smooth_level *level);

#endif
