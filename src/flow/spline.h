/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Splines of degree 5 with four continuous derivatives, private to src/flow. A spline on the
 * intervals between knot[0] < ... < knot[intervals] has TH_SPLINE_LOCAL - 1 + intervals
 * coefficients of B-splines; on interval i those with indices i .. i + TH_SPLINE_LOCAL - 1 count.
 * Source: "On calculating with B-splines", J. Approx. Theory 6, 50 (1972).
 * Depends on band. Proved by tests/test_smooth.c. */
#ifndef TH_FLOW_SPLINE_H
#define TH_FLOW_SPLINE_H

/* Degree 5: a flow needs n'', and it should be smooth. */
enum { TH_SPLINE_DEGREE = 5, TH_SPLINE_LOCAL = TH_SPLINE_DEGREE + 1 };

static inline int th_spline_size(int intervals)
{
    return intervals + TH_SPLINE_DEGREE;
}

/** Interval that holds x; the nearest one for x outside. */
int th_spline_find(int intervals, const double *knot, double x);

/** The TH_SPLINE_LOCAL B-splines that count on interval i, at x. */
void th_spline_basis(int intervals, const double *knot, int i, double x, double *value);

/** power[q] = f^(q)(x)/q! by the polynomial of interval i; local: the TH_SPLINE_LOCAL coefficients
 * that count there. */
void th_spline_powers(int intervals, const double *knot, const double *local, int i, double x,
                      double *power);

/** Band of the form Int f'''^2 dx in the coefficients. */
void th_spline_roughness(int intervals, const double *knot, double *band);

/** Mean of the knots that bend B-spline j: where it weighs most. */
double th_spline_place(int intervals, const double *knot, int j);

#endif
