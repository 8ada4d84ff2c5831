/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Symmetric band matrices: products, Cholesky factor, solution, band of the inverse. Goes in and
 * out: see band.h. Calls nothing. Symbols: L lower factor, Z inverse.
 * Proved by tests/test_smooth.c. */
#include "band.h"

#include <float.h>
#include <math.h>

static int least(int a, int b)
{
    return a < b ? a : b;
}

void th_band_times(int n, const double *a, const double *x, double *out)
{
    for (int i = 0; i < n; i++) {
        out[i] = a[i * TH_BAND] * x[i];
        for (int k = 1; k < TH_BAND && k <= i; k++) {
            out[i] += a[i * TH_BAND + k] * x[i - k];
            out[i - k] += a[i * TH_BAND + k] * x[i];
        }
    }
}

double th_band_form(int n, const double *a, const double *x, const double *y)
{
    double sum = 0;

    for (int i = 0; i < n; i++) {
        sum += a[i * TH_BAND] * x[i] * y[i];
        for (int k = 1; k < TH_BAND && k <= i; k++)
            sum += a[i * TH_BAND + k] * (x[i - k] * y[i] + x[i] * y[i - k]);
    }
    return sum;
}

bool th_band_factor(int n, double *a)
{
    for (int i = 0; i < n; i++) {
        double *row = a + i * TH_BAND;
        const double whole = row[0];

        for (int k = least(TH_BAND - 1, i); k >= 0; k--) {
            const double *other = a + (i - k) * TH_BAND; /* row of column j = i - k */
            double sum = row[k];

            for (int q = 1; k + q < TH_BAND && q <= i - k; q++) /* column j - q */
                sum -= row[k + q] * other[q];
            if (k > 0)
                row[k] = sum / other[0];
            else if (sum > n * DBL_EPSILON * whole) /* what is left is rounding otherwise */
                row[0] = sqrt(sum);
            else
                return false;
        }
    }
    return true;
}

void th_band_solve(int n, const double *l, double *x)
{
    for (int i = 0; i < n; i++) {
        for (int k = 1; k < TH_BAND && k <= i; k++)
            x[i] -= l[i * TH_BAND + k] * x[i - k];
        x[i] /= l[i * TH_BAND];
    }
    for (int i = n - 1; i >= 0; i--) {
        x[i] /= l[i * TH_BAND];
        for (int k = 1; k < TH_BAND && k <= i; k++)
            x[i - k] -= l[i * TH_BAND + k] * x[i];
    }
}

/* Element (i, j) of a band. */
static double at(const double *a, int i, int j)
{
    return i >= j ? a[i * TH_BAND + i - j] : a[j * TH_BAND + j - i];
}

void th_band_inverse(int n, const double *l, double *out)
{
    /* L' Z = L^-1 has 1/L_ii on its diagonal and nothing above it: row i of L' Z gives Z_ij,
     * j >= i, from the rows below. */
    for (int i = n - 1; i >= 0; i--) {
        const double pivot = l[i * TH_BAND];

        for (int j = least(n - 1, i + TH_BAND - 1); j >= i; j--) {
            double sum = j == i ? 1 / pivot : 0;

            for (int k = i + 1; k < n && k < i + TH_BAND; k++)
                sum -= l[k * TH_BAND + k - i] * at(out, k, j);
            out[j * TH_BAND + j - i] = sum / pivot;
        }
    }
}

double th_band_trace(int n, const double *a, const double *b)
{
    double sum = 0;

    for (int i = 0; i < n; i++) {
        sum += a[i * TH_BAND] * b[i * TH_BAND];
        for (int k = 1; k < TH_BAND && k <= i; k++)
            sum += 2 * a[i * TH_BAND + k] * b[i * TH_BAND + k];
    }
    return sum;
}
