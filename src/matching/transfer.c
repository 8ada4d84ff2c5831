/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Transfer over one step by power series about its middle. In: a step's coefficients, omega. Out:
 * fundamental matrices. Calls nobody.
 * The series of all four solutions are built at once: term m + 1 of y' = A(t) y follows from
 * terms 0..m. Real coefficients times complex series; columns lie side by side so that the inner
 * loops vectorise. Symbols: a = 1/n, b = n, d = n c^2, J flux.
 * Proof: tests/test_matching.c. */
#include "matching/transfer.h"

#include <float.h>
#include <math.h>
#include <string.h>

enum { TERMS = 120, WIDTH = 8 }; /* WIDTH: four columns, real parts then imaginary parts */

/* series[component][term][column re, column im] */
typedef struct {
    double term[4][TERMS + 1][WIDTH];
} series;

/* sum_j coefficient[j] term[m - j] */
static inline void convolve(const double *restrict coefficient, int terms,
                            double (*restrict term)[WIDTH], int m, double *restrict sum)
{
    const int last = m < terms - 1 ? m : terms - 1;

    for (int w = 0; w < WIDTH; w++)
        sum[w] = coefficient[0] * term[m][w];
    for (int j = 1; j <= last; j++)
        for (int w = 0; w < WIDTH; w++)
            sum[w] += coefficient[j] * term[m - j][w];
}

/* out += (re + i im) in, columnwise */
static inline void add_times(double re, double im, const double *restrict in, double *restrict out)
{
    for (int w = 0; w < 4; w++) {
        out[w] += re * in[w] - im * in[w + 4];
        out[w + 4] += re * in[w + 4] + im * in[w];
    }
}

/* Term m + 1 of all components from terms 0..m; source (may be NULL) is the series that omega's
 * derivative acts on. Returns the size of the new term. */
static double next_term(const th_step *step, double flux, double complex omega, int m, series *s,
                        series *source)
{
    double by_inverse2[WIDTH], by_inverse4[WIDTH], by_density1[WIDTH], by_density3[WIDTH];
    double by_pressure[WIDTH], rate[4][WIDTH], size = 0.0;
    const double re = creal(omega), im = cimag(omega);

    convolve(step->inverse, step->inverse_terms, s->term[1], m, by_inverse2);
    convolve(step->inverse, step->inverse_terms, s->term[3], m, by_inverse4);
    convolve(step->density, step->density_terms, s->term[0], m, by_density1);
    convolve(step->density, step->density_terms, s->term[2], m, by_density3);
    convolve(step->pressure, step->pressure_terms, s->term[0], m, by_pressure);
    for (int w = 0; w < WIDTH; w++) {
        rate[0][w] = by_inverse2[w];
        rate[1][w] = 4.0 * (flux * by_inverse4[w] + by_pressure[w]);
        rate[2][w] = by_inverse4[w];
        rate[3][w] = -flux * by_inverse2[w];
    }
    add_times(4.0 * im, -4.0 * re, by_density3, rate[1]); /* -4 i omega n phi */
    add_times(-im, re, by_density1, rate[3]);             /* i omega n eta */
    if (source != NULL) {
        convolve(step->density, step->density_terms, source->term[0], m, by_density1);
        convolve(step->density, step->density_terms, source->term[2], m, by_density3);
        add_times(0.0, -4.0, by_density3, rate[1]);
        add_times(0.0, 1.0, by_density1, rate[3]);
    }
    for (int c = 0; c < 4; c++)
        for (int w = 0; w < WIDTH; w++) {
            s->term[c][m + 1][w] = rate[c][w] * step->half / (m + 1);
            size = fmax(size, fabs(s->term[c][m + 1][w]));
        }
    return size;
}

/* Sum of the series at t = 1 and t = -1. */
static void sum_up(const series *s, int last, th_matrix4 left, th_matrix4 right)
{
    for (int c = 0; c < 4; c++)
        for (int w = 0; w < 4; w++) {
            double re[2] = {0.0, 0.0}, im[2] = {0.0, 0.0}; /* even and odd terms */

            for (int m = last; m >= 0; m--) {
                re[m % 2] += s->term[c][m][w];
                im[m % 2] += s->term[c][m][w + 4];
            }
            right[c][w] = (re[0] + re[1]) + I * (im[0] + im[1]);
            left[c][w] = (re[0] - re[1]) + I * (im[0] - im[1]);
        }
}

th_status th_transfer_expand(const th_step *step, double flux, double complex omega, bool slope,
                             th_fundamental *out, th_error *err)
{
    series value, change;
    double largest = 1.0, before = 1.0, size = 1.0;
    int m = 0;

    for (int c = 0; c < 4; c++)
        for (int w = 0; w < WIDTH; w++) {
            value.term[c][0][w] = c == w ? 1.0 : 0.0;
            change.term[c][0][w] = 0.0;
        }
    /* two small terms in a row: odd and even parts have both died */
    while (m < TERMS && (m < 4 || fmax(size, before) > 0.05 * DBL_EPSILON * largest)) {
        before = size;
        size = next_term(step, flux, omega, m, &value, NULL);
        if (slope)
            size = fmax(size, next_term(step, flux, omega, m, &change, &value));
        largest = fmax(largest, size);
        m++;
    }
    if (m == TERMS || !isfinite(largest))
        return th_fail(
            err, TH_ECONVERGE,
            "matching: the series of a step does not converge at omega = %g%+gi (scaled)",
            creal(omega), cimag(omega));
    sum_up(&value, m, out->left, out->right);
    if (slope)
        sum_up(&change, m, out->left_slope, out->right_slope);
    return TH_OK;
}

/* a b without the detours of the C standard for infinities */
static inline double complex times(double complex a, double complex b)
{
    return (creal(a) * creal(b) - cimag(a) * cimag(b)) +
           I * (creal(a) * cimag(b) + cimag(a) * creal(b));
}

static inline double square(double complex a)
{
    return creal(a) * creal(a) + cimag(a) * cimag(a);
}

/* LU factors of a 4 x 4 matrix with row pivoting, in place; the diagonal holds inverses. */
static void factor(th_matrix4 a, int pivot[4])
{
    for (int j = 0; j < 4; j++) {
        int best = j;

        for (int i = j + 1; i < 4; i++)
            if (square(a[i][j]) > square(a[best][j]))
                best = i;
        pivot[j] = best;
        for (int l = 0; best != j && l < 4; l++) {
            const double complex swap = a[j][l];

            a[j][l] = a[best][l];
            a[best][l] = swap;
        }
        a[j][j] = conj(a[j][j]) / square(a[j][j]);
        for (int i = j + 1; i < 4; i++) {
            a[i][j] = times(a[i][j], a[j][j]);
            for (int l = j + 1; l < 4; l++)
                a[i][l] -= times(a[i][j], a[j][l]);
        }
    }
}

static void solve(th_matrix4 lu, const int pivot[4], double complex x[4])
{
    for (int j = 0; j < 4; j++) {
        const double complex swap = x[j];

        x[j] = x[pivot[j]];
        x[pivot[j]] = swap;
    }
    for (int i = 1; i < 4; i++)
        for (int j = 0; j < i; j++)
            x[i] -= times(lu[i][j], x[j]);
    for (int i = 3; i >= 0; i--) {
        for (int j = i + 1; j < 4; j++)
            x[i] -= times(lu[i][j], x[j]);
        x[i] = times(x[i], lu[i][i]);
    }
}

static void multiply(const double complex (*a)[4], const double complex x[4], double complex y[4])
{
    for (int i = 0; i < 4; i++) {
        double complex sum = 0.0;

        for (int j = 0; j < 4; j++)
            sum += times(a[i][j], x[j]);
        y[i] = sum;
    }
}

/* One solution y and its derivative z: q = left^{-1} y, then right q, and the product rule. */
static void carry(th_matrix4 lu, const int pivot[4], const double complex (*from_slope)[4],
                  const double complex (*to)[4], const double complex (*to_slope)[4], bool slope,
                  double complex y[4], double complex z[4])
{
    double complex q[4], r[4], s[4];

    memcpy(q, y, sizeof q);
    solve(lu, pivot, q);
    multiply(to, q, y);
    if (!slope)
        return;
    multiply(from_slope, q, r);
    for (int i = 0; i < 4; i++)
        r[i] = z[i] - r[i];
    solve(lu, pivot, r);
    multiply(to, r, s);
    multiply(to_slope, q, z);
    for (int i = 0; i < 4; i++)
        z[i] += s[i];
}

void th_transfer_carry(const th_fundamental *f, bool backwards, bool slope, th_frame *frame)
{
    th_matrix4 lu;
    int pivot[4];

    memcpy(lu, backwards ? f->right : f->left, sizeof lu);
    factor(lu, pivot);
    for (int i = 0; i < 2; i++) {
        if (backwards)
            carry(lu, pivot, f->right_slope, f->left, f->left_slope, slope, frame->y[i],
                  frame->z[i]);
        else
            carry(lu, pivot, f->left_slope, f->right, f->right_slope, slope, frame->y[i],
                  frame->z[i]);
    }
}

void th_transfer_matrix(const th_fundamental *f, bool slope, th_matrix4 value, th_matrix4 change)
{
    th_matrix4 lu;
    int pivot[4];

    memcpy(lu, f->left, sizeof lu);
    factor(lu, pivot);
    for (int j = 0; j < 4; j++) {
        double complex y[4] = {0}, z[4] = {0};

        y[j] = 1.0;
        carry(lu, pivot, f->left_slope, f->right, f->right_slope, slope, y, z);
        for (int i = 0; i < 4; i++) {
            value[i][j] = y[i];
            change[i][j] = z[i];
        }
    }
}
