/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tolerances against closed forms for step pockets with equal ends: number of growing modes from
 * the switch-on lengths L_j = [2 atan(k_u/k_0) + j pi]/k_0, k_0 = 2 sqrt(v^2 - c_p^2), k_u = 2
 * sqrt(c_u^2 - v^2)
 * ("Saturation of black hole lasers in Bose-Einstein condensates", Phys. Rev. D 88, 125012 (2013)),
 * and the growth rate just above L_0, slope (gap - L_0) with slope = 2 c_u p^4 k^2/[(c_u^2 -
 * c_p^2)(c_u^2 + v^2)], p = k_0/2, k = k_u/2 (same set-up). Uniform distributions: closed forms of
 * probability theory. For tiny tolerances th_sensitivity, which has tests of its own, says what
 * must come out. */
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

#include <cmocka.h>

#include "flows.h"
#include "refuse.h"
#include "twinhorizon/modes.h"
#include "twinhorizon/sensitivity.h"
#include "twinhorizon/tolerance.h"

extern void openblas_set_num_threads(int threads);

enum { SPEED, UP, POCKET, DOWN, GAP, KEYS }; /* of a step */

static const double v = 0.75, c_u = 1.0, c_p = 0.3;

/* An estimate and its true value may differ by so many standard errors: a chance of 1e-2 for the
 * seven degrees of freedom of eight shifts, and seeds are fixed. */
static const double errors = 3.5;

static double length_at(double speed, int j)
{
    const double k_0 = 2 * sqrt(speed * speed - c_p * c_p);
    const double k_u = 2 * sqrt(c_u * c_u - speed * speed);

    return (2 * atan(k_u / k_0) + j * pi) / k_0;
}

/* Growth rate per gap above L_0. */
static double first_slope(void)
{
    const double p2 = v * v - c_p * c_p, k2 = c_u * c_u - v * v;

    return 2 * c_u * p2 * p2 * k2 / ((c_u * c_u - c_p * c_p) * (c_u * c_u + v * v));
}

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

static th_flow_setup step_setup(double gap)
{
    return setup_of("step", (const double[]){v, c_u, c_p, c_u, gap});
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

static th_tolerance_options usual(const double *tolerance, int samples)
{
    return (th_tolerance_options){
        .tolerance = tolerance, .samples = samples, .seed = 7, .accuracy = 1e-6, .threads = 1};
}

static th_tolerance sample(const th_flow_setup *s, const th_solution *solution,
                           const th_tolerance_options *options)
{
    th_tolerance out = {0};
    th_error err = {0};

    if (th_tolerance_sample(s, solution, options, &out, &err) != TH_OK)
        fail_msg("%s", err.text);
    return out;
}

static th_tolerance solve_and_sample(const th_flow_setup *s, const th_tolerance_options *options)
{
    th_solution *solution = solve(s);
    const th_tolerance out = sample(s, solution, options);

    th_solution_destroy(solution);
    return out;
}

/* Within its own bar, and the bar is worth something. */
static void agrees(const char *what, th_estimate got, double want, double bar)
{
    close_to(what, got.value, want, errors * got.error);
    if (!(got.error > 0.0 && got.error < bar))
        fail_msg("%s: error %g, want > 0 and < %g", what, got.error, bar);
}

static const th_tolerance_key *of_key(const th_tolerance *t, int key)
{
    for (int i = 0; i < t->keys; i++)
        if (t->key[i].key == key)
            return &t->key[i];
    fail_msg("key %d is not in the result", key);
    return NULL;
}

/* ---- probabilities and quantiles ----------------------------------------------------------------
 */

/* The gap is above L_0 with the probability that lies there. */
static void test_probability(void **state)
{
    const double gap = 1.02 * length_at(v, 0), part = 0.05, low = gap * (1 - part);
    const double above = (gap * (1 + part) - length_at(v, 0)) / (2 * part * gap);
    const double tolerance[KEYS] = {[GAP] = part};
    const th_flow_setup s = step_setup(gap);
    const th_tolerance_options options = usual(tolerance, 0);
    th_tolerance t = solve_and_sample(&s, &options);

    (void)state;
    assert_true(low < length_at(v, 0) && above < 0.95);
    assert_int_equal(t.samples, TH_TOLERANCE_SAMPLES);
    assert_int_equal(t.failed + t.undecided, 0);
    assert_int_equal(t.unstable_least, 0);
    assert_int_equal(t.unstable_most, 1);
    agrees("probability", t.growing, above, 0.005);
    assert_true(t.growth.low.value == 0.0 && t.growth.low.error == 0.0);
    assert_true(t.growth.median.value > 0.0 && t.growth.high.value > t.growth.median.value);
    assert_true(t.frequency_known && t.frequency.low.value == 0.0 && t.frequency.high.value == 0.0);
    assert_false(t.visible_known);
    th_tolerance_clear(&t);
    assert_null(t.key);
}

/* Speed and gap drift: L_0 of each speed, averaged over speeds by the midpoint rule. */
static void test_two_keys(void **state)
{
    enum { STRIPS = 2000 };
    const double gap = 1.01 * length_at(v, 0), part = 0.04;
    const double tolerance[KEYS] = {[SPEED] = part, [GAP] = part};
    const th_flow_setup s = step_setup(gap);
    const th_tolerance_options options = usual(tolerance, 0);
    th_tolerance t = solve_and_sample(&s, &options);
    double above = 0;

    (void)state;
    for (int i = 0; i < STRIPS; i++) {
        const double speed = v * (1 + part * ((2 * i + 1.0) / STRIPS - 1));
        const double over = gap * (1 + part) - length_at(speed, 0);

        above += fmin(fmax(over / (2 * part * gap), 0), 1) / STRIPS;
    }
    agrees("probability", t.growing, above, 0.01);
    assert_int_equal(t.keys, 2);
    th_tolerance_clear(&t);
}

/* How many modes grow, over several switch-ons. */
static void test_staircase(void **state)
{
    const double gap = length_at(v, 3) + 0.5, part = 0.4;
    const double tolerance[KEYS] = {[GAP] = part};
    const th_flow_setup s = step_setup(gap);
    const th_tolerance_options options = usual(tolerance, 64);
    th_tolerance t = solve_and_sample(&s, &options);
    int least = 0, most = 0;

    (void)state;
    while (length_at(v, least) < gap * (1 - part))
        least++;
    while (length_at(v, most) < gap * (1 + part))
        most++;
    assert_true(most >= least + 3);
    assert_int_equal(t.failed + t.undecided, 0);
    assert_int_equal(t.unstable_least, least);
    assert_int_equal(t.unstable_most, most);
    assert_true(t.growing.value == 1.0);
    assert_true(t.frequency.high.value > 0.0);
    th_tolerance_clear(&t);
}

/* Just above L_0 growth rate and gap go in proportion: quantiles, the part that is seen. */
static void test_first_order(void **state)
{
    const double first = length_at(v, 0), gap = first * (1 + 4e-4), part = 5e-4;
    const double from = gap * (1 - part), to = gap * (1 + part);
    const double tolerance[KEYS] = {[GAP] = part};
    const double high = first_slope() * (from + 0.95 * (to - from) - first);
    const double median = first_slope() * (gap - first);
    const th_flow_setup s = step_setup(gap);
    th_tolerance_options options = usual(tolerance, 512);
    th_solution *solution = solve(&s);
    double amplitude[64] = {0};
    th_tolerance t;

    (void)state;
    assert_int_equal(solution->unstable, 1);
    assert_true(solution->count <= 64 && solution->mode[0].label == TH_LABEL_UNSTABLE);
    amplitude[0] = 1e-3;
    options.amplitude = amplitude;
    options.threshold = 0.1;
    options.hold = log(100) / median; /* seen where the growth rate exceeds that of the base */
    t = sample(&s, solution, &options);
    /* the growth rate bends by 2e-3 of itself over this stretch */
    close_to("high", t.growth.high.value, high, errors * t.growth.high.error + 3e-3 * high);
    close_to("median", t.growth.median.value, median,
             errors * t.growth.median.error + 3e-3 * median);
    assert_true(t.growth.high.error < 0.01 * high && t.growth.median.error < 0.01 * median);
    assert_true(t.visible_known);
    close_to("visible", t.visible.value, 0.5, errors * t.visible.error + 3e-3);
    assert_true(t.visible.error < 0.005);
    th_tolerance_clear(&t);
    amplitude[0] = 0.0; /* unknown */
    t = sample(&s, solution, &options);
    assert_false(t.visible_known);
    th_tolerance_clear(&t);
    th_solution_destroy(solution);
}

/* ---- one key against the other ------------------------------------------------------------------
 */

/* Two keys, so little that everything is linear: y = a x + b z, x and z uniform in -1..1. The 5 and
 * 95 % points of one of them are +-0.9 a; shares are a^2 and b^2 over their sum. */
static void test_tiny(void **state)
{
    static const double tiny[KEYS] = {[GAP] = 1e-6};
    static const double both[KEYS] = {[SPEED] = 1e-6, [GAP] = 2e-6};
    const th_flow_setup s = step_setup(6.0);
    th_solution *solution = solve(&s);
    const th_mode *fastest = &solution->mode[0];
    th_tolerance_options options = usual(tiny, 512);
    th_tolerance t;
    th_slope slope[KEYS];
    double a, b;

    (void)state;
    for (int k = 0; k < KEYS; k++)
        assert_int_equal(th_sensitivity(&s, k, solution->omega_top, fastest->omega_re,
                                        fastest->omega_im, &slope[k], NULL),
                         TH_OK);
    t = sample(&s, solution, &options);
    a = slope[GAP].im * s.value[GAP] * 1e-6;
    assert_int_equal(t.keys, 1);
    assert_true(t.key[0].key == GAP && t.key[0].slope_known);
    close_to("slope", t.key[0].slope, a, 1e-12 * fabs(a));
    /* Bent by 1e-6 of itself, roots to 1e-13. 1 - 1/16^2: what the bins lose. */
    close_to("low", t.growth.low.value - fastest->omega_im, -0.9 * fabs(a),
             errors * t.growth.low.error + 1e-3 * fabs(a));
    close_to("high", t.growth.high.value - fastest->omega_im, 0.9 * fabs(a),
             errors * t.growth.high.error + 1e-3 * fabs(a));
    assert_true(t.growth.low.error < 0.01 * fabs(a));
    close_to("share", t.key[0].share, 1 - 1.0 / 256, 1e-3);
    th_tolerance_clear(&t);

    options.tolerance = both;
    t = sample(&s, solution, &options);
    a = slope[SPEED].im * s.value[SPEED] * 1e-6;
    b = slope[GAP].im * s.value[GAP] * 2e-6;
    for (int k = 0; k < KEYS; k++) {
        const double own = k == SPEED ? a : b;
        const double want = own * own / (a * a + b * b) * (1 - 1.0 / 256);

        if (both[k] == 0.0)
            continue;
        close_to("slope", of_key(&t, k)->slope, own, 1e-12 * fabs(own));
        close_to("share", of_key(&t, k)->share, want, errors * of_key(&t, k)->share_error);
        assert_true(of_key(&t, k)->share_error < 0.03);
    }
    th_tolerance_clear(&t);
    th_solution_destroy(solution);
}

/* A key with a small tolerance comes last, wherever it stands in the shape. */
static void test_order(void **state)
{
    const double tolerance[2][KEYS] = {{[SPEED] = 0.02, [UP] = 1e-5, [GAP] = 1e-7},
                                       {[SPEED] = 1e-7, [UP] = 1e-5, [GAP] = 0.02}};
    static const int order[2][3] = {{SPEED, UP, GAP}, {GAP, UP, SPEED}};
    const th_flow_setup s = step_setup(3.0);

    (void)state;
    for (int i = 0; i < 2; i++) {
        const th_tolerance_options options = usual(tolerance[i], 256);
        th_tolerance t = solve_and_sample(&s, &options);

        assert_int_equal(t.keys, 3);
        assert_int_equal(t.key[0].key, order[i][0]);
        assert_true(t.key[0].share > 0.95 && t.key[1].share < 0.05 && t.key[2].share < 0.05);
        for (int k = 0; k < 2; k++)
            assert_true(t.key[k].share > t.key[k + 1].share ||
                        (t.key[k].share == t.key[k + 1].share &&
                         fabs(t.key[k].slope) >= fabs(t.key[k + 1].slope)));
        th_tolerance_clear(&t);
    }
}

/* Nothing grows: no slope, no share, no frequency. */
static void test_stable(void **state)
{
    const double tolerance[KEYS] = {[SPEED] = 0.01, [GAP] = 0.01};
    const th_flow_setup s = step_setup(0.8 * length_at(v, 0));
    const th_tolerance_options options = usual(tolerance, 64);
    th_tolerance t = solve_and_sample(&s, &options);

    (void)state;
    assert_true(t.growing.value == 0.0 && t.growth.high.value == 0.0);
    assert_int_equal(t.unstable_most, 0);
    assert_false(t.frequency_known);
    for (int k = 0; k < t.keys; k++)
        assert_true(!t.key[k].slope_known && t.key[k].slope == 0.0 && t.key[k].share == 0.0);
    th_tolerance_clear(&t);
}

/* ---- what it must not depend on -----------------------------------------------------------------
 */

static bool same_estimate(th_estimate a, th_estimate b)
{
    return memcmp(&a.value, &b.value, sizeof a.value) == 0 &&
           memcmp(&a.error, &b.error, sizeof a.error) == 0;
}

static bool same(const th_tolerance *a, const th_tolerance *b)
{
    bool equal = a->samples == b->samples && a->failed == b->failed &&
                 a->undecided == b->undecided && a->unstable_least == b->unstable_least &&
                 a->unstable_most == b->unstable_most && a->keys == b->keys &&
                 same_estimate(a->growing, b->growing) &&
                 same_estimate(a->growth.low, b->growth.low) &&
                 same_estimate(a->growth.median, b->growth.median) &&
                 same_estimate(a->growth.high, b->growth.high) &&
                 same_estimate(a->frequency.low, b->frequency.low) &&
                 same_estimate(a->frequency.median, b->frequency.median) &&
                 same_estimate(a->frequency.high, b->frequency.high);

    for (int k = 0; equal && k < a->keys; k++)
        equal = a->key[k].key == b->key[k].key &&
                same_estimate((th_estimate){a->key[k].share, a->key[k].share_error},
                              (th_estimate){b->key[k].share, b->key[k].share_error}) &&
                same_estimate((th_estimate){a->key[k].slope, 0}, (th_estimate){b->key[k].slope, 0});
    return equal;
}

static void differs_within(const char *what, th_estimate a, th_estimate b)
{
    assert_true(a.value != b.value);
    close_to(what, a.value, b.value, errors * hypot(a.error, b.error));
}

/* One thread, three threads: the same bytes. Another seed: other samples, the same answer. */
static void test_threads_and_seeds(void **state)
{
    const double tolerance[KEYS] = {[SPEED] = 0.05, [POCKET] = 0.1, [GAP] = 0.2};
    const th_flow_setup s = step_setup(3.0);
    th_solution *solution = solve(&s);
    th_tolerance_options options = usual(tolerance, 256);
    th_tolerance one = sample(&s, solution, &options), three, again, other;

    (void)state;
    again = sample(&s, solution, &options);
    options.threads = 3;
    three = sample(&s, solution, &options);
    options.seed = 8;
    other = sample(&s, solution, &options);
    assert_true(same(&one, &again));
    assert_true(same(&one, &three));
    assert_false(same(&one, &other));
    differs_within("low", one.growth.low, other.growth.low);
    differs_within("median", one.growth.median, other.growth.median);
    differs_within("high", one.growth.high, other.growth.high);
    for (int k = 0; k < one.keys; k++) {
        const th_tolerance_key *a = &one.key[k], *b = of_key(&other, a->key);

        differs_within("share", (th_estimate){a->share, a->share_error},
                       (th_estimate){b->share, b->share_error});
    }
    th_tolerance_clear(&one);
    th_tolerance_clear(&again);
    th_tolerance_clear(&three);
    th_tolerance_clear(&other);
    th_solution_destroy(solution);
}

/* ---- samples without an answer ------------------------------------------------------------------
 */

/* Horizons exist only where v < c_u: the others are counted, no more. */
static void test_failed(void **state)
{
    enum { SAMPLES = 64 };
    th_flow_setup s =
        setup_of("tanh", (const double[]){1.0, 1.1, 0.5, 1.5, 0.5, 0.5, 4.0}); /* speed first */
    const double part = 0.2, out_of_reach = (1 + part - 1.1) / (2 * part);
    const double tolerance[TH_SHAPE_KEYS_MAX] = {part};
    th_tolerance_options options = usual(tolerance, SAMPLES);
    th_solution *solution = solve(&s);
    th_tolerance t;
    th_error err = {0};

    (void)state;
    assert_string_equal(s.shape->key[0].key, "speed");
    t = sample(&s, solution, &options);
    /* eight evenly spaced speeds a shift: each shift is off by one sample at most */
    close_to("failed", t.failed, out_of_reach * SAMPLES, TH_TOLERANCE_SHIFTS);
    assert_true(t.failed > 0);
    th_tolerance_clear(&t);

    s.value[0] = 1.5; /* all of them */
    assert_int_equal(th_tolerance_sample(&s, solution, &options, &t, &err), TH_ENONE);
    assert_null(t.key);
    assert_non_null(strstr(err.text, "64 of 64 samples have no answer"));
    assert_non_null(strstr(err.text, "speed = "));
    th_solution_destroy(solution);
}

/* Ring and walls: every sample is solved in full. Tiny tolerances give back the base. */
static void test_closed_ends(void **state)
{
    const double tolerance[KEYS] = {[GAP] = 1e-6};
    th_flow_setup s[2] = {step_setup(4.0), step_setup(4.0)};

    (void)state;
    s[0].ends = ring(2 * pi * 3 / v, 3);
    s[1].ends = walls(10.0);
    for (int i = 0; i < 2; i++) {
        th_solution *solution = solve(&s[i]);
        th_tolerance_options options = usual(tolerance, 64);
        th_tolerance t;
        double a;

        assert_true(solution->unstable > 0);
        options.threads = 2;
        t = sample(&s[i], solution, &options);
        a = t.key[0].slope;
        assert_int_equal(t.failed + t.undecided, 0);
        assert_int_equal(t.unstable_least, solution->unstable);
        assert_int_equal(t.unstable_most, solution->unstable);
        assert_true(t.key[0].slope_known);
        close_to("median", t.growth.median.value, solution->mode[0].omega_im, 0.1 * fabs(a));
        /* eight samples a shift: quantiles between the outermost two */
        close_to("high", t.growth.high.value - solution->mode[0].omega_im, 0.9 * fabs(a),
                 0.05 * fabs(a));
        th_tolerance_clear(&t);
        th_solution_destroy(solution);
    }
}

/* ---- rules
 * --------------------------------------------------------------------------------------- */

static void refused(const th_flow_setup *s, const th_solution *solution,
                    const th_tolerance_options *options, const char *key, const char *text)
{
    th_tolerance t = {.samples = 5};
    th_error err = {0};

    assert_int_equal(th_tolerance_sample(s, solution, options, &t, &err), TH_EINVAL);
    assert_string_equal(err.key, key);
    if (strstr(err.text, text) == NULL)
        fail_msg("\"%s\" does not say \"%s\"", err.text, text);
    assert_true(t.samples == 0 && t.key == NULL);
}

static void test_rules(void **state)
{
    static const double none[KEYS] = {0};
    double tolerance[TH_SHAPE_KEYS_MAX] = {[GAP] = 0.01};
    const double *amplitude;
    double bad[64];
    int words = 0;
    th_flow_setup s = step_setup(3.0), other;
    th_solution *solution = solve(&s);
    const th_tolerance_options good = usual(tolerance, 64);
    th_tolerance_options o = good;

    (void)state;
    for (int i = 0; i < 64; i++)
        bad[i] = -1.0;
    amplitude = bad;
    assert_int_equal(th_tolerance_sample(&s, solution, &o, NULL, NULL), TH_EINVAL);
    refused(NULL, solution, &o, "", "a setup");
    refused(&s, NULL, &o, "", "its solution");
    refused(&s, solution, NULL, "", "tolerances");
    o.tolerance = NULL;
    refused(&s, solution, &o, "", "tolerances");
    o.tolerance = none;
    refused(&s, solution, &o, "", "no key has one");
    o = good;
    o.samples = 100;
    refused(&s, solution, &o, "", "samples = 100");
    o.samples = 56;
    refused(&s, solution, &o, "", "samples = 56");
    o = good;
    o.accuracy = 0.1;
    refused(&s, solution, &o, "", "accuracy = 0.1");
    o = good;
    o.threads = 0;
    refused(&s, solution, &o, "", "threads = 0");
    o = good;
    o.hold = -1;
    refused(&s, solution, &o, "", "hold = -1");
    o.hold = 10;
    refused(&s, solution, &o, "", "threshold = 0");
    o.threshold = 0.1;
    refused(&s, solution, &o, "", "amplitudes");
    o.amplitude = amplitude;
    refused(&s, solution, &o, "", "amplitude 0 = -1");
    tolerance[GAP] = 1.0;
    refused(&s, solution, &good, "gap", "tolerance of gap = 1");
    tolerance[GAP] = NAN;
    refused(&s, solution, &good, "gap", "want >= 0 and < 1");
    tolerance[GAP] = 0.01;
    tolerance[SPEED] = 0.01;
    other = s;
    other.ends = ring(2 * pi * 3 / v, 3);
    refused(&other, solution, &good, "speed", "fixed by the winding");
    other = s;
    other.given[SPEED] = false;
    refused(&other, solution, &good, "speed", "not given");
    other = setup_of("table", (const double[TH_SHAPE_KEYS_MAX]){0});
    for (int k = 0; k < other.shape->keys; k++) {
        for (int i = 0; i < other.shape->keys; i++)
            tolerance[i] = i == k ? 0.01 : 0.0;
        if (!th_shape_key_number(&other.shape->key[k]))
            refused(&other, solution, &good, other.shape->key[k].key, "no number");
        words += !th_shape_key_number(&other.shape->key[k]);
    }
    assert_true(words > 0);
    th_solution_destroy(solution);
    th_tolerance_clear(NULL);
}

static void test_no_memory(void **state)
{
    const double tolerance[KEYS] = {[SPEED] = 0.01, [GAP] = 0.2};
    const th_flow_setup s = step_setup(1.05 * length_at(v, 0));
    const th_tolerance_options options = usual(tolerance, 64);
    th_solution *solution = solve(&s);
    long k;

    (void)state;
    for (k = 0;; k++) {
        th_tolerance t = {0};
        th_status st;

        refuse_from(k);
        st = th_tolerance_sample(&s, solution, &options, &t, NULL);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            th_tolerance_clear(&t);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_null(t.key);
    }
    assert_true(k > 10);
    th_solution_destroy(solution);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_probability), cmocka_unit_test(test_two_keys),
        cmocka_unit_test(test_staircase),   cmocka_unit_test(test_first_order),
        cmocka_unit_test(test_tiny),        cmocka_unit_test(test_order),
        cmocka_unit_test(test_stable),      cmocka_unit_test(test_threads_and_seeds),
        cmocka_unit_test(test_failed),      cmocka_unit_test(test_closed_ends),
        cmocka_unit_test(test_rules),       cmocka_unit_test(test_no_memory),
    };

    openblas_set_num_threads(1); /* small matrices: more threads only wait for each other */
    return cmocka_run_group_tests(tests, NULL, NULL);
}
