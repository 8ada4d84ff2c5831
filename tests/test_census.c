/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of the census: counts of known flows, modes found without a matrix, long pockets, rings
 * and walls, the bound on growth, doubt where a mode lies on the contour.
 *
 * Known frequencies: "matching" and their source as in the head of tests/test_modes.c. Known
 * counts: the number of switch-on lengths below the gap, closed forms quoted at each test. */
#include <complex.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "random_flows.h"
#include "refuse.h"
#include "twinhorizon/census.h"
#include "twinhorizon/modes.h"

/* What th_census_find says of a flow. */
typedef struct {
    th_status status;
    th_census census;
    double (*omega)[2];
    int count, weight; /* weight: both signs of Re omega */
    th_error err;
} found;

static th_matching *prepare(const th_flow *flow)
{
    th_matching *m = NULL;
    th_error err = {0};

    if (th_matching_create(flow, th_flow_band_limit(flow), TH_MATCHING_USUAL, &m, &err) != TH_OK)
        fail_msg("%s", err.text);
    return m;
}

static found find(const th_flow *flow, double top)
{
    th_matching *m = prepare(flow);
    found f = {0};

    f.status = th_census_find(flow, m, top, &f.census, &f.omega, &f.count, &f.err);
    for (int i = 0; i < f.count; i++)
        f.weight += f.omega[i][0] > 0 ? 2 : 1;
    th_matching_destroy(m);
    return f;
}

static found find_all(const th_flow *flow)
{
    found f = find(flow, th_flow_band_limit(flow));

    if (f.status != TH_OK)
        fail_msg("%s", f.err.text);
    assert_int_equal(f.weight, f.census.growing);
    assert_true(f.census.worst_step > 0 && f.census.worst_step < pi / 4);
    assert_true(f.census.evaluations > 10);
    for (int i = 0; i < f.count; i++) {
        assert_true(f.omega[i][0] >= 0 && f.omega[i][0] < f.census.re_max);
        assert_true(f.omega[i][1] > 0 && f.omega[i][1] <= th_growth_bound(flow));
        assert_true(i == 0 || f.omega[i][1] <= f.omega[i - 1][1]);
    }
    return f;
}

static void expect_has(const found *f, double re, double im, double tolerance)
{
    double nearest = HUGE_VAL;

    for (int i = 0; i < f->count; i++)
        nearest = fmin(nearest, hypot(f->omega[i][0] - re, f->omega[i][1] - im));
    if (!(nearest <= tolerance))
        fail_msg("no mode within %g of %.15g%+.15gi, the nearest is %g away", tolerance, re, im,
                 nearest);
}

/* ---- counts --------------------------------------------------------------------------------- */

/* Growing modes = switch-on lengths below the gap. */
static void test_steps(void **state)
{
    (void)state;
    for (int i = 0; i < 40; i++) {
        const double gap = 0.37 + 0.4 * i;
        th_flow *flow = step_flow(0.75, 1, 0.3, 1, gap);
        found f = find_all(flow);
        int want = 0;

        while (step_switch(0.75, 1, 0.3, 1, want) < gap)
            want++;
        if (f.census.growing != want)
            fail_msg("gap %g: %d modes counted, %d L_j below it", gap, f.census.growing, want);
        assert_int_equal(f.census.slow, 0);
        free(f.omega);
        th_flow_destroy(flow);
    }
}

/* Frequencies: matching. */
static void test_known(void **state)
{
    static const double tanhs[7] = {1, 1.5, 0.5, 1.5, 0.5, 0.5, 8}, well[3] = {1, 0.6, 1.5};
    th_flow *flow = step_flow(1, 1.5, 0.5, 1.5, 12);
    found f = find_all(flow);

    (void)state;
    assert_int_equal(f.count, 4);
    expect_has(&f, 0, 0.01416371444060713, 1e-14);
    expect_has(&f, 0.18624455735398988, 0.01090828558517529, 1e-14);
    expect_has(&f, 0.2690462675509777, 0.00221631049737058, 1e-14);
    expect_has(&f, 0.07472227945991715, 0.00198925014565306, 1e-14);
    free(f.omega);
    th_flow_destroy(flow);
    flow = flow_of("tanh", open_ends(), tanhs);
    f = find_all(flow);
    assert_int_equal(f.count, 2);
    expect_has(&f, 0.06647747114694471, 0.03713458666473244, 1e-13);
    expect_has(&f, 0.24076045708853563, 0.00986066464679759, 1e-13);
    free(f.omega);
    th_flow_destroy(flow);
    flow = flow_of("well", open_ends(), well);
    f = find_all(flow);
    assert_int_equal(f.count, 2);
    expect_has(&f, 0, 0.09896952583168151, 1e-13);
    expect_has(&f, 0.64537355817198863, 0.00243696234374790, 1e-13);
    free(f.omega);
    th_flow_destroy(flow);
}

/* Well: 2 + the number of gaps j pi/(2 sqrt(1/m^2 - m^2)) below it, zero modes of the static
 * operator on a plateau between half solitons. Sech: switch-ons at widths
 * [(2j+1) K + sqrt((2j+1)^2 K^2 + 4 (4D - K^2)(j^2 + j))]/[2 (4D - K^2)], K = 2 sqrt(c_u^2 - v^2),
 * the Poeschl-Teller potential, from memory. */
static void test_exact(void **state)
{
    const double k = 2 * sqrt(1.3 * 1.3 - 1), depth = 1.4, m = 0.6;

    (void)state;
    for (int i = 0; i < 6; i++) {
        const double gap = 0.3 + 1.07 * i, width = 0.3 + 0.83 * i;
        const double well[3] = {1, m, gap}, sech[4] = {1, 1.3, depth, width};
        int want = 2 + (int)floor(gap * 2 * sqrt(1 / (m * m) - m * m) / pi);
        th_flow *flow = flow_of("well", open_ends(), well);
        found f = find_all(flow);

        assert_int_equal(f.census.growing, want);
        free(f.omega);
        th_flow_destroy(flow);
        flow = flow_of("sech", open_ends(), sech);
        f = find_all(flow);
        for (want = 0;; want++) {
            const double odd = (2 * want + 1) * k, rest = 4 * depth - k * k;

            if (width < (odd + sqrt(odd * odd + 4 * rest * want * (want + 1))) / (2 * rest))
                break;
        }
        assert_int_equal(f.census.growing, want);
        free(f.omega);
        th_flow_destroy(flow);
    }
}

/* One horizon of either sense never grows (set-up of Phys. Rev. A 80, 043601 (2009), from
 * memory), nor does a flow without any. */
static void test_single_horizon(void **state)
{
    (void)state;
    for (int i = 0; i < 10; i++) {
        const double c[3] = {0.5, 0.8, 1.4}, out[3] = {1.5, 1.1, 1.1}, width = 0.05 + 0.2 * i;
        const double c_p = c[i / 4], c_out = out[i / 4];
        const bool black = i % 2 == 0, sharp = i % 4 < 2;
        const double c_u = black ? c_out : c_p, c_d = black ? c_p : c_out;
        const double step[5] = {1, c_u, c_p, c_d, 4};
        const double smooth[7] = {1, c_u, c_p, c_d, width, width, 4};
        th_flow *flow = flow_of(sharp ? "step" : "tanh", open_ends(), sharp ? step : smooth);
        found f = find_all(flow);

        if (f.census.growing != 0 || f.census.slow != 0)
            fail_msg("flow %d: %d growing, %d slow", i, f.census.growing, f.census.slow);
        free(f.omega);
        th_flow_destroy(flow);
    }
}

/* ---- long pockets --------------------------------------------------------------------------- */

static void expect_long(double gap, int *modes)
{
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, gap);
    found f = find_all(flow);
    int want = 0;

    while (step_switch(0.75, 1, 0.3, 1, want) < gap)
        want++;
    if (f.weight != want)
        fail_msg("gap %g: %d modes found, %d L_j below it", gap, f.weight, want);
    for (int i = 0; i < f.count; i++) /* all different */
        for (int j = 0; j < i; j++)
            assert_true(hypot(f.omega[i][0] - f.omega[j][0], f.omega[i][1] - f.omega[j][1]) > 1e-5);
    *modes = f.count;
    free(f.omega);
    th_flow_destroy(flow);
}

static void test_long(void **state)
{
    int modes;

    (void)state;
    expect_long(100, &modes);
    assert_int_equal(modes, 22);
    expect_long(200, &modes);
    expect_long(400, &modes);
    assert_int_equal(modes, 88);
}

/* The modes of th_solve are these, whatever its matrix found. */
static void expect_same(th_flow *flow)
{
    const th_solve_options options = {.accuracy = 1e-9};
    th_solution *s = NULL;
    found f = find_all(flow);
    int growing = 0;

    assert_int_equal(th_solve(flow, &options, &s, NULL), TH_OK);
    assert_int_equal(s->verdict, TH_VERDICT_UNSTABLE);
    assert_int_equal(s->unstable, f.weight);
    for (int i = 0; i < s->count; i++) {
        if (s->mode[i].label != TH_LABEL_UNSTABLE)
            continue;
        growing++;
        expect_has(&f, s->mode[i].omega_re, s->mode[i].omega_im, s->mode[i].omega_error);
    }
    assert_int_equal(growing, f.count);
    th_solution_destroy(s);
    free(f.omega);
    th_flow_destroy(flow);
}

static void test_solved(void **state)
{
    static const double tanhs[7] = {0.9, 1.3, 0.4, 1.2, 0.3, 0.8, 9};

    (void)state;
    expect_same(step_flow(0.75, 1, 0.3, 1, 60));
    expect_same(flow_of("tanh", open_ends(), tanhs));
}

/* Supersonic ends. A single horizon of either sense has no growing mode, nor has a subsonic stretch
 * between two supersonic ends. A flow that is supersonic everywhere can have one where a band
 * reaches higher inside: frequency of 20 digits from tests/check_precision.py. Small frequencies:
 * no slow mode is made up by the two ends. */
static void test_supersonic(void **state)
{
    static const struct {
        double c_u, c_p, c_d;
        int weight;
    } flow[] = {{1.5, 0.5, 0.5, 0},
                {0.5, 0.5, 1.5, 0},
                {0.5, 1.5, 0.5, 0},
                {0.8, 0.9, 0.7, 0},
                {0.8, 0.5, 0.7, 2}};

    (void)state;
    for (size_t i = 0; i < sizeof flow / sizeof flow[0]; i++) {
        th_flow *f = step_flow(1, flow[i].c_u, flow[i].c_p, flow[i].c_d, 6);
        found all = find_all(f);

        assert_int_equal(all.weight, flow[i].weight);
        if (flow[i].weight > 0)
            expect_has(&all, 0.24254055486028875089, 0.0013702795005344315695, 1e-14);
        free(all.omega);
        th_flow_destroy(f);
    }
}

/* A sonic end: no counting at zero frequency, and the sentence says so. */
static void test_sonic_end(void **state)
{
    static const double sound[3] = {1, 1 + 1e-9, 1 - 1e-10};

    (void)state;
    for (int i = 0; i < 3; i++) {
        th_flow *f = step_flow(1, 1.5, 0.5, sound[i], 6);
        th_matching *m = NULL;
        th_census census;
        th_error err = {0};

        assert_int_equal(th_matching_create(f, th_flow_band_limit(f), TH_MATCHING_USUAL, &m, &err),
                         TH_OK);
        assert_int_equal(th_census_count(f, m, th_flow_band_limit(f), &census, &err),
                         TH_EUNDECIDED);
        assert_non_null(strstr(err.text, "downstream end is so close to sonic"));
        th_matching_destroy(m);
        th_flow_destroy(f);
    }
}

/* ---- rings and walls ------------------------------------------------------------------------ */

static th_census count(const th_flow *flow)
{
    th_matching *m = prepare(flow);
    th_census c = {0};
    th_error err = {0};

    if (th_census_count(flow, m, th_flow_band_limit(flow), &c, &err) != TH_OK)
        fail_msg("%s", err.text);
    th_matching_destroy(m);
    return c;
}

/* growing + 2 x neutral modes of negative energy = static index (Hamiltonian-Krein index, Physica
 * D 195, 263 (2004)). The census counts growing and neutral modes, th_solve signs the latter. */
static void test_closed(void **state)
{
    const th_solve_options options = {.accuracy = 1e-9};

    (void)state;
    for (int i = 0; i < 6; i++) {
        const double gap = 8 + 0.5 * i, around[7] = {0, 1.4, 0.6, 1.4, 0.5, 0.5, gap};
        const double boxed[5] = {0.75, 1, 0.3, 1.1, gap - 5};
        th_flow *flow =
            i % 3 < 2 ? flow_of("tanh", ring(50, 8), around) : flow_of("step", walls(6), boxed);
        const th_census c = count(flow);
        th_solution *s = NULL;

        assert_int_equal(th_solve(flow, &options, &s, NULL), TH_OK);
        assert_true(s->index_known && s->index > 0);
        if (c.growing + 2 * s->negative != s->index)
            fail_msg("flow %d: %d growing, %d negative, index %d", i, c.growing, s->negative,
                     s->index);
        assert_int_equal(c.growing, s->unstable);
        assert_true(c.neutral >= s->negative && c.floor > 0 && c.slowest == 0);
        th_solution_destroy(s);
        th_flow_destroy(flow);
    }
}

/* Uniform rings hold neutral modes only: two waves for each k = 2 pi j/circumference, at
 * |v k +- sqrt(c^2 k^2 + k^4/4)|, those with 0 < omega < re_max (Bogoliubov's dispersion
 * relation). */
static void test_uniform_ring(void **state)
{
    uniform_state uniform = {.c = 1.1};
    th_flow *flow = uniform_flow(ring(30, 3), 30, &uniform);
    const th_census c = count(flow);
    int want = 0;

    (void)state;
    for (int j = 1; j < 1000; j++) {
        const double k = 2 * pi * j / 30, e = sqrt(1.1 * 1.1 * k * k + k * k * k * k / 4);

        want += fabs(uniform.v * k - e) < c.re_max;
        want += fabs(uniform.v * k + e) < c.re_max;
    }
    assert_int_equal(c.growing, 0);
    assert_int_equal(c.neutral, want);
    assert_true(want > 4);
    th_flow_destroy(flow);
}

/* ---- bound on growth ------------------------------------------------------------------------ */

/* Closed forms, 2 % added: steps v (c_d^2 - c_p^2)/(2 c_p) or c^2; no rise, no growth. Smooth:
 * v c'/c, largest on a fine grid of its own. */
static void test_bound(void **state)
{
    const double tanhs[7] = {1, 1.5, 0.5, 1.4, 0.4, 0.9, 12}, sech[4] = {0.9, 1.2, 0.9, 2.385};
    const double well[3] = {1, 0.6, 1.5};
    th_flow *flow = step_flow(0.75, 1, 0.7, 1.05, 3);
    double top = 0;

    (void)state;
    close_to("step", th_growth_bound(flow), 1.02 * 0.75 * (1.05 * 1.05 - 0.49) / 1.4, 1e-14);
    th_flow_destroy(flow);
    flow = step_flow(0.75, 1, 0.3, 1.05, 3);
    close_to("deep step", th_growth_bound(flow), 1.02 * 1.05 * 1.05, 1e-14);
    th_flow_destroy(flow);
    flow = step_flow(0.75, 1, 0.3, 0.3, 3);
    close_to("black horizon", th_growth_bound(flow), 0, 0);
    th_flow_destroy(flow);
    flow = flow_of("tanh", open_ends(), tanhs);
    for (int i = 0; i < 100000; i++) { /* the white edge alone: the black one is 20 widths away */
        const double t = -6 + 12e-5 * i, rise = 0.9, g = 1 / cosh(t);

        top = fmax(top, rise / 2 * g * g / 0.9 / (0.5 + rise * (1 + tanh(t)) / 2));
    }
    close_to("tanh", th_growth_bound(flow), 1.02 * top, 1e-4 * top);
    th_flow_destroy(flow);
    flow = flow_of("sech", open_ends(), sech);
    top = 0;
    for (int i = 0; i < 100000; i++) { /* c c' = D sech^2 t tanh t / w */
        const double t = 6e-5 * i, g = 1 / cosh(t);

        top = fmax(top, 0.9 * 0.9 * g * g * tanh(t) / 2.385 / (1.44 - 0.9 * g * g));
    }
    close_to("sech", th_growth_bound(flow), 1.02 * top, 1e-3 * top);
    th_flow_destroy(flow);
    flow = flow_of("well", open_ends(), well);
    top = 0;
    for (int i = 0; i < 100000; i++) { /* -v' = m n'/n^2, n = m^2 + (1 - m^2) tanh^2 */
        const double t = tanh(6e-5 * i), n = 0.36 + 0.64 * t * t;

        top = fmax(top, 0.6 * 2 * 0.8 * 0.64 * t * (1 - t * t) / (n * n));
    }
    close_to("well", th_growth_bound(flow), 1.02 * top, 1e-3 * top);
    th_flow_destroy(flow);
}

/* ---- doubt ---------------------------------------------------------------------------------- */

/* At a switch-on the mode sits at omega = 0: never counted as growing without a word. */
static void test_switch_on(void **state)
{
    (void)state;
    for (int j = 0; j < 6; j++) {
        th_flow *flow = step_flow(0.75, 1, 0.3, 1, step_switch(0.75, 1, 0.3, 1, j));
        found f = find(flow, th_flow_band_limit(flow));

        if (f.status == TH_OK && f.census.slow < 1)
            fail_msg("L_%d: %d growing modes, %d slow", j, f.census.growing, f.census.slow);
        assert_true(f.status == TH_OK || f.status == TH_EUNDECIDED);
        assert_true((f.status == TH_OK) == (f.omega != NULL));
        free(f.omega);
        th_flow_destroy(flow);
    }
    for (int side = -1; side <= 1; side += 2) { /* too slow to be told from 0, but seen */
        th_flow *flow =
            step_flow(0.75, 1, 0.3, 1, step_switch(0.75, 1, 0.3, 1, 0) * (1 + 1e-8 * side));
        found f = find_all(flow);

        assert_int_equal(f.census.growing, 0);
        assert_int_equal(f.census.slow, 1);
        free(f.omega);
        th_flow_destroy(flow);
    }
}

/* The region is made to end on a mode: its right edge runs through it. */
static void test_on_contour(void **state)
{
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, 12);
    const double re = 0.17948264247014790594; /* matching; Im 0.00267911113370677024 */
    found inside = find(flow, re * 1.001 / 3), on = find(flow, re / 3),
          outside = find(flow, re * 0.999 / 3);

    (void)state;
    assert_int_equal(inside.status, TH_OK);
    assert_int_equal(inside.census.growing, 5);
    assert_int_equal(outside.status, TH_OK);
    assert_int_equal(outside.census.growing, 3);
    assert_int_equal(on.status, TH_EUNDECIDED);
    assert_null(on.omega);
    assert_int_equal(on.count, 0);
    assert_non_null(strstr(on.err.text, "a mode lies on the contour near omega = 0.17948"));
    free(inside.omega);
    free(outside.omega);
    th_flow_destroy(flow);
}

/* ---- errors, memory ------------------------------------------------------------------------- */

static void test_errors(void **state)
{
    static const double boxed[5] = {0.75, 1, 0.3, 1.1, 5};
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, 2), *box = flow_of("step", walls(6), boxed);
    th_matching *m = prepare(flow), *b = prepare(box);
    th_census c;
    double(*omega)[2] = NULL;
    int modes = 1;
    th_error err = {0};

    (void)state;
    assert_int_equal(th_census_count(NULL, m, 1, &c, &err), TH_EINVAL);
    assert_int_equal(th_census_count(flow, NULL, 1, &c, &err), TH_EINVAL);
    assert_int_equal(th_census_count(flow, m, 1, NULL, &err), TH_EINVAL);
    assert_int_equal(th_census_count(flow, m, 0, &c, &err), TH_EINVAL);
    assert_int_equal(th_census_count(flow, m, NAN, &c, NULL), TH_EINVAL);
    assert_int_equal(th_census_find(flow, m, 1, &c, NULL, &modes, &err), TH_EINVAL);
    assert_int_equal(th_census_find(flow, m, 1, &c, &omega, NULL, &err), TH_EINVAL);
    assert_int_equal(th_census_find(box, b, 1, &c, &omega, &modes, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "open ends"));
    assert_true(omega == NULL && modes == 0);
    th_matching_destroy(m);
    th_matching_destroy(b);
    th_flow_destroy(box);
    th_flow_destroy(flow);
}

static void test_refused(void **state)
{
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, 150); /* long: its paths must grow */
    th_matching *m = prepare(flow);
    const double top = th_flow_band_limit(flow);

    (void)state;
    for (long k = 0;; k++) {
        th_census c;
        double(*omega)[2] = NULL;
        int modes = 0;
        th_status st;

        refuse_from(k);
        st = th_census_find(flow, m, top, &c, &omega, &modes, NULL);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            assert_true(k >= 4);
            free(omega);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_null(omega);
    }
    th_matching_destroy(m);
    th_flow_destroy(flow);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_steps),      cmocka_unit_test(test_known),
        cmocka_unit_test(test_exact),      cmocka_unit_test(test_single_horizon),
        cmocka_unit_test(test_long),       cmocka_unit_test(test_solved),
        cmocka_unit_test(test_closed),     cmocka_unit_test(test_uniform_ring),
        cmocka_unit_test(test_bound),      cmocka_unit_test(test_switch_on),
        cmocka_unit_test(test_on_contour), cmocka_unit_test(test_errors),
        cmocka_unit_test(test_refused),    cmocka_unit_test(test_supersonic),
        cmocka_unit_test(test_sonic_end),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
