/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * B-splines of degree 5 by their recurrence. Goes in: knots, coefficients. Comes out: values,
 * Taylor coefficients, the roughness form. Calls band. The recurrences are written out because
 * GSL's splines allocate, and on failure end the program unless its handler is turned off.
 * Symbols: t knots with the ends repeated, p degree, c coefficients.
 * Proved by tests/test_smooth.c and, against scipy, tests/check_profile.py. */
#include "spline.h"

#include <string.h>

#include "band.h"

enum { P = TH_SPLINE_DEGREE };

/* Knot of the row with P more at each end; interval i lies between t(i + P) and t(i + P + 1). */
static double t(int intervals, const double *knot, int j)
{
    j -= P;
    return knot[j < 0 ? 0 : j > intervals ? intervals : j];
}

int th_spline_find(int intervals, const double *knot, double x)
{
    int low = 0, high = intervals;

    while (high - low > 1) {
        const int middle = low + (high - low) / 2;

        if (x < knot[middle])
            high = middle;
        else
            low = middle;
    }
    return low;
}

void th_spline_basis(int intervals, const double *knot, int i, double x, double *value)
{
    double left[P + 1], right[P + 1];

    value[0] = 1;
    for (int d = 1; d <= P; d++) { /* from degree d - 1 to d */
        double carry = 0;

        left[d] = x - t(intervals, knot, i + P + 1 - d);
        right[d] = t(intervals, knot, i + P + d) - x;
        for (int r = 0; r < d; r++) {
            const double share = value[r] / (right[r + 1] + left[d - r]);

            value[r] = carry + right[r + 1] * share;
            carry = left[d - r] * share;
        }
        value[d] = carry;
    }
}

void th_spline_powers(int intervals, const double *knot, const double *local, int i, double x,
                      double *power)
{
    double slope[P + 1]; /* coefficients of the q-th derivative over q!, of degree P - q */

    memcpy(slope, local, sizeof slope);
    for (int q = 0; q <= P; q++) {
        double value[P + 1];

        memcpy(value, slope, sizeof value);
        for (int d = P - q; d > 0; d--) /* convex combinations, down to one number */
            for (int r = 0; r < d; r++) {
                const double a = t(intervals, knot, i + P + 1 - d + r);
                const double b = t(intervals, knot, i + P + 1 + r);

                value[r] = ((b - x) * value[r] + (x - a) * value[r + 1]) / (b - a);
            }
        power[q] = value[0];
        for (int r = 0; r < P - q; r++) /* (f^(q)/q!)' / (q + 1) */
            slope[r] = (P - q) / (q + 1.0) * (slope[r + 1] - slope[r]) /
                       (t(intervals, knot, i + P + 1 + r) - t(intervals, knot, i + q + 1 + r));
    }
}

void th_spline_roughness(int intervals, const double *knot, double *band)
{
    const int n = th_spline_size(intervals);

    memset(band, 0, (size_t)n * TH_BAND * sizeof *band);
    for (int i = 0; i < intervals; i++) {
        const double half = (knot[i + 1] - knot[i]) / 2;
        double third[P + 1][3]; /* f''' in powers of the distance from the middle */

        for (int j = 0; j <= P; j++) {
            double unit[P + 1] = {0}, power[P + 1];

            unit[j] = 1;
            th_spline_powers(intervals, knot, unit, i, knot[i] + half, power);
            third[j][0] = 6 * power[3];
            third[j][1] = 24 * power[4] * half;
            third[j][2] = 60 * power[5] * half * half;
        }
        for (int j = 0; j <= P; j++)
            for (int k = 0; k <= j; k++) {
                const double *a = third[j], *b = third[k];

                /* Int_-1^1 of u^m: 2, 2/3, 2/5 for m = 0, 2, 4 */
                band[(i + j) * TH_BAND + j - k] +=
                    half * (2 * a[0] * b[0] + 2.0 / 3 * (a[0] * b[2] + a[1] * b[1] + a[2] * b[0]) +
                            0.4 * a[2] * b[2]);
            }
    }
}

double th_spline_place(int intervals, const double *knot, int j)
{
    double sum = 0;

    for (int k = 1; k <= P; k++)
        sum += t(intervals, knot, j + k);
    return sum / P;
}
