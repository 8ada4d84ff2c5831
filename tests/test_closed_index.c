/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of the static index of rings and walls: closed forms of uniform flows and finite
 * differences of the same energy form. The form, with eta' short for the derivative:
 *     F(eta) = Int [n c^2 eta^2 + n eta'^2/4 - (J^2/n) eta^2] dx + J^2 (Int eta/n)^2 / Int 1/n,
 * the energy of a fluctuation minimised over its phase; on a ring Int n eta dx = 0. Random cases
 * have fixed seeds. */
#include <complex.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "flows.h"
#include "lapack.h"
#include "refuse.h"
#include "twinhorizon/index.h"

static th_index index_of(const th_flow *flow)
{
    th_index out = {0};
    th_error err = {0};

    if (th_index_closed(flow, &out, &err) != TH_OK)
        fail_msg("%s", err.text);
    assert_true(fabs(out.margin) > out.error && out.error > 0);
    return out;
}

/* Uniform ring, n = 1: F is diagonal in cos and sin of k_j x, k_j = 2 pi j/circumference, with
 * eigenvalues c^2 - v^2 + k_j^2/4, each twice; the mass excludes j = 0 and the phase term vanishes
 * for all others. */
static void test_uniform_ring(void **state)
{
    uint64_t seed = 41;

    (void)state;
    for (int trial = 0; trial < 40; trial++) {
        const double length = draw(&seed, 5, 40);
        const int winding = 1 + (int)draw(&seed, 0, 12);
        uniform_state u = {.c = draw(&seed, 0.2, 2)};
        th_flow *flow = uniform_flow(ring(length, winding), length, &u);
        const th_index got = index_of(flow);
        double near = HUGE_VAL;
        int want = 0;

        for (int j = 1; j < 200; j++) {
            const double k = 2 * pi * j / length, value = u.c * u.c - u.v * u.v + k * k / 4;

            want += value < 0 ? 2 : 0;
            if (fabs(value) < fabs(near))
                near = value;
        }
        assert_int_equal(got.count, want);
        close_to("margin", got.margin, -near / (u.c * u.c), 1e-9);
        th_flow_destroy(flow);
    }
}

/* Uniform box, n = 1, L long: without the phase term the eigenvalues are c^2 - v^2 + (m pi/L)^2/4.
 * The term adds a square, and by the rank-one determinant takes one negative away when
 *     1 + (v^2/L) Int g dx < 0,  -g''/4 + (c^2 - v^2) g = 1, g = 0 at the walls:
 * Int g = -(L - (2/q) tan(q L/2))/(v^2 - c^2), q = 2 sqrt(v^2 - c^2). */
static void test_uniform_walls(void **state)
{
    uint64_t seed = 42;
    int taken = 0;

    (void)state;
    for (int trial = 0; trial < 200; trial++) {
        const double length = draw(&seed, 1, 15);
        uniform_state u = {.v = draw(&seed, 0.3, 2)};
        double q, sum;
        int want;
        th_flow *flow;
        th_index got;

        u.c = u.v * draw(&seed, 0.3, 0.95);
        q = 2 * sqrt(u.v * u.v - u.c * u.c);
        want = (int)ceil(q * length / pi) - 1;
        sum =
            1 - u.v * u.v / (u.v * u.v - u.c * u.c) * (1 - tan(q * length / 2) / (q * length / 2));
        if (fabs(sum) < 1e-6 || fabs(remainder(q * length, pi)) < 1e-6)
            continue; /* too near a switch */
        flow = uniform_flow(walls(0), length, &u);
        got = index_of(flow);
        taken += sum < 0;
        if (got.count != want - (sum < 0))
            fail_msg("index %d, want %d - %d (v = %g, c = %g, L = %g)", got.count, want, sum < 0,
                     u.v, u.c, length);
        th_flow_destroy(flow);
    }
    assert_true(taken > 20 && taken < 180);
}

/* A subsonic flow has no negative direction, whatever its shape. */
static void test_subsonic(void **state)
{
    static const double value[5] = {0.5, 1, 0.8, 1.2, 6};
    th_flow *flow = flow_of("step", walls(5), value);

    (void)state;
    assert_int_equal(index_of(flow).count, 0);
    assert_true(index_of(flow).margin < 0);
    th_flow_destroy(flow);
}

/* F by second-order finite differences on `points` points (n at midpoints for the slope term),
 * divided by the mass of a point, smallest eigenvalues by LAPACK. On a ring the constraint is
 * brought in by projection with a large positive value. Returns the count; *margin as th_index. */
static int difference_count(const th_flow *flow, int points, double *margin)
{
    const bool closed = th_flow_ends(flow).kind == TH_ENDS_RING;
    const double *edge;
    int edges, count = 0;
    const size_t n = (size_t)points;
    double *f = calloc(n * n, sizeof *f), *mass = calloc(n, sizeof *mass);
    double *inverse = calloc(n, sizeof *inverse), *value = calloc(n, sizeof *value);
    double whole = 0, near = HUGE_VAL, total = 0, mean = 0, h, jj;

    assert_non_null(f);
    edge = th_flow_edges(flow, &edges);
    h = (edge[edges - 1] - edge[0]) / (closed ? points : points + 1);
    jj = th_flow_flux(flow) * th_flow_flux(flow);
    for (size_t i = 0; i < n; i++) {
        const double x = edge[0] + ((double)i + (closed ? 0 : 1)) * h;
        th_flow_point at, half;
        const size_t next = i + 1 < n ? i + 1 : 0;

        th_flow_at(flow, x, &at);
        th_flow_at(flow, x + h / 2, &half);
        mass[i] = at.n * h;
        inverse[i] = h / at.n;
        whole += inverse[i];
        total += mass[i];
        f[i + n * i] += h * (at.n * at.c * at.c - jj / at.n) + half.n / (4 * h);
        if (closed || next != 0) {
            f[next + n * next] += half.n / (4 * h);
            f[i + n * next] -= half.n / (4 * h);
            f[next + n * i] -= half.n / (4 * h);
        }
        if (!closed && i == 0) {
            th_flow_at(flow, x - h / 2, &half);
            f[0] += half.n / (4 * h);
        }
    }
    if (!closed) { /* trapezium of Int 1/n: the walls' halves */
        th_flow_point at;

        th_flow_at(flow, edge[0], &at);
        whole += h / at.n;
    }
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            f[i + n * j] =
                (f[i + n * j] + jj * inverse[i] * inverse[j] / whole) / sqrt(mass[i] * mass[j]);
    if (closed) {
        const double lift = 1e3;

        for (size_t i = 0; i < n; i++)
            for (size_t j = 0; j < n; j++)
                value[i] += f[i + n * j] * sqrt(mass[j] / total);
        for (size_t i = 0; i < n; i++)
            mean += value[i] * sqrt(mass[i] / total);
        for (size_t i = 0; i < n; i++)
            for (size_t j = 0; j < n; j++) {
                const double a = sqrt(mass[i] / total), b = sqrt(mass[j] / total);

                f[i + n * j] += (mean + lift) * a * b - value[i] * b - a * value[j];
            }
    }
    assert_int_equal(th_lapack_eigen_symmetric(points, f, value, NULL), TH_OK);
    for (size_t i = 0; i < n; i++) {
        count += value[i] < 0;
        if (fabs(value[i]) < fabs(near))
            near = value[i];
    }
    *margin = -near / (th_flow_sound_max(flow) * th_flow_sound_max(flow));
    free(f);
    free(mass);
    free(inverse);
    free(value);
    return count;
}

static void test_differences(void **state)
{
    uint64_t seed = 43;
    int compared = 0, largest = 0;

    (void)state;
    for (int trial = 0; trial < 24; trial++) {
        const bool closed = trial % 2 == 0;
        const double length = draw(&seed, 34, 42);
        const int winding = 6;
        const double v = closed ? 2 * pi * winding / length : 1;
        const double value[7] = {v,
                                 v * draw(&seed, 1.1, 1.6),
                                 v * draw(&seed, 0.3, 0.9),
                                 0,
                                 draw(&seed, 0.3, 0.8),
                                 draw(&seed, 0.3, 0.8),
                                 draw(&seed, 1, 9)};
        double even[7], margin;
        th_flow *flow;
        th_index got;
        int want;

        memcpy(even, value, sizeof even);
        even[3] = closed ? value[1] : v * draw(&seed, 1.1, 1.6);
        flow = trial % 6 == 5 ? bumpy_flow(walls(draw(&seed, 0, 5)))
                              : flow_of("tanh", closed ? ring(length, winding) : walls(2), even);
        got = index_of(flow);
        want = difference_count(flow, 320, &margin);
        /* 320 points are wrong by about (k h)^2/12, 1e-2 */
        if (fabs(got.margin) > 0.03) {
            assert_int_equal(got.count, want);
            if (fabs(margin) < 0.5)
                close_to("margin", got.margin, margin, 0.03);
            compared++;
        }
        largest = got.count > largest ? got.count : largest;
        th_flow_destroy(flow);
    }
    assert_true(compared >= 12);
    assert_true(largest >= 4);
}

/* Speeds times s, lengths over s leave count and margin as they are. */
static void test_scaling(void **state)
{
    th_index first = {0};

    (void)state;
    for (int i = 0; i < 3; i++) {
        const double s = pow(10, 3 * i - 3);
        const double value[7] = {s, 1.5 * s, 0.5 * s, 1.3 * s, 0.5 / s, 0.7 / s, 8 / s};
        th_flow *flow = flow_of("tanh", walls(4 / s), value);
        const th_index got = index_of(flow);

        if (i == 0)
            first = got;
        assert_int_equal(got.count, first.count);
        close_to("margin", got.margin, first.margin, 1e-10);
        th_flow_destroy(flow);
    }
    assert_true(first.count > 0);
}

/* Uniform box with q L = 2 pi: m = 2 has eigenvalue zero to rounding, of either sign, m = 1 is the
 * one negative that the phase term takes away. No answer, and the lower one, 0, is offered. */
static void test_undecided(void **state)
{
    int below = 0, above = 0;

    (void)state;
    for (int trial = 0; trial < 12; trial++) {
        const double length = 3 + 0.37 * trial;
        uniform_state u = {.v = 1.5};
        th_flow *flow;
        th_index out = {0};
        th_error err = {0};

        u.c = sqrt(u.v * u.v - pi * pi / (length * length));
        flow = uniform_flow(walls(0), length, &u);
        assert_int_equal(th_index_closed(flow, &out, &err), TH_EUNDECIDED);
        assert_true(fabs(out.margin) <= out.error);
        assert_int_equal(out.count, 0);
        assert_non_null(strstr(err.text, "zero"));
        below += out.margin < 0;
        above += out.margin > 0;
        th_flow_destroy(flow);
    }
    assert_true(below > 0 && above > 0);
}

/* th_index_count hands each kind of ends to its own count; errors and refused memory. */
static void test_errors(void **state)
{
    th_flow *open = step_flow(0.75, 1, 0.3, 1, 5), *box = bumpy_flow(walls(2));
    th_index a = {0}, b = {0};
    th_error err = {0};
    long refused = 0;

    (void)state;
    assert_int_equal(th_index_closed(open, &a, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "ring or walls"));
    assert_int_equal(th_index_closed(NULL, &a, &err), TH_EINVAL);
    assert_int_equal(th_index_closed(box, NULL, &err), TH_EINVAL);
    assert_int_equal(th_index_count(NULL, &a, &err), TH_EINVAL);
    assert_int_equal(th_index_count(open, &a, &err), TH_OK);
    assert_int_equal(th_index_open(open, &b, &err), TH_OK);
    assert_true(a.count == b.count && a.margin == b.margin && a.count == 2);
    assert_int_equal(th_index_count(box, &a, &err), TH_OK);
    b = index_of(box);
    assert_true(a.count == b.count && a.margin == b.margin);
    for (long k = 0;; k++) {
        th_status st;

        refuse_from(k);
        st = th_index_closed(box, &a, &err);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        refused++;
    }
    assert_true(refused >= 8);
    th_flow_destroy(open);
    th_flow_destroy(box);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_uniform_ring), cmocka_unit_test(test_uniform_walls),
        cmocka_unit_test(test_subsonic),     cmocka_unit_test(test_differences),
        cmocka_unit_test(test_scaling),      cmocka_unit_test(test_undecided),
        cmocka_unit_test(test_errors),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
