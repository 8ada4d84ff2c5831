/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Hundreds of seeded random flows: growing modes counted and found on the contour against the
 * static index, which shares nothing with them; the bound on growth; small growth rates; a subset
 * against th_solve, whose modes also come from the matrix. A failure prints the flow to the last
 * digit: values in the order of the shape's keys, density 1.7, open ends.
 *
 * That the static index equals the number of growing modes (both signs of Re omega) of open flows
 * is what every case has shown; the theorem says it is never less (Physica D 195, 263 (2004)). */
#include <complex.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <cmocka.h>

#include "random_flows.h"
#include "twinhorizon/census.h"
#include "twinhorizon/modes.h"

/* Under the sanitizers a flow takes ten times as long. */
#ifdef __SANITIZE_ADDRESS__
enum { FLOWS = 120, SOLVED = 12 };
#else
enum { FLOWS = 540, SOLVED = 25 };
#endif

typedef struct {
    th_status status;
    th_census census;
    double (*omega)[2];
    int count;
    th_error err;
} found;

static found find(const th_flow *flow)
{
    const double top = th_flow_band_limit(flow);
    th_matching *m = NULL;
    found f = {0};

    f.status = th_matching_create(flow, top, TH_MATCHING_USUAL, &m, &f.err);
    if (f.status == TH_OK)
        f.status = th_census_find(flow, m, top, &f.census, &f.omega, &f.count, &f.err);
    th_matching_destroy(m);
    return f;
}

/* What is being tried, for messages. */
static const char *what(const random_flow *r)
{
    static char text[400];

    return random_text(r, text, sizeof text);
}

/* The census counts and finds what the static index says. Modes slower than its contour are counted
 * apart; there, and only there, one may be growing or not. Returns false where `doubt` is allowed
 * and it is undecided. */
static bool expect_index(const random_flow *r, bool doubt)
{
    th_flow *flow = random_build(r);
    found f;
    th_index index = {0};
    th_error err = {0};
    const th_status known = flow != NULL ? th_index_open(flow, &index, &err) : TH_EBUG;
    int weight = 0;

    if (known != TH_OK && !(doubt && known == TH_EUNDECIDED))
        fail_msg("%s: index: %s", what(r), err.text);
    f = find(flow);
    if (f.status != TH_OK) {
        if (!doubt || f.status != TH_EUNDECIDED)
            fail_msg("%s: census: %s", what(r), f.err.text);
        th_flow_destroy(flow);
        return false;
    }
    for (int i = 0; i < f.count; i++) {
        weight += f.omega[i][0] > 0 ? 2 : 1;
        if (!(f.omega[i][1] <= th_growth_bound(flow)))
            fail_msg("%s: growth %g above the bound %g", what(r), f.omega[i][1],
                     th_growth_bound(flow));
    }
    if (weight != f.census.growing)
        fail_msg("%s: %d modes found, %d counted", what(r), weight, f.census.growing);
    if (known == TH_OK && (weight > index.count || weight + f.census.slow < index.count))
        fail_msg("%s: %d growing, %d slow, index %d (margin %g)", what(r), weight, f.census.slow,
                 index.count, index.margin);
    free(f.omega);
    th_flow_destroy(flow);
    return true;
}

static int shapes(void)
{
    int count = 0;

    while (count < RANDOM_SHAPES && th_shape_find(random_shape[count].name) != NULL)
        count++;
    assert_true(count >= 4);
    return count;
}

/* Two flows in three as drawn; the third next to a change of its index. */
static void test_flows(void **state)
{
    uint64_t seed = 20240607;
    const int kinds = shapes();
    int near = 0;

    (void)state;
    for (int i = 0; i < FLOWS; i++) {
        random_flow r = random_draw(i % kinds, &seed);
        const double side = draw(&seed, 0, 1) < 0.5 ? -1 : 1, off = draw_log(&seed, 1e-7, 1e-4);

        if (i % 3 == 2) {
            int before;
            const double at = random_switch(&r, &before);

            if (at > 0) {
                r.value[r.gap] = at * (1 + side * off);
                if (random_index(r, r.value[r.gap]) != before + (side > 0))
                    fail_msg("%s: index does not change at %.17g", what(&r), at);
                near++;
            }
        }
        (void)expect_index(&r, false);
    }
    assert_true(near > FLOWS / 6);
}

/* So close to the change that the slow mode drowns in rounding: doubt is allowed, a wrong count is
 * not. */
static void test_closest(void **state)
{
    uint64_t seed = 4711;
    const int kinds = shapes();
    int decided = 0, tried = 0;

    (void)state;
    for (int i = 0; i < 40; i++) {
        random_flow r = random_draw(i % kinds, &seed);
        const double side = draw(&seed, 0, 1) < 0.5 ? -1 : 1, off = draw_log(&seed, 1e-13, 1e-8);
        int before;
        const double at = random_switch(&r, &before);

        if (at <= 0)
            continue;
        r.value[r.gap] = at * (1 + side * off);
        tried++;
        decided += expect_index(&r, true);
    }
    assert_true(tried > 20 && decided > tried / 3);
}

/* Growth just beyond an even switch-on of a step with equal ends c_1,
 *     2 c_1 p^4 k^2 (gap - L_j) / [(c_1^2 - c_2^2) (c_1^2 + v^2)], p^2 = v^2 - c_2^2, k^2 = c_1^2 -
 * v^2 (set-up of Phys. Rev. D 88, 125012 (2013); the slope was found by perturbation of the
 * matching conditions and agrees with frequencies of 20 digits). First order in gap - L_j: the next
 * is up to 1e-3 of it for growth of 1e-5. */
static void test_slow_growth(void **state)
{
    uint64_t seed = 99;

    (void)state;
    for (int i = 0; i < 60; i++) {
        const double v = draw(&seed, 0.7, 1.2), c_1 = v * draw(&seed, 1.15, 1.8);
        const double c_2 = v * draw(&seed, 0.3, 0.8), growth = draw_log(&seed, 1e-6, 1e-5);
        const double p2 = v * v - c_2 * c_2, k2 = c_1 * c_1 - v * v;
        const double slope =
            2 * c_1 * p2 * p2 * k2 / ((c_1 * c_1 - c_2 * c_2) * (c_1 * c_1 + v * v));
        const double gap = step_switch(v, c_1, c_2, c_1, 2 * (i % 3)) + growth / slope;
        th_flow *flow = step_flow(v, c_1, c_2, c_1, gap);
        found f = find(flow);
        double got;

        assert_int_equal(f.status, TH_OK);
        assert_true(f.count >= 1);
        got = f.omega[f.count - 1][1];
        if (f.omega[f.count - 1][0] != 0 || !(fabs(got / growth - 1) <= 1e-3))
            fail_msg("step %.17g %.17g %.17g %.17g %.17g: slowest %g%+gi, want %g i", v, c_1, c_2,
                     c_1, gap, f.omega[f.count - 1][0], got, growth);
        free(f.omega);
        th_flow_destroy(flow);
    }
}

/* All four computations on a few of them: growing modes are the same, growth to the error bar. */
static void test_solved(void **state)
{
    uint64_t seed = 31337;
    const th_solve_options options = {.accuracy = 1e-9};
    const int kinds = shapes();

    (void)state;
    for (int i = 0; i < SOLVED; i++) {
        const random_flow r = random_draw(i % kinds, &seed);
        th_flow *flow = random_build(&r);
        found f = find(flow);
        th_solution *s = NULL;
        th_error err = {0};
        int growing = 0;

        if (f.status != TH_OK || th_solve(flow, &options, &s, &err) != TH_OK)
            fail_msg("%s: %s%s", what(&r), f.err.text, err.text);
        if (s->verdict != (f.count > 0 ? TH_VERDICT_UNSTABLE : TH_VERDICT_STABLE))
            fail_msg("%s: verdict %d with %d modes; %s", what(&r), (int)s->verdict, f.count,
                     s->reason);
        for (int j = 0; j < s->count; j++) {
            const th_mode *m = &s->mode[j];
            double nearest = HUGE_VAL;

            if (m->label != TH_LABEL_UNSTABLE)
                continue;
            growing++;
            for (int k = 0; k < f.count; k++)
                nearest =
                    fmin(nearest, hypot(f.omega[k][0] - m->omega_re, f.omega[k][1] - m->omega_im));
            if (!(nearest <= m->omega_error && m->omega_error <= 1e-3 * m->omega_im))
                fail_msg("%s: mode %g%+gi, error bar %g, is %g from the census'", what(&r),
                         m->omega_re, m->omega_im, m->omega_error, nearest);
        }
        assert_int_equal(growing, f.count);
        th_solution_destroy(s);
        free(f.omega);
        th_flow_destroy(flow);
    }
}

/* Flows that once failed: values to the last digit. */
static void test_once_broken(void **state)
{
    static const random_flow old[] = {
        /* steep edge far from x = 0: rounding of x passed for a slow series */
        {"tanh",
         6,
         {1.1329064679861669, 1.5652452037847606, 0.46688485331249507, 2.0695173902132211,
          0.1965290378942349, 0.16014085383206134, 16.472764413240483}},
        {"sech",
         3,
         {0.70243847884871968, 1.3814889921182911, 1.8538312954088894, 7.807448843512474}},
        /* x + (right - x) rounded to less than right */
        {"well", 2, {1, 0.99868027075940979, 0.059894778397166719}},
        /* a shallow pocket, a narrow band: F at 1e-12 c^2 is rounding */
        {"well", 2, {1, 0.9998877277958117, 0.0011380471438732554}},
        {"tanh",
         6,
         {1.3471032240442544, 1.3766002284814856, 0.82297983881344039, 1.3480125057659225,
          0.0010846993208506828, 4.2955618857155908, 0.012058253634984934}},
        /* barely subsonic ends: the circle of the slow modes went beyond a branch point */
        {"tanh",
         6,
         {1.9806643061381588, 1.981046077523607, 1.9761068775069768, 7.9102501132324301,
          0.051985097179477663, 3.2457140218655174, 0.17701738443422002}},
        /* growth bound far above the band: steps chosen for the band were too long for it */
        {"step",
         4,
         {2.8271541403343332, 6.4901659979629764, 2.823798922196846, 10.435436201208955,
          10.293166341505222}},
        /* one slow mode found many times over, its digits lost to rounding */
        {"well", 2, {1, 0.99132598910185599, 0.016707526798238684}},
        {"sech",
         3,
         {1.0676355294314952, 1.7105342295332755, 2.731383581529093, 3.9383222259969592}},
        {"tanh",
         6,
         {1.0369477541953256, 1.2527225342161954, 0.54241575944259424, 1.2351453043166041,
          1.7196634159625326, 0.09846561263362566, 6.9788458264592377}},
    };

    (void)state;
    for (size_t i = 0; i < sizeof old / sizeof old[0]; i++)
        (void)expect_index(&old[i], false);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_flows),       cmocka_unit_test(test_closest),
        cmocka_unit_test(test_slow_growth), cmocka_unit_test(test_solved),
        cmocka_unit_test(test_once_broken),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
