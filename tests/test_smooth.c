/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Band matrices, splines and smooth curves. Outside references: GSL's B-splines, its dense Cholesky
 * factor and inverse, its Gauss-Legendre rule; the statistics of seeded noise. scipy stands in
 * tests/check_profile.py. */
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <cmocka.h>

#include <gsl/gsl_bspline.h>
#include <gsl/gsl_integration.h>
#include <gsl/gsl_linalg.h>

#include "flow/band.h"
#include "flow/smooth.h"
#include "flow/spline.h"
#include "flows.h"
#include "refuse.h"

enum { ROWS = 400, DIRECTIONS = 200 };

/* Standard normal: "A note on the generation of random normal deviates", Ann. Math. Stat. 29, 610
 * (1958). */
static double normal(uint64_t *seed)
{
    return sqrt(-2 * log(1 - draw(seed, 0, 1))) * cos(2 * pi * draw(seed, 0, 1));
}

/* Two edges of different width. */
static double edges(double x)
{
    return 0.3 * tanh((x + 4) / 0.8) - 0.4 * tanh((x - 3) / 0.5);
}

/* Uneven rows of a function on [-15, 15], with noise. */
static void sample(double (*f)(double), double noise, uint64_t seed, int rows, double *x, double *y)
{
    for (int i = 0; i < rows; i++) {
        const double u = i == 0 ? 0 : i == rows - 1 ? 1 : (i + draw(&seed, -0.3, 0.3)) / (rows - 1);

        x[i] = -15 + 30 * u;
        y[i] = f(x[i]) + (noise > 0 ? noise * normal(&seed) : 0);
    }
}

static th_smooth fit(int rows, const double *x, const double *y, const double *sigma,
                     double strength)
{
    const th_smooth_rows r = {rows, x, y, sigma, strength, DIRECTIONS};
    th_smooth s;
    th_error err = {0};

    if (th_smooth_fit(&r, NULL, &s, &err) != TH_OK)
        fail_msg("%s", err.text);
    return s;
}

static double value(const th_smooth *s, double x)
{
    const int at = th_spline_find(s->intervals, s->knot, x);
    double power[TH_SPLINE_LOCAL];

    th_spline_powers(s->intervals, s->knot, s->coef + at, at, x, power);
    return power[0];
}

static void test_band(void **state)
{
    enum { N = 17 };
    double band[N * TH_BAND], inverse[N * TH_BAND], x[N], y[N], product[N], trace = 0;
    gsl_matrix *full = gsl_matrix_calloc(N, N), *copy = gsl_matrix_alloc(N, N);
    uint64_t seed = 5;

    (void)state;
    for (int i = 0; i < N; i++) {
        x[i] = draw(&seed, -1, 1);
        y[i] = draw(&seed, -1, 1);
        for (int k = 0; k < TH_BAND; k++) {
            band[i * TH_BAND + k] = k > i ? 99 : k == 0 ? 7 : draw(&seed, -1, 1);
            if (k <= i) {
                gsl_matrix_set(full, (size_t)i, (size_t)(i - k), band[i * TH_BAND + k]);
                gsl_matrix_set(full, (size_t)(i - k), (size_t)i, band[i * TH_BAND + k]);
            }
        }
    }
    th_band_times(N, band, x, product);
    for (int i = 0; i < N; i++) {
        double sum = 0;

        for (int j = 0; j < N; j++)
            sum += gsl_matrix_get(full, (size_t)i, (size_t)j) * x[j];
        close_to("A x", product[i], sum, 1e-13);
        trace += y[i] * sum;
    }
    close_to("y A x", th_band_form(N, band, y, x), trace, 1e-12);
    gsl_matrix_memcpy(copy, full);
    assert_int_equal(gsl_linalg_cholesky_decomp1(copy), 0);
    assert_int_equal(gsl_linalg_cholesky_invert(copy), 0);
    {
        double factor[N * TH_BAND];

        memcpy(factor, band, sizeof factor);
        assert_true(th_band_factor(N, factor));
        th_band_solve(N, factor, product); /* A x back to x */
        th_band_inverse(N, factor, inverse);
    }
    trace = 0;
    for (int i = 0; i < N; i++) {
        close_to("A^-1 A x", product[i], x[i], 1e-13);
        for (int k = 0; k < TH_BAND && k <= i; k++) {
            close_to("A^-1", inverse[i * TH_BAND + k],
                     gsl_matrix_get(copy, (size_t)i, (size_t)(i - k)), 1e-14);
            trace += (k > 0 ? 2 : 1) * band[i * TH_BAND + k] * inverse[i * TH_BAND + k];
        }
    }
    close_to("trace", th_band_trace(N, band, inverse), trace, 1e-12);
    band[4 * TH_BAND] = 0.01; /* no longer positive definite */
    assert_false(th_band_factor(N, band));
    gsl_matrix_free(full);
    gsl_matrix_free(copy);
}

enum { PIECES = 9 };
static const double knots[PIECES + 1] = {-2, -1.9, -1, 0.5, 0.75, 1, 3, 7, 7.5, 8};

static gsl_bspline_workspace *gsl_splines(int intervals, const double *knot)
{
    gsl_bspline_workspace *w = gsl_bspline_alloc(6, (size_t)intervals + 1);
    gsl_vector_const_view breaks = gsl_vector_const_view_array(knot, (size_t)intervals + 1);

    assert_non_null(w);
    assert_int_equal(gsl_bspline_knots(&breaks.vector, w), 0);
    return w;
}

/* Values, Taylor coefficients, roughness and places against GSL's splines of order 6. */
static void test_spline(void **state)
{
    const int n = th_spline_size(PIECES);
    gsl_bspline_workspace *w = gsl_splines(PIECES, knots);
    gsl_matrix *d = gsl_matrix_alloc((size_t)n, 6);
    gsl_matrix *rough = gsl_matrix_calloc((size_t)n, (size_t)n);
    gsl_integration_glfixed_table *rule = gsl_integration_glfixed_table_alloc(4);
    double band[(PIECES + TH_SPLINE_DEGREE) * TH_BAND], coef[PIECES + TH_SPLINE_DEGREE];
    uint64_t seed = 3;

    (void)state;
    assert_int_equal((int)gsl_bspline_ncoeffs(w), n);
    for (int j = 0; j < n; j++) {
        coef[j] = draw(&seed, -1, 1);
        close_to("place", th_spline_place(PIECES, knots, j),
                 gsl_bspline_greville_abscissa((size_t)j, w), 1e-14);
    }
    for (int trial = 0; trial < 200; trial++) {
        const double x = trial == 0 ? -2 : trial == 1 ? 8 : draw(&seed, -2, 8);
        const int at = th_spline_find(PIECES, knots, x);
        double basis[TH_SPLINE_LOCAL], power[TH_SPLINE_LOCAL], factorial = 1;

        assert_true(knots[at] <= x && x <= knots[at + 1]);
        th_spline_basis(PIECES, knots, at, x, basis);
        th_spline_powers(PIECES, knots, coef + at, at, x, power);
        assert_int_equal(gsl_bspline_deriv_eval(x, 5, d, w), 0);
        for (int q = 0; q < TH_SPLINE_LOCAL; q++) {
            double sum = 0, size = 0;

            factorial *= q > 0 ? q : 1;
            for (int j = 0; j < n; j++) {
                sum += coef[j] * gsl_matrix_get(d, (size_t)j, (size_t)q) / factorial;
                size += fabs(coef[j] * gsl_matrix_get(d, (size_t)j, (size_t)q)) / factorial;
            }
            close_to("power", power[q], sum, 1e-13 * size);
        }
        for (int j = 0; j < n; j++)
            close_to("basis", j >= at && j < at + TH_SPLINE_LOCAL ? basis[j - at] : 0,
                     gsl_matrix_get(d, (size_t)j, 0), 1e-14);
    }
    for (int i = 0; i < PIECES; i++)
        for (size_t g = 0; g < 4; g++) { /* exact to degree 7, f'''^2 has 4 */
            double x, weight;

            gsl_integration_glfixed_point(knots[i], knots[i + 1], g, &x, &weight, rule);
            assert_int_equal(gsl_bspline_deriv_eval(x, 3, d, w), 0);
            for (size_t j = 0; j < (size_t)n; j++)
                for (size_t k = 0; k < (size_t)n; k++)
                    *gsl_matrix_ptr(rough, j, k) +=
                        weight * gsl_matrix_get(d, j, 3) * gsl_matrix_get(d, k, 3);
        }
    th_spline_roughness(PIECES, knots, band);
    for (int i = 0; i < n; i++)
        for (int k = 0; k < TH_BAND && k <= i; k++) {
            const size_t a = (size_t)i, b = (size_t)(i - k);

            close_to("roughness", band[i * TH_BAND + k], gsl_matrix_get(rough, a, b),
                     1e-12 * sqrt(gsl_matrix_get(rough, a, a) * gsl_matrix_get(rough, b, b)));
        }
    gsl_integration_glfixed_table_free(rule);
    gsl_matrix_free(rough);
    gsl_matrix_free(d);
    gsl_bspline_free(w);
}

/* Curve, degrees of freedom, deviations and directions against dense normal equations with GSL's
 * splines on the knots that were found: with and without known errors, chosen and given strength.
 */
static void test_dense(void **state)
{
    static double x[ROWS], y[ROWS], sigma[ROWS];
    uint64_t seed = 11;

    (void)state;
    sample(edges, 0.01, 17, ROWS, x, y);
    for (int i = 0; i < ROWS; i++)
        sigma[i] = draw(&seed, 0.005, 0.015);
    for (int which = 0; which < 4; which++) {
        const bool known = which >= 2;
        th_smooth s = fit(ROWS, x, y, known ? sigma : NULL, which % 2 == 0 ? -1 : 0.15);
        const size_t n = (size_t)th_spline_size(s.intervals);
        gsl_bspline_workspace *w = gsl_splines(s.intervals, s.knot);
        gsl_matrix *d = gsl_matrix_alloc(n, 4), *b = gsl_matrix_calloc(ROWS, n);
        gsl_matrix *m = gsl_matrix_calloc(n, n), *a = gsl_matrix_alloc(n, n);
        gsl_matrix *sum = gsl_matrix_calloc(n, n);
        gsl_vector *c = gsl_vector_calloc(n);
        gsl_integration_glfixed_table *rule = gsl_integration_glfixed_table_alloc(3);
        double weight = 0, rss = 0, trace = 0, lambda, spread2, kept = 0;

        assert_int_equal(s.chosen, which % 2 == 0);
        for (size_t i = 0; i < ROWS; i++) {
            const double wi = known ? 1 / (sigma[i] * sigma[i]) : 1;

            weight += wi;
            assert_int_equal(gsl_bspline_deriv_eval(x[i], 0, d, w), 0);
            for (size_t j = 0; j < n; j++) {
                gsl_matrix_set(b, i, j, gsl_matrix_get(d, j, 0));
                *gsl_vector_ptr(c, j) += wi * gsl_matrix_get(d, j, 0) * y[i];
                for (size_t k = 0; k < n; k++)
                    *gsl_matrix_ptr(m, j, k) +=
                        wi * gsl_matrix_get(d, j, 0) * gsl_matrix_get(d, k, 0);
            }
        }
        lambda = weight * (ROWS - 1) / ROWS / 30 * pow(s.strength, 6);
        gsl_matrix_memcpy(a, m);
        for (int i = 0; i < s.intervals; i++)
            for (size_t g = 0; g < 3; g++) {
                double at, share;

                gsl_integration_glfixed_point(s.knot[i], s.knot[i + 1], g, &at, &share, rule);
                assert_int_equal(gsl_bspline_deriv_eval(at, 3, d, w), 0);
                for (size_t j = 0; j < n; j++)
                    for (size_t k = 0; k < n; k++)
                        *gsl_matrix_ptr(a, j, k) +=
                            lambda * share * gsl_matrix_get(d, j, 3) * gsl_matrix_get(d, k, 3);
            }
        assert_int_equal(gsl_linalg_cholesky_decomp1(a), 0);
        assert_int_equal(gsl_linalg_cholesky_svx(a, c), 0);
        for (size_t j = 0; j < n; j++) /* condition number about 1e4 */
            close_to("coefficient", s.coef[j], gsl_vector_get(c, j), 1e-10);
        assert_int_equal(gsl_linalg_cholesky_invert(a), 0);
        for (size_t j = 0; j < n; j++)
            for (size_t k = 0; k < n; k++)
                trace += gsl_matrix_get(a, j, k) * gsl_matrix_get(m, k, j);
        close_to("degrees of freedom", s.freedom, trace, 1e-9 * trace);
        for (size_t i = 0; i < ROWS; i++) {
            double r = y[i];

            for (size_t j = 0; j < n; j++)
                r -= gsl_matrix_get(b, i, j) * gsl_vector_get(c, j);
            rss += r * r * (known ? 1 / (sigma[i] * sigma[i]) : 1);
        }
        spread2 = rss / (ROWS - trace);
        if (known)
            spread2 = fmax(spread2, 1);
        else
            close_to("noise", s.noise, sqrt(spread2), 1e-9 * s.noise);
        close_to("spread", s.spread, sqrt(spread2), 1e-9 * s.spread);
        /* directions: their sum is the covariance but for what was dropped, < 0.1 % */
        assert_true(s.dropped < 0.00101 && s.directions <= (int)n);
        for (int q = 0; q < s.directions; q++)
            for (size_t j = 0; j < n; j++)
                for (size_t k = 0; k < n; k++)
                    *gsl_matrix_ptr(sum, j, k) +=
                        s.direction[(size_t)q * n + j] * s.direction[(size_t)q * n + k];
        for (size_t j = 0; j < n; j++)
            for (size_t k = 0; k < n; k++)
                kept += gsl_matrix_get(sum, j, k) * gsl_matrix_get(m, k, j);
        close_to("variance in directions", kept, spread2 * trace, 1e-6 * kept);
        for (size_t i = 0; i < ROWS; i += 7) {
            double exact = 0, ours = 0;

            for (size_t j = 0; j < n; j++)
                for (size_t k = 0; k < n; k++) {
                    const double bb = gsl_matrix_get(b, i, j) * gsl_matrix_get(b, i, k);

                    exact += spread2 * bb * gsl_matrix_get(a, j, k);
                    ours += bb * gsl_matrix_get(sum, j, k);
                }
            close_to("deviation", th_smooth_deviation(&s, x[i]), sqrt(exact), 1e-8 * sqrt(exact));
            /* what was dropped is a sum over the rows of terms >= 0, w_i times what misses at i */
            close_to("sum of directions", ours * (1 - s.dropped), exact,
                     s.dropped * spread2 * trace * (known ? sigma[i] * sigma[i] : 1) +
                         1e-6 * exact);
        }
        gsl_integration_glfixed_table_free(rule);
        gsl_vector_free(c);
        gsl_matrix_free(sum);
        gsl_matrix_free(a);
        gsl_matrix_free(m);
        gsl_matrix_free(b);
        gsl_matrix_free(d);
        gsl_bspline_free(w);
        th_smooth_clear(&s);
    }
}

/* A wave is damped by 1/(1 + (k l)^6), read far from the ends: the definition of the strength. */
static double wave_number;
static double wave(double x)
{
    return sin(wave_number * x);
}
static void test_damping(void **state)
{
    static double x[ROWS], y[ROWS];

    (void)state;
    for (int which = 0; which < 3; which++) {
        const double l = 0.5, want = 1 / (1 + pow((0.7 + 0.3 * which), 6));
        double top = 0, bottom = 0;
        th_smooth s;

        wave_number = (0.7 + 0.3 * which) / l;
        for (int i = 0; i < ROWS; i++) {
            x[i] = -15 + 30.0 * i / (ROWS - 1);
            y[i] = wave(x[i]);
        }
        s = fit(ROWS, x, y, NULL, l);
        for (double at = -5; at < 5; at += 0.01) {
            top += value(&s, at) * wave(at);
            bottom += wave(at) * wave(at);
        }
        /* the ends are felt as e^-10/0.5; intervals of l/2 to l: (k l/(2 pi))^6 < 1e-4 */
        close_to("damping", top / bottom, want, 1e-4);
        th_smooth_clear(&s);
    }
}

/* Noise is found to its own statistical error, and the bars of the curve hold: over all places and
 * seeds (f - true)/deviation has mean square 1. 20 tables of about 25 free numbers each: 500, so
 * its standard deviation is about sqrt(2/500) = 0.06; four of these. */
static void test_noise(void **state)
{
    static double x[ROWS], y[ROWS], sigma[ROWS];

    (void)state;
    for (int known = 0; known < 2; known++) {
        double square = 0, within = 0, count = 0;

        for (uint64_t seed = 1; seed <= 20; seed++) {
            th_smooth s;

            sample(edges, 0.02, 100 * seed, ROWS, x, y);
            for (int i = 0; i < ROWS; i++)
                sigma[i] = 0.02;
            s = fit(ROWS, x, y, known ? sigma : NULL, -1);
            /* sqrt(chi^2/nu) with nu > 300: standard deviation 0.04; four of these */
            close_to("noise", s.noise, 0.02, 0.16 * 0.02);
            for (double at = -14.9; at < 15; at += 0.1) {
                const double z = (value(&s, at) - edges(at)) / th_smooth_deviation(&s, at);

                square += z * z;
                within += fabs(z) < 2;
                count++;
            }
            th_smooth_clear(&s);
        }
        close_to("mean square", square / count, 1, 0.24);
        assert_true(within / count > 0.92 && within / count < 0.98); /* 95.4 % +- 4 x 0.6 % */
    }
    /* errors that are stated ten times too small are not believed */
    {
        th_smooth s;

        sample(edges, 0.02, 5, ROWS, x, y);
        for (int i = 0; i < ROWS; i++)
            sigma[i] = 0.002;
        s = fit(ROWS, x, y, sigma, -1);
        close_to("spread", s.spread, 10, 1.6);
        th_smooth_clear(&s);
    }
}

/* Residuals that go together: each row of the noise is 0.8 of the one before and a new part, so a
 * mean is (1 + 0.8)/(1 - 0.8) = 9 times less certain in the variance than by independent rows. A
 * curve too stiff to follow them must say so: a strength of 5 over noise that fades in 5 rows. */
static void test_correlated(void **state)
{
    enum { MANY = 2000 };
    static double x[MANY], y[MANY];
    double square = 0, count = 0;

    (void)state;
    for (uint64_t seed = 1; seed <= 10; seed++) {
        uint64_t s = 77 * seed;
        double e = 0;
        th_smooth f;

        for (int i = 0; i < MANY; i++) {
            e = 0.8 * e + 0.6 * normal(&s);
            x[i] = -15 + 30.0 * i / (MANY - 1);
            y[i] = e;
        }
        f = fit(MANY, x, y, NULL, 5);
        close_to("spread", f.spread, 3, 0.6);
        for (double at = -14; at < 14; at += 1) {
            square += pow(value(&f, at) / th_smooth_deviation(&f, at), 2);
            count++;
        }
        th_smooth_clear(&f);
    }
    /* 10 tables of about 6 free numbers: 60, sqrt(2/60) = 0.18, three of these */
    close_to("mean square", square / count, 1, 0.55);
}

/* Without noise the error falls with the spacing, at degree 5 by up to 2^6 a halving; few intervals
 * where there is little to follow; as many as there may be at most. */
static void test_converges(void **state)
{
    static double x[2 * ROWS], y[2 * ROWS];
    double before = HUGE_VAL;

    (void)state;
    for (int rows = 151; rows <= 601; rows = 2 * rows - 1) {
        double worst = 0;
        th_smooth s;

        sample(edges, 0, 1, rows, x, y);
        s = fit(rows, x, y, NULL, -1);
        for (double at = -15; at <= 15; at += 0.003)
            worst = fmax(worst, fabs(value(&s, at) - edges(at)));
        assert_true(worst < before / 20);
        assert_true(s.intervals <= TH_SMOOTH_INTERVALS && s.intervals < rows / 2);
        before = worst;
        th_smooth_clear(&s);
    }
    assert_true(before < 1e-6);
    {
        th_smooth s;

        sample(edges, 0.02, 3, ROWS, x, y);
        s = fit(ROWS, x, y, NULL, -1);
        assert_true(s.intervals < 80);
        th_smooth_clear(&s);
        for (int i = 0; i < ROWS; i++)
            y[i] = 1;
        s = fit(ROWS, x, y, NULL, -1);
        assert_int_equal(s.intervals, 8);
        close_to("constant", value(&s, 2.3), 1, 1e-14);
        th_smooth_clear(&s);
    }
}

/* Ten times the rows, up to the most that a table may have, take ten times as long, with a factor
 * of two for other work of the machine; the true curve lies within the bars. check_profile.py holds
 * the seconds. */
static void test_large(void **state)
{
    enum { MANY = 100000 };
    double *x = malloc(MANY * sizeof *x), *y = malloc(MANY * sizeof *y), spent[2];

    (void)state;
    assert_non_null(x);
    assert_non_null(y);
    for (int which = 0; which < 2; which++) {
        const int rows = which == 0 ? MANY / 10 : MANY;
        clock_t start;
        th_smooth s;

        sample(edges, 0.02, 3, rows, x, y);
        start = clock();
        s = fit(rows, x, y, NULL, -1);
        spent[which] = (double)(clock() - start);
        for (double at = -15; at <= 15; at += 0.01)
            assert_true(fabs(value(&s, at) - edges(at)) < 5 * th_smooth_deviation(&s, at) + 1e-4);
        th_smooth_clear(&s);
    }
    assert_true(spent[1] < 20 * spent[0]);
    free(x);
    free(y);
}

/* A gap in the rows: bridged by the roughness, and known to be uncertain. Rows of no weight, where
 * nothing else determines the curve, and weights beyond all numbers are refused. */
static void test_gap(void **state)
{
    static double x[60], y[60], sigma[60];
    th_smooth_rows r = {60, x, y, sigma, 0, DIRECTIONS};
    th_smooth s;
    th_error err = {0};

    (void)state;
    for (int i = 0; i < 60; i++) {
        x[i] = i < 57 ? 0.01 * i : 100 + i;
        y[i] = sin(x[i]);
        sigma[i] = i < 50 ? 0.01 : 1e200;
    }
    s = fit(60, x, y, NULL, -1);
    for (int i = 0; i < 60; i++)
        assert_true(isfinite(value(&s, x[i])));
    assert_true(th_smooth_deviation(&s, 50) > th_smooth_deviation(&s, 0.3));
    th_smooth_clear(&s);
    assert_int_equal(th_smooth_fit(&r, NULL, &s, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "do not determine a curve"));
    sigma[3] = 1e-200;
    assert_int_equal(th_smooth_fit(&r, NULL, &s, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "1e-200"));
    assert_null(s.coef);
}

static void test_memory(void **state)
{
    static double x[ROWS], y[ROWS];
    const th_smooth_rows r = {ROWS, x, y, NULL, -1, DIRECTIONS};
    long k = 0;

    (void)state;
    sample(edges, 0.01, 3, ROWS, x, y);
    for (;; k++) {
        th_smooth s;
        th_error err = {0};
        th_status st;

        refuse_from(k);
        st = th_smooth_fit(&r, NULL, &s, &err);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            th_smooth_clear(&s);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_null(s.coef);
    }
    assert_true(k > 20);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_band),      cmocka_unit_test(test_spline),
        cmocka_unit_test(test_dense),     cmocka_unit_test(test_damping),
        cmocka_unit_test(test_noise),     cmocka_unit_test(test_correlated),
        cmocka_unit_test(test_converges), cmocka_unit_test(test_large),
        cmocka_unit_test(test_gap),       cmocka_unit_test(test_memory),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
