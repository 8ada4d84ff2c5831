/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of the shape barriers: the flow against its closed form, switch-on lengths, growing modes.
 * Reference values are closed formulas, written out where they are used, or 20-digit values of
 * tests/check_precision.py, which has the barriers as delta potentials. Seeds are fixed. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#include "flows.h"
#include "refuse.h"
#include "twinhorizon/index.h"
#include "twinhorizon/modes.h"

/* sound_upstream (what a reduced case has: 1), mach, gap; density upstream 1.7 (flows.h) */
static th_flow *barriers_flow(double c, double m, double gap)
{
    const double value[3] = {c, m, gap};

    return flow_of("barriers", open_ends(), value);
}

/* Upstream n = c = 1, v = m. */
static double inside(double m)
{
    return m * m / 4 * (1 + sqrt(1 + 8 / (m * m)));
}

/* The cut soliton obeys (n')^2 = 4 (1 - n)^2 (n - m^2) (first integral of the stationary equation
 * with V = 0), so that n'/n = 4 Z at the barrier. */
static double strength(double m)
{
    const double n = inside(m);

    return (1 - n) * sqrt(n - m * m) / (2 * n);
}

/* Stationary: V = 0 on every piece up to a constant of rounding, c^2/n constant, n continuous. The
 * kinks are two repulsive deltas of equal strength, in units of c_u. Tolerances: V is a difference
 * of terms of the size of c^2/m (v^2/2 between the barriers, m small); the rest is rounding. */
static void test_stationary(void **state)
{
    uint64_t seed = 71;

    (void)state;
    for (int trial = 0; trial < 60; trial++) {
        const double m = trial < 2 ? (trial ? 0.9999 : 1e-3) : draw(&seed, 0.05, 0.99);
        const double c = pow(10, draw(&seed, -4, 4)), gap = draw(&seed, 0.1, 9) / c;
        const double n_d = inside(m);
        th_flow *flow = barriers_flow(c, m, gap);
        th_flow_point p, q;
        int edges;
        const double *edge = th_flow_edges(flow, &edges);

        assert_int_equal(edges, 4);
        close_to("barrier", edge[1], -gap / 2, 0);
        close_to("barrier", edge[2], gap / 2, 0);
        for (int i = 0; i < 3; i++)
            for (int j = 0; j < 20; j++) {
                th_flow_eval(flow, i, draw(&seed, edge[i], edge[i + 1]), &p);
                close_to("V", th_flow_potential(flow, &p), 0, 1e-14 * c * c / m);
                close_to("c^2/n", p.c * p.c / p.n * 1.7 / (c * c), 1, 1e-14);
                close_to("n v", p.n * p.v / (1.7 * m * c), 1, 1e-14);
                close_to("v'", p.dv * p.n + p.v * p.dn, 0, 1e-14 * c * c);
            }
        th_flow_eval(flow, 1, 0, &p);
        close_to("plateau", p.n / (1.7 * n_d), 1, 4e-15);
        assert_true(p.v > p.c && p.dn == 0 && p.ddn == 0);
        for (int side = 0; side < 2; side++) {
            th_flow_eval(flow, 2 * side, edge[1 + side], &q);
            close_to("n continuous", q.n / p.n, 1, 1e-13);
            close_to("jump of (sqrt n)'/(2 sqrt n)", (side ? 1 : -1) * q.dn / (4 * q.n) / c,
                     strength(m), 1e-12 * strength(m));
        }
        th_flow_at(flow, edge[3] + 1, &p);
        close_to("downstream n", p.n, 1.7, 0);
        th_flow_destroy(flow);
    }
}

/* n' and n'' outside against the first integral above and its derivative,
 * n'' = 4 (1 - n)^2/2 - 4 (1 - n)(n - m^2), upstream c = 1. n rises away from the barriers. */
static void test_derivatives(void **state)
{
    uint64_t seed = 72;

    (void)state;
    for (int trial = 0; trial < 200; trial++) {
        const double m = draw(&seed, 0.1, 0.95), gap = draw(&seed, 0.5, 5);
        const double s = draw(&seed, 0, 4), side = trial % 2 ? 1 : -1;
        th_flow *flow = barriers_flow(1, m, gap);
        th_flow_point p;
        double n;

        th_flow_at(flow, side * (gap / 2 + s), &p);
        n = p.n / 1.7;
        close_to("n'", side * p.dn / 1.7, 2 * (1 - n) * sqrt(n - m * m), 1e-14);
        close_to("n''", p.ddn / 1.7, 2 * (1 - n) * (1 - n - 2 * (n - m * m)), 1e-14);
        close_to("c'", p.dc, p.dn / (3.4 * p.c), 1e-14);
        th_flow_destroy(flow);
    }
}

/* The profile itself: ds = dn/n' integrates to s = [atanh(sqrt(n - m^2)/C)] / C, between n_d and
 * the horizon n = m^{2/3} (from m/n = sqrt n). kappa = d(c - v)/dx = (3/2) n'/sqrt n there. */
static void test_horizons(void **state)
{
    uint64_t seed = 73;

    (void)state;
    for (int trial = 0; trial < 30; trial++) {
        const double m = draw(&seed, 0.1, 0.95), gap = draw(&seed, 0.1, 9), c = sqrt(1 - m * m);
        const double n = cbrt(m * m), n_d = inside(m);
        const double s = (atanh(sqrt(n - m * m) / c) - atanh(sqrt(n_d - m * m) / c)) / c;
        th_flow *flow = barriers_flow(1, m, gap);
        int horizons, pockets;
        const th_horizon *h = th_flow_horizons(flow, &horizons);
        const th_pocket *pocket = th_flow_pockets(flow, &pockets);

        assert_int_equal(horizons, 2);
        assert_int_equal(pockets, 1);
        for (int i = 0; i < 2; i++) {
            close_to("horizon", h[i].x, (i ? 1 : -1) * (gap / 2 + s), 1e-13);
            close_to("kappa", h[i].kappa, 3 * (1 - n) * sqrt((n - m * m) / n), 1e-12);
            assert_false(h[i].sharp);
        }
        close_to("Mach", pocket->mach, m / (n_d * sqrt(n_d)), 1e-13);
        th_flow_destroy(flow);
    }
}

/* Switch-on lengths. Outside, eta ~ n'/n solves K eta = 0 and has eta'/eta = n''/n' - n'/n =
 * -n'/(2n) = -2 Z at the barrier, where (sqrt n)'' = 0; inside eta is cos or sin of 2 p x,
 * p^2 = v_d^2 - c_d^2. eta and n eta' are continuous: gap_j = [atan(Z/p) + j pi/2]/p. The margin
 * passes zero there. */
static double switch_on(double m, int j)
{
    const double n = inside(m), p = sqrt(m * m / (n * n) - n);

    return (atan(strength(m) / p) + j * pi / 2) / p;
}

static th_index index_at(double m, double gap, th_status *st)
{
    th_flow *flow = barriers_flow(1, m, gap);
    th_index out = {0};

    *st = th_index_open(flow, &out, NULL);
    th_flow_destroy(flow);
    return out;
}

static void test_switch_on(void **state)
{
    uint64_t seed = 74;

    (void)state;
    for (int trial = 0; trial < 100; trial++) {
        const double m = draw(&seed, 0.15, 0.95), near = 1e-8;
        const int j = (int)draw(&seed, 0, 6);
        const double gap = switch_on(m, j);
        th_status st[3];
        const th_index before = index_at(m, gap * (1 - near), &st[0]);
        const th_index at = index_at(m, gap, &st[1]);
        const th_index after = index_at(m, gap * (1 + near), &st[2]);

        assert_int_equal(st[0], TH_OK);
        assert_int_equal(st[2], TH_OK);
        assert_int_equal(before.count, j);
        assert_int_equal(after.count, j + 1);
        close_to("margin", at.margin, 0, 1e-12);
    }
}

/* The two growing modes, to 20 digits 0.075792857465239034283 + 0.036895891315161936363 i and
 * 0.24895533500207195131 + 0.0016189388709901685832 i: check_precision.py. */
static void test_modes(void **state)
{
    static const double re[2] = {0.075792857465239034, 0.24895533500207195};
    static const double im[2] = {0.036895891315161936, 0.0016189388709901686};
    th_flow *flow = barriers_flow(1, 0.55, 6);
    th_solution *s = NULL;

    (void)state;
    assert_int_equal(th_solve(flow, &(th_solve_options){.accuracy = 1e-9}, &s, NULL), TH_OK);
    assert_int_equal(s->verdict, TH_VERDICT_UNSTABLE);
    assert_int_equal(s->unstable, 4);
    for (int i = 0; i < 2; i++) {
        const th_mode *mode = &s->mode[i];

        close_to("Re omega", mode->omega_re, re[i], 1e-13);
        close_to("Im omega", mode->omega_im, im[i], 1e-13);
        assert_int_equal(mode->confirmed,
                         TH_BY_MATRIX | TH_BY_MATCHING | TH_BY_CENSUS | TH_BY_INDEX);
    }
    th_solution_destroy(s);
    th_flow_destroy(flow);
}

/* Four computations agree on either side of a switch-on, and the slow mode next to it grows in
 * proportion to the distance: twice as fast at twice the distance, to a relative 10 %. */
static void test_slow(void **state)
{
    const double m = 0.4, gap = switch_on(m, 2);
    double slow[2];

    (void)state;
    for (int i = 0; i < 2; i++) {
        th_flow *flow = barriers_flow(1, m, gap + 0.002 * (i + 1));
        th_solution *s = NULL;

        assert_int_equal(th_solve(flow, &(th_solve_options){.accuracy = 1e-9}, &s, NULL), TH_OK);
        assert_int_equal(s->verdict, TH_VERDICT_UNSTABLE);
        assert_int_equal(s->unstable, 3);
        slow[i] = HUGE_VAL;
        for (int j = 0; j < s->count; j++)
            if (s->mode[j].label == TH_LABEL_UNSTABLE && s->mode[j].omega_re == 0)
                slow[i] = fmin(slow[i], s->mode[j].omega_im);
        th_solution_destroy(s);
        th_flow_destroy(flow);
    }
    close_to("growth", slow[1] / slow[0], 2, 0.2);
}

static th_status build_with(th_ends ends, const double *value, th_flow **flow, th_error *err)
{
    th_flow_setup setup = {.shape = th_shape_find("barriers"), .density = 1, .ends = ends};

    assert_non_null(setup.shape);
    assert_int_equal(setup.shape->keys, 3);
    for (int i = 0; i < 3; i++) {
        setup.value[i] = value[i];
        setup.given[i] = true;
    }
    return th_flow_build(&setup, flow, err);
}

static void test_errors(void **state)
{
    static const char *const key[3] = {"sound_upstream", "mach", "gap"};
    static const double wrong[4] = {0, -1, HUGE_VAL, NAN};
    const double good[3] = {1, 0.6, 4};
    th_flow *flow = NULL;
    th_error err = {0};
    double bad[3];

    (void)state;
    for (int i = 0; i < 3; i++)
        for (int j = 0; j < 4; j++) {
            memcpy(bad, good, sizeof bad);
            bad[i] = wrong[j];
            assert_int_equal(build_with(open_ends(), bad, &flow, &err), TH_EINVAL);
            assert_string_equal(err.key, key[i]);
            assert_null(flow);
        }
    memcpy(bad, good, sizeof bad);
    bad[1] = 1;
    assert_int_equal(build_with(open_ends(), bad, &flow, &err), TH_EINVAL);
    assert_string_equal(err.key, "mach");
    assert_int_equal(build_with(ring(50, 8), good, &flow, &err), TH_EINVAL);
    assert_string_equal(err.key, "kind");
    assert_non_null(strstr(err.text, "ring"));
    assert_int_equal(build_with(walls(3), good, &flow, &err), TH_OK);
    th_flow_destroy(flow);
}

/* Every allocation refused in turn: the status says so and nothing is left behind. */
static void test_memory(void **state)
{
    const double good[3] = {1, 0.6, 4};

    (void)state;
    for (long k = 0;; k++) {
        th_flow *flow = NULL;
        th_status st;

        refuse_from(k);
        st = build_with(open_ends(), good, &flow, NULL);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            assert_true(k > 2);
            th_flow_destroy(flow);
            return;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_null(flow);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_stationary), cmocka_unit_test(test_derivatives),
        cmocka_unit_test(test_horizons),   cmocka_unit_test(test_switch_on),
        cmocka_unit_test(test_modes),      cmocka_unit_test(test_slow),
        cmocka_unit_test(test_errors),     cmocka_unit_test(test_memory),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
