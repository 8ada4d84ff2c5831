/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Symmetric band matrices of the spline fit, private to src/flow: row i holds the elements
 * (i, i - k), k = 0 .. TH_BAND - 1, at [i * TH_BAND + k]. Depends on nothing. Proved by
 * tests/test_smooth.c. */
#ifndef TH_FLOW_BAND_H
#define TH_FLOW_BAND_H

#include <stdbool.h>

enum { TH_BAND = 6 };

/** out = A x. */
void th_band_times(int n, const double *a, const double *x, double *out);

/** x' A y. */
double th_band_form(int n, const double *a, const double *x, const double *y);

/** A = L L', in place; false when A is not positive definite to rounding. */
bool th_band_factor(int n, double *a);

/** x = A^-1 x with the factor L. */
void th_band_solve(int n, const double *l, double *x);

/** The band of A^-1 from the factor L; "On computing certain elements of the inverse of a sparse
 * matrix", Commun. ACM 18, 177 (1975). */
void th_band_inverse(int n, const double *l, double *out);

/** Trace of A B, both symmetric and banded. */
double th_band_trace(int n, const double *a, const double *b);

#endif
