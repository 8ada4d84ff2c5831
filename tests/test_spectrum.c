/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of eigenvalues: spectra planted in small matrices, closed forms of uniform flows, and the
 * two routes to an eigenvalue, dense and refined, against each other. Seeds are fixed. */
#include <complex.h>
#include <float.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "flows.h"
#include "lapack.h"
#include "mesh/mesh.h"
#include "operator.h"
#include "refuse.h"
#include "spectrum.h"

enum { N = 24 };

/* Distance of a wanted eigenvalue to the nearest found one. */
static double nearest(const double complex *found, int count, double complex wanted)
{
    double best = HUGE_VAL;

    for (int i = 0; i < count; i++)
        best = fmin(best, cabs(found[i] - wanted));
    return best;
}

/* Q = (1 - 2 u u^*)(1 - 2 w w^*), a random unitary (real when `phase` is 0) matrix, [N, N]. */
static void rotation(uint64_t *seed, double phase, double complex *q)
{
    double complex u[2][N];

    for (int r = 0; r < 2; r++) {
        double size = 0;

        for (int i = 0; i < N; i++) {
            u[r][i] = draw(seed, -1, 1) + I * phase * draw(seed, -1, 1);
            size += cabs(u[r][i]) * cabs(u[r][i]);
        }
        for (int i = 0; i < N; i++)
            u[r][i] /= sqrt(size);
    }
    for (int i = 0; i < N; i++)
        for (int j = 0; j < N; j++) {
            double complex inner = 0;

            for (int k = 0; k < N; k++)
                inner += conj(u[0][k]) * u[1][k];
            q[i + N * j] = (i == j) - 2 * u[0][i] * conj(u[0][j]) - 2 * u[1][i] * conj(u[1][j]) +
                           4 * u[0][i] * inner * conj(u[1][j]);
        }
}

/* Q T Q^*: T has the planted spectrum. */
static void hide(const double complex *q, const double complex *t, double complex *a)
{
    static double complex half[N * N];

    for (int i = 0; i < N; i++)
        for (int j = 0; j < N; j++) {
            half[i + N * j] = 0;
            for (int k = 0; k < N; k++)
                half[i + N * j] += q[i + N * k] * t[k + N * j];
        }
    for (int i = 0; i < N; i++)
        for (int j = 0; j < N; j++) {
            a[i + N * j] = 0;
            for (int k = 0; k < N; k++)
                a[i + N * j] += half[i + N * k] * conj(q[j + N * k]);
        }
}

/* Upper triangular, or for real spectra with 2 x 2 blocks [x y; -y x] of eigenvalues x +- i y.
 * Weak couplings above the diagonal keep the eigenvalues well conditioned. */
static void test_planted(void **state)
{
    static double complex t[N * N], q[N * N], a[N * N], found[N];
    static double real[N * N], ascending[N];
    uint64_t seed = 31;

    (void)state;
    for (int trial = 0; trial < 20; trial++) {
        double complex want[N];

        /* complex */
        memset(t, 0, sizeof t);
        for (int i = 0; i < N; i++) {
            want[i] = draw(&seed, -2, 2) + I * draw(&seed, -2, 2);
            t[i + N * i] = want[i];
            for (int j = i + 1; j < N; j++)
                t[i + N * j] = 0.01 * draw(&seed, -1, 1);
        }
        rotation(&seed, 1, q);
        hide(q, t, a);
        assert_int_equal(th_lapack_eigen_complex(N, a, found, NULL), TH_OK);
        for (int i = 0; i < N; i++)
            close_to("complex eigenvalue", nearest(found, N, want[i]), 0, 1e-13);
        /* real, with conjugate pairs next to each other */
        memset(t, 0, sizeof t);
        for (int i = 0; i < N; i += 2) {
            const double x = draw(&seed, -2, 2), y = draw(&seed, 0.1, 2);

            want[i] = x + I * y;
            want[i + 1] = conj(want[i]);
            t[i + N * i] = t[i + 1 + N * (i + 1)] = x;
            t[i + N * (i + 1)] = y;
            t[i + 1 + N * i] = -y;
            for (int j = i + 2; j < N; j++)
                t[i + N * j] = 0.01 * draw(&seed, -1, 1);
        }
        rotation(&seed, 0, q);
        hide(q, t, a);
        for (int i = 0; i < N * N; i++)
            real[i] = creal(a[i]);
        assert_int_equal(th_lapack_eigen_real(N, real, found, NULL), TH_OK);
        for (int i = 0; i < N; i++)
            close_to("real eigenvalue", nearest(found, N, want[i]), 0, 1e-13);
        for (int i = 0; i < N; i += 2)
            assert_true(found[i] == conj(found[i + 1]));
        /* symmetric, ascending */
        memset(t, 0, sizeof t);
        for (int i = 0; i < N; i++)
            t[i + N * i] = i * i - 40.25;
        hide(q, t, a);
        for (int i = 0; i < N * N; i++)
            real[i] = creal(a[i]);
        for (int j = 1; j < N; j++) /* only the lower triangle is read */
            for (int i = 0; i < j; i++)
                real[i + N * j] = 1e3;
        assert_int_equal(th_lapack_eigen_symmetric(N, real, ascending, NULL), TH_OK);
        for (int i = 0; i < N; i++)
            close_to("symmetric eigenvalue", ascending[i], i * i - 40.25, 1e-11);
    }
}

/* A x = b and A^T x = b for a random band matrix and a planted x. */
static void test_band(void **state)
{
    enum { lower = 3, upper = 2, height = 2 * lower + upper + 1 };
    uint64_t seed = 32;
    th_error err = {0};

    (void)state;
    for (int trial = 0; trial < 50; trial++) {
        static double complex a[N * N], band[height * N], factored[height * N];
        double complex x[N], b[N];
        int pivot[N];

        memset(a, 0, sizeof a);
        memset(band, 0, sizeof band);
        for (int j = 0; j < N; j++) {
            x[j] = draw(&seed, -1, 1) + I * draw(&seed, -1, 1);
            for (int i = j - upper; i <= j + lower; i++)
                if (i >= 0 && i < N) {
                    a[i + N * j] = draw(&seed, -1, 1) + I * draw(&seed, -1, 1) + (i == j) * 3;
                    band[lower + upper + i - j + height * j] = a[i + N * j];
                }
        }
        for (int transposed = 0; transposed < 2; transposed++) {
            memcpy(factored, band, sizeof band);
            assert_int_equal(th_lapack_band_factor(N, lower, upper, factored, pivot, NULL), TH_OK);
            for (int i = 0; i < N; i++) {
                b[i] = 0;
                for (int j = 0; j < N; j++)
                    b[i] += (transposed ? a[j + N * i] : a[i + N * j]) * x[j];
            }
            assert_int_equal(
                th_lapack_band_solve(N, lower, upper, factored, pivot, transposed, b, NULL), TH_OK);
            for (int i = 0; i < N; i++)
                close_to("solution", cabs(b[i] - x[i]), 0, 1e-12);
        }
        memset(band, 0, sizeof band);
        assert_int_equal(th_lapack_band_factor(N, lower, upper, band, pivot, &err), TH_ECONVERGE);
        assert_true(err.text[0] != '\0');
    }
}

/* ---- operators by hand ---------------------------------------------------------------------- */

/* An operator that holds a dense matrix: only what spectrum.c reads. */
typedef struct {
    int start[N + 1], column[N * N];
    double complex value[N * N];
    th_operator op;
} by_hand;

static th_operator *wrap(by_hand *h, const double complex *a, int n)
{
    int used = 0;

    for (int i = 0; i < n; i++) {
        h->start[i] = used;
        for (int j = 0; j < n; j++) {
            h->column[used] = j;
            h->value[used++] = a[i + n * j];
        }
    }
    h->start[n] = used;
    h->op = (th_operator){.nodes = n / 2,
                          .size = n,
                          .lower = n - 1,
                          .upper = n - 1,
                          .start = h->start,
                          .column = h->column,
                          .value = h->value};
    return &h->op;
}

/* diag(J, 5, 6, ...), J = [0 1; 0 delta], hidden by a rotation: eigenvalue delta has right vector
 * (1, delta) and left vector (0, 1), so the condition is sqrt(1 + delta^2)/delta. */
static void test_condition(void **state)
{
    static double complex t[N * N], q[N * N], a[N * N];
    static by_hand h;
    uint64_t seed = 33;

    (void)state;
    rotation(&seed, 1, q);
    for (double delta = 1; delta > 1e-6; delta /= 10) {
        const double want = sqrt(1 + delta * delta) / delta;
        th_eigenpair pair;
        const th_operator *op;

        memset(t, 0, sizeof t);
        t[N] = 1;
        t[1 + N] = delta;
        for (int i = 2; i < N; i++)
            t[i + N * i] = 3 + i;
        hide(q, t, a);
        op = wrap(&h, a, N);
        assert_int_equal(th_spectrum_refine(op, I * delta * 1.01, &pair, NULL), TH_OK);
        close_to("eigenvalue", cabs(pair.omega - I * delta), 0, pair.rounding);
        /* rounding of A, 1e-14, moves two eigenvalues delta apart by 1e-14/delta */
        close_to("condition", pair.condition / want, 1, 1e-12 + 1e-13 / (delta * delta));
        assert_true(pair.rounding >= DBL_EPSILON * want * delta);
        assert_true(pair.rounding < 1e-13 * want);
        close_to("residual", pair.residual, 0, 20 * DBL_EPSILON * pair.condition);
        th_eigenpair_clear(&pair);
        assert_null(pair.right);
    }
    { /* a well separated eigenvalue of a normal matrix: condition 1 */
        th_eigenpair pair;

        assert_int_equal(th_spectrum_refine(&h.op, 8.001 * I, &pair, NULL), TH_OK);
        close_to("normal", pair.condition, 1, 1e-9);
        th_eigenpair_clear(&pair);
    }
}

/* An exact eigenvalue as guess makes the factors exactly singular: no failure, no NaN. */
static void test_exact_guess(void **state)
{
    static double complex a[16];
    static by_hand h;
    th_eigenpair pair;

    (void)state;
    for (int i = 0; i < 4; i++)
        a[i + 4 * i] = i + 1;
    a[4] = 0.5;
    (void)wrap(&h, a, 4);
    for (int i = 0; i < 4; i++) {
        assert_int_equal(th_spectrum_refine(&h.op, I * (i + 1.0), &pair, NULL), TH_OK);
        close_to("eigenvalue", cabs(pair.omega - I * (i + 1.0)), 0, 1e-14);
        th_eigenpair_clear(&pair);
    }
}

/* ---- flows ---------------------------------------------------------------------------------- */

typedef struct {
    th_mesh *mesh;
    th_operator *op;
    double complex *omega; /* [count] */
    int count;
} spectrum;

static spectrum spectrum_of(const th_flow *flow, int order)
{
    const th_mesh_options o = {.order = order,
                               .accuracy = 1e-12,
                               .omega_top = th_flow_band_limit(flow),
                               .omega_low = 1e-3 * th_flow_band_limit(flow),
                               .angle = 0.6,
                               .layer = 1};
    spectrum s = {0};
    th_error err = {0};

    if (th_mesh_create(flow, &o, &s.mesh, &err) != TH_OK ||
        th_operator_create(s.mesh, &s.op, &err) != TH_OK ||
        th_spectrum_all(s.op, &s.omega, &s.count, &err) != TH_OK)
        fail_msg("%s", err.text);
    for (int i = 1; i < s.count; i++)
        assert_true(cimag(s.omega[i]) < cimag(s.omega[i - 1]) ||
                    (cimag(s.omega[i]) == cimag(s.omega[i - 1]) &&
                     creal(s.omega[i]) >= creal(s.omega[i - 1])));
    return s;
}

static void spectrum_free(spectrum *s)
{
    free(s->omega);
    th_operator_destroy(s->op);
    th_mesh_destroy(s->mesh);
}

/* Uniform ring: omega = v k +- sqrt(c^2 k^2 + k^4/4), k = 2 pi j/circumference, j = +-1, +-2, ...
 * Two zero modes belong to j = 0 and are deflated. Subsonic and supersonic (negative energies, but
 * no growth: translation invariance). */
static void test_uniform_ring(void **state)
{
    static const int winding[2] = {2, 7};

    (void)state;
    for (int w = 0; w < 2; w++) {
        uniform_state u = {.c = 1};
        th_flow *flow = uniform_flow(ring(20, winding[w]), 20, &u);
        spectrum s = spectrum_of(flow, 14);

        assert_int_equal(s.count, s.op->size - 2);
        for (int j = 1; j <= 4; j++)
            for (int sign = 0; sign < 4; sign++) {
                const double k = 2 * pi * j / 20 * (sign < 2 ? 1 : -1);
                const double omega =
                    u.v * k + (sign % 2 ? 1 : -1) * fabs(k) * sqrt(u.c * u.c + k * k / 4);

                close_to("uniform ring", nearest(s.omega, s.count, omega), 0, 1e-11);
            }
        assert_true(nearest(s.omega, s.count, 0) > 1e-3);
        close_to("growth", cimag(s.omega[0]), 0, 1e-9);
        spectrum_free(&s);
        th_flow_destroy(flow);
    }
}

/* Flow between walls at rest would have omega^2 = c^2 k^2 + k^4/4, k = j pi/length; flow of speed v
 * has no closed form, but v -> 0 must come there with an error of order v^2. */
static void test_slow_box(void **state)
{
    uniform_state u = {.v = 1e-7, .c = 1};
    th_flow *flow = uniform_flow(walls(0), 5, &u);
    spectrum s = spectrum_of(flow, 14);

    (void)state;
    assert_int_equal(s.count, s.op->size);
    for (int j = 1; j <= 3; j++) {
        const double k = j * pi / 5;

        close_to("box", nearest(s.omega, s.count, k * sqrt(1 + k * k / 4)), 0, 1e-11);
    }
    spectrum_free(&s);
    th_flow_destroy(flow);
}

/* The matrix with its two zero modes: they split into a spurious pair of about the square root of
 * rounding; deflation removes these two and moves no other by more than rounding. */
static void test_deflation(void **state)
{
    static const double value[7] = {0, 1.4, 0.6, 1.4, 0.5, 0.5, 10};
    th_flow *flow = flow_of("tanh", ring(50, 8), value);
    spectrum s = spectrum_of(flow, 10);
    const int n = s.op->size;
    double *a = calloc((size_t)n * (size_t)n, sizeof *a), worst = 0;
    double complex *all = calloc((size_t)n, sizeof *all);
    int zeros = 0;

    (void)state;
    assert_int_equal(s.count, n - 2);
    th_operator_dense_real(s.op, a);
    assert_int_equal(th_lapack_eigen_real(n, a, all, NULL), TH_OK);
    for (int i = 0; i < n; i++) {
        all[i] *= I;
        if (cabs(all[i]) < 1e-4)
            zeros++;
        else if (cabs(all[i]) < 1)
            worst = fmax(worst, nearest(s.omega, s.count, all[i]));
    }
    assert_int_equal(zeros, 2);
    close_to("others", worst, 0, 1e-9);
    assert_true(nearest(s.omega, s.count, 0) > 1e-2);
    free(all);
    free(a);
    spectrum_free(&s);
    th_flow_destroy(flow);
}

/* Symmetries of the whole spectrum: -omega* always, omega* where ends conserve energy. For modes
 * that are resolved; the others of a non-normal matrix are at the mercy of rounding. */
static void test_pairing(void **state)
{
    static const double smooth[7] = {1, 1.5, 0.5, 1.3, 0.5, 0.7, 8};
    static const double ring_value[7] = {0, 1.4, 0.6, 1.4, 0.5, 0.5, 10};
    th_flow *flow[3] = {bumpy_flow(walls(3)), flow_of("tanh", walls(5), smooth),
                        flow_of("tanh", ring(50, 8), ring_value)};

    (void)state;
    for (int f = 0; f < 3; f++) {
        spectrum s = spectrum_of(flow[f], 12);
        const double top = 3 * th_flow_band_limit(flow[f]);
        double growth = 0;
        int seen = 0;

        for (int i = 0; i < s.count; i++) {
            if (cabs(s.omega[i]) > top)
                continue;
            seen++;
            growth = fmax(growth, cimag(s.omega[i]));
            close_to("-omega*", nearest(s.omega, s.count, -conj(s.omega[i])), 0, 1e-10);
            close_to("omega*", nearest(s.omega, s.count, conj(s.omega[i])), 0, 1e-10);
        }
        assert_true(seen >= 12);
        assert_true(growth > 1e-3);
        spectrum_free(&s);
        th_flow_destroy(flow[f]);
    }
}

/* Every dense eigenvalue of moderate size, refined: the iteration stays there. */
static void refine_all(const th_flow *flow, int order, double reach, int least)
{
    spectrum s = spectrum_of(flow, order);
    int seen = 0;

    for (int i = 0; i < s.count; i++) {
        th_eigenpair pair;
        th_error err = {0};
        double size = 0;

        if (cabs(s.omega[i]) > reach || (s.op->ring && cabs(s.omega[i]) < 1e-3))
            continue;
        seen++;
        if (th_spectrum_refine(s.op, s.omega[i], &pair, &err) != TH_OK)
            fail_msg("%g%+gi: %s", creal(s.omega[i]), cimag(s.omega[i]), err.text);
        /* QR is stable in the norm of A: eps |A| condition, times a modest factor */
        close_to("refined - dense", cabs(pair.omega - s.omega[i]), 0,
                 20 * DBL_EPSILON * th_operator_norm(s.op) * pair.condition + pair.rounding);
        assert_true(pair.condition >= 1 - 1e-12);
        close_to("residual", pair.residual, 0, 20 * DBL_EPSILON * pair.condition);
        for (int j = 0; j < s.op->size; j++)
            size += cabs(pair.right[j]) * cabs(pair.right[j]);
        close_to("length", size, 1, 1e-12);
        th_eigenpair_clear(&pair);
    }
    assert_true(seen >= least);
    spectrum_free(&s);
}

static void test_refine(void **state)
{
    static const double ring_value[7] = {0, 1.4, 0.6, 1.4, 0.5, 0.5, 10};
    static const double well[3] = {1, 0.6, 1.5};
    th_flow *flow[4] = {step_flow(0.75, 1, 0.3, 1, 5), bumpy_flow(walls(3)),
                        flow_of("tanh", ring(50, 8), ring_value),
                        flow_of("well", open_ends(), well)};

    (void)state;
    for (int f = 0; f < 4; f++) {
        refine_all(flow[f], 10, 3 * th_flow_band_limit(flow[f]), 10);
        th_flow_destroy(flow[f]);
    }
}

static void test_refused(void **state)
{
    th_flow *flow = step_flow(1, 1.5, 0.5, 1.3, 3);
    spectrum s = spectrum_of(flow, 6);
    long refused = 0;

    (void)state;
    for (long k = 0;; k++) {
        double complex *omega = NULL;
        int count = -1;
        th_error err = {0};
        th_eigenpair pair = {0};
        th_status st;

        refuse_from(k);
        st = th_spectrum_refine(s.op, s.omega[0], &pair, &err);
        if (st == TH_OK)
            st = th_spectrum_all(s.op, &omega, &count, &err);
        th_eigenpair_clear(&pair);
        free(omega);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_true(err.text[0] != '\0');
        refused++;
    }
    assert_true(refused >= 7);
    spectrum_free(&s);
    th_flow_destroy(flow);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_planted),      cmocka_unit_test(test_band),
        cmocka_unit_test(test_condition),    cmocka_unit_test(test_exact_guess),
        cmocka_unit_test(test_uniform_ring), cmocka_unit_test(test_slow_box),
        cmocka_unit_test(test_deflation),    cmocka_unit_test(test_pairing),
        cmocka_unit_test(test_refine),       cmocka_unit_test(test_refused),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
