/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Sensitivities against finite differences of the modes themselves: each mode is followed to
 * configurations on both sides, polished there, and the differences extrapolated (Richardson). The
 * two share the matching function but not the route: here roots are differenced, there F/F_omega.
 * For step pockets a closed form stands beside them: at an even switch-on length the growth rate
 * of equal ends starts with slope 2 c_1 p^4 k^2/[(c_1^2 - c_2^2)(c_1^2 + v^2)], p^2 = v^2 - c_2^2,
 * k^2 = c_1^2 - v^2 (set-up of Phys. Rev. D 88, 125012 (2013)). */
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include <cmocka.h>

#include "twinhorizon/flow.h"
#include "twinhorizon/matching.h"
#include "twinhorizon/modes.h"
#include "twinhorizon/sensitivity.h"

static th_flow_setup setup_of(const char *shape, const double *value)
{
    th_flow_setup s = {.shape = th_shape_find(shape), .density = 1.0};

    assert_non_null(s.shape);
    for (int k = 0; k < s.shape->keys; k++) {
        s.value[k] = value[k];
        s.given[k] = value[k] != 0.0;
    }
    return s;
}

static int key_of(const th_flow_setup *s, const char *name)
{
    for (int k = 0; k < s->shape->keys; k++)
        if (strcmp(s->shape->key[k].key, name) == 0)
            return k;
    fail_msg("no key %s", name);
    return -1;
}

static th_solution *solve(const th_flow_setup *s)
{
    th_flow *flow = NULL;
    th_solution *out = NULL;

    assert_int_equal(th_flow_build(s, &flow, NULL), TH_OK);
    assert_int_equal(th_solve(flow, &(th_solve_options){.accuracy = 1e-6}, &out, NULL), TH_OK);
    th_flow_destroy(flow);
    return out;
}

/* The mode near (re, im) of a configuration with one key moved. */
static void root_at(const th_flow_setup *s, int key, double value, double top, double *re,
                    double *im)
{
    th_flow_setup moved = *s;
    th_flow *flow = NULL;
    th_matching *m = NULL;
    double last;

    moved.value[key] = value;
    assert_int_equal(th_flow_build(&moved, &flow, NULL), TH_OK);
    assert_int_equal(th_matching_create(flow, top, TH_MATCHING_USUAL, &m, NULL), TH_OK);
    assert_int_equal(th_matching_polish(m, 0.1 * top, re, im, &last, NULL), TH_OK);
    th_matching_destroy(m);
    th_flow_destroy(flow);
}

/* Fourth-order difference of a mode; h = 4e-4 of the value leaves 1e-10 of truncation. */
static void difference(const th_flow_setup *s, int key, double top, const th_mode *m, double *re,
                       double *im)
{
    const double h = 4e-4 * s->value[key];
    double x[4], y[4];

    for (int i = 0; i < 4; i++) {
        static const double at[4] = {-2.0, -1.0, 1.0, 2.0};

        x[i] = m->omega_re;
        y[i] = m->omega_im;
        root_at(s, key, s->value[key] + at[i] * h, top, &x[i], &y[i]);
    }
    *re = (8.0 * (x[2] - x[1]) - (x[3] - x[0])) / (12.0 * h);
    *im = (8.0 * (y[2] - y[1]) - (y[3] - y[0])) / (12.0 * h);
}

/* All growing modes, all keys that the user gave. */
static void compare(const th_flow_setup *s)
{
    th_solution *answer = solve(s);
    int compared = 0;

    assert_true(answer->unstable > 0);
    for (int i = 0; i < answer->count; i++) {
        const th_mode *m = &answer->mode[i];

        if (m->label != TH_LABEL_UNSTABLE)
            continue;
        for (int key = 0; key < s->shape->keys; key++) {
            th_slope slope;
            double re, im, off, scale;

            if (!s->given[key])
                continue;
            assert_int_equal(
                th_sensitivity(s, key, answer->omega_top, m->omega_re, m->omega_im, &slope, NULL),
                TH_OK);
            difference(s, key, answer->omega_top, m, &re, &im);
            off = hypot(slope.re - re, slope.im - im);
            scale = hypot(re, im);
            if (off > 1e-7 * scale + slope.error)
                fail_msg("%s %s: %.12g%+.12gi, differences %.12g%+.12gi, bar %.1e", s->shape->name,
                         s->shape->key[key].key, slope.re, slope.im, re, im, slope.error);
            assert_true(slope.error < 1e-4 * scale);
            if (m->omega_re == 0.0)
                assert_true(slope.re == 0.0);
            compared++;
        }
    }
    assert_true(compared >= 2);
    th_solution_destroy(answer);
}

static void test_step(void **state)
{
    static const double value[] = {1.0, 1.5, 0.5, 1.4, 6.0}; /* speed, sounds, gap */
    th_flow_setup s = setup_of("step", value);

    (void)state;
    assert_int_equal(key_of(&s, "gap"), 4);
    compare(&s);
}

static void test_smooth(void **state)
{
    th_flow_setup s = {.shape = th_shape_find("tanh"), .density = 1.0};
    static const struct {
        const char *key;
        double value;
    } given[] = {{"speed", 1.0},         {"sound_upstream", 1.35},
                 {"sound_pocket", 0.55}, {"sound_downstream", 1.45},
                 {"width_black", 0.5},   {"width_white", 0.7},
                 {"gap", 10.0}};

    (void)state;
    for (size_t i = 0; i < sizeof given / sizeof given[0]; i++) {
        const int k = key_of(&s, given[i].key);

        s.value[k] = given[i].value;
        s.given[k] = true;
    }
    compare(&s);
}

static void test_well(void **state)
{
    th_flow_setup s = {.shape = th_shape_find("well"), .density = 1.0};

    (void)state;
    s.value[key_of(&s, "mach")] = 0.6;
    s.given[key_of(&s, "mach")] = true;
    s.value[key_of(&s, "gap")] = 1.7;
    s.given[key_of(&s, "gap")] = true;
    compare(&s);
}

/* Slope of the growth rate at the first switch-on of a step: closed form, see the head. A
 * millionth of a healing length above it the slope has changed by less than 1e-5. */
static void test_switch_on(void **state)
{
    const double v = 0.75, c1 = 1.0, c2 = 0.3, p2 = v * v - c2 * c2, k2 = c1 * c1 - v * v;
    const double k0 = 2.0 * sqrt(p2), gap = 2.0 * atan(2.0 * sqrt(k2) / k0) / k0 + 1e-6;
    const double expected = 2.0 * c1 * p2 * p2 * k2 / ((c1 * c1 - c2 * c2) * (c1 * c1 + v * v));
    const double value[] = {v, c1, c2, c1, gap};
    th_flow_setup s = setup_of("step", value);
    th_solution *answer = solve(&s);
    th_slope slope;

    (void)state;
    assert_int_equal(answer->unstable, 1);
    assert_int_equal(
        th_sensitivity(&s, 4, answer->omega_top, 0.0, answer->mode[0].omega_im, &slope, NULL),
        TH_OK);
    /* the step of the difference, a thousandth of the gap, reaches below the switch-on */
    assert_true(fabs(slope.im - expected) < 1e-4 * expected);
    th_solution_destroy(answer);
}

static void test_errors(void **state)
{
    static const double value[] = {1.0, 1.5, 0.5, 1.4, 6.0};
    th_flow_setup s = setup_of("step", value);
    th_slope slope;

    (void)state;
    assert_int_equal(th_sensitivity(&s, -1, 0.3, 0.0, 0.1, &slope, NULL), TH_EINVAL);
    assert_int_equal(th_sensitivity(&s, 5, 0.3, 0.0, 0.1, &slope, NULL), TH_EINVAL);
    assert_int_equal(th_sensitivity(NULL, 0, 0.3, 0.0, 0.1, &slope, NULL), TH_EINVAL);
    s.given[0] = false;
    assert_int_equal(th_sensitivity(&s, 0, 0.3, 0.0, 0.1, &slope, NULL), TH_ENONE);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_step),   cmocka_unit_test(test_smooth),
        cmocka_unit_test(test_well),   cmocka_unit_test(test_switch_on),
        cmocka_unit_test(test_errors),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
