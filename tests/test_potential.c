/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Stationary flows in external potentials. Sharp wells and thin barriers against the exact flows of
 * the shapes well and barriers, which share nothing with the solver; a single step against the
 * exact relation of the waterfall; smooth edges against their limit; random wells through all four
 * computations. Against another solver of boundary value problems: check_potential.py. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "flows.h"
#include "refuse.h"
#include "twinhorizon/modes.h"

enum { C_U, M, FLUX, PROFILE, GAP, WIDTH, DEPTH, TABLE, STATE, A, KEYS };
enum { WELL, STEP, BARRIER, BARRIERS };

/* Keys with value 0 (but c_u, mach, profile) are not given. */
static th_flow_setup setup_of(int profile, double m, double gap, double width, double depth,
                              double a)
{
    const double value[KEYS] = {1, m, 0, profile, gap, width, depth, 0, a > 0, a};
    th_flow_setup s = {.shape = th_shape_find("potential"), .density = 1.7, .ends = open_ends()};

    assert_non_null(s.shape);
    assert_int_equal(s.shape->keys, KEYS);
    for (int i = 0; i < KEYS; i++) {
        s.value[i] = value[i];
        s.given[i] = i <= M || i == PROFILE || (i != TABLE && value[i] != 0);
    }
    return s;
}

static th_flow *build(int profile, double m, double gap, double width, double depth, double a)
{
    const th_flow_setup s = setup_of(profile, m, gap, width, depth, a);
    th_flow *flow = NULL;
    th_error err = {0};

    if (th_flow_build(&s, &flow, &err) != TH_OK)
        fail_msg("%s: %s", err.key, err.text);
    return flow;
}

static void refused(th_flow_setup s, const char *key, const char *words)
{
    th_flow *flow = NULL;
    th_error err = {0};

    assert_int_equal(th_flow_build(&s, &flow, &err), TH_EINVAL);
    assert_null(flow);
    assert_string_equal(err.key, key);
    if (strstr(err.text, words) == NULL)
        fail_msg("\"%s\" does not say \"%s\"", err.text, words);
}

static double density(const th_flow *flow, double x)
{
    th_flow_point p;

    th_flow_at(flow, x, &p);
    return p.n;
}

static th_solution *solve(const th_flow *flow)
{
    const th_solve_options options = {.accuracy = 1e-9};
    th_solution *s = NULL;
    th_error err = {0};

    if (th_solve(flow, &options, &s, &err) != TH_OK)
        fail_msg("%s", err.text);
    return s;
}

static void same_modes(const th_flow *a, const th_flow *b, double tolerance)
{
    th_solution *s = solve(a), *t = solve(b);

    assert_int_equal(s->unstable, t->unstable);
    assert_int_equal(s->verdict, t->verdict);
    for (int i = 0; i < s->count && s->mode[i].label == TH_LABEL_UNSTABLE; i++) {
        close_to("Re omega", s->mode[i].omega_re, t->mode[i].omega_re, tolerance);
        close_to("Im omega", s->mode[i].omega_im, t->mode[i].omega_im, tolerance);
    }
    th_solution_destroy(s);
    th_solution_destroy(t);
}

/* A sharp well of depth (1/m - m)^2/2, and of none (found): the exact flow of shape well. */
static void test_sharp_well(void **state)
{
    const double mach[] = {0.35, 0.6, 0.6, 0.85}, gap[] = {1.1, 0.4, 3.7, 5};

    (void)state;
    for (int i = 0; i < 4; i++) {
        const double m = mach[i], value[3] = {1, m, gap[i]}, depth = (1 / m - m) * (1 / m - m) / 2;
        th_flow *exact = flow_of("well", open_ends(), value);

        for (int given = 0; given < 2; given++) {
            th_flow *flow = build(WELL, m, gap[i], 0, given ? depth : 0, 0);
            th_flow_point p;

            for (double x = -9.3; x < 9.5; x += 0.1)
                close_to("density", density(flow, x), density(exact, x), 1e-9);
            th_flow_at(flow, 0.1, &p);
            close_to("depth", th_flow_potential(flow, &p), -depth, 1e-9);
            if (!given || i == 2)
                same_modes(flow, exact, 1e-8);
            th_flow_destroy(flow);
        }
        th_flow_destroy(exact);
    }
}

/* n v = J, and V of the flow is the profile: Bernoulli's sum is constant. */
static void test_bernoulli(void **state)
{
    const double m = 0.55, gap = 4, w = 0.25;

    (void)state;
    for (int transverse = 0; transverse < 2; transverse++) {
        th_flow *flow = build(WELL, m, gap, w, 0.9, transverse ? 0.3 : 0);

        for (double x = -12; x < 12; x += 0.0731) {
            const double v = -0.9 * (tanh((x + gap / 2) / w) - tanh((x - gap / 2) / w)) / 2;
            th_flow_point p;

            th_flow_at(flow, x, &p);
            close_to("n v", p.n * p.v, 1.7 * m, 1e-14);
            close_to("V", th_flow_potential(flow, &p), v, 1e-10);
        }
        th_flow_destroy(flow);
    }
}

/* Exact relation of one sharp step, n_u/n_d = v_d/c_d = (c_u/v_u)^2 (Phys. Rev. A 85, 013621
 * (2012)), and of no other depth; a single horizon is stable. */
static void test_waterfall(void **state)
{
    (void)state;
    for (double m = 0.3; m < 0.95; m += 0.2) {
        th_flow *flow = build(STEP, m, 0, 0, 0, 0);
        th_flow_point d;
        const char *note = th_flow_note(flow);
        double depth, residual;

        th_flow_at(flow, 5, &d);
        close_to("n_u/n_d", 1.7 / d.n, 1 / (m * m), 1e-10 / (m * m));
        close_to("v_d/c_d", d.v / d.c, 1 / (m * m), 1e-10 / (m * m));
        assert_int_equal(sscanf(note,
                                "depth %lf m sound_upstream^2, found for a plateau; the "
                                "stationary equation holds to %lf",
                                &depth, &residual),
                         2);
        close_to("depth", depth, (1 / m - m) * (1 / m - m) / 2, 1e-8 * depth);
        assert_true(residual < 1e-10);
        th_flow_destroy(flow);
        refused(setup_of(STEP, m, 0, 0, 1.01 * depth, 0), "depth", "the only depth with one is");
    }
    {
        th_flow *flow = build(STEP, 0.5, 0, 0.2, 0, 0);
        th_solution *s = solve(flow);

        assert_int_equal(s->verdict, TH_VERDICT_STABLE);
        th_solution_destroy(s);
        th_flow_destroy(flow);
    }
}

/* Thin barriers tend to the exact delta barriers, of strength Z = Int V dx, as their width; smooth
 * wells to the sharp one, as its square. */
static void test_limits(void **state)
{
    const double value[3] = {1, 0.55, 6};
    th_flow *thin = flow_of("barriers", open_ends(), value);
    th_flow *sharp = flow_of("well", open_ends(), value);
    double before[2] = {0, 0};

    (void)state;
    for (int i = 0; i < 3; i++) {
        const double w = 0.08 / (1 << i);
        th_flow *narrow = build(BARRIERS, 0.55, 6, w, 0, 0), *steep = build(WELL, 0.55, 6, w, 0, 0);
        double off[2] = {0, 0};

        for (double x = -8; x < 8; x += 0.11) {
            off[0] = fmax(off[0], fabs(density(narrow, x) - density(thin, x)));
            off[1] = fmax(off[1], fabs(density(steep, x) - density(sharp, x)));
        }
        assert_true(off[0] < 0.1 && off[1] < 0.02);
        if (i > 0 && !(off[0] < 0.62 * before[0] && off[1] < 0.3 * before[1]))
            fail_msg("width %g: off %g and %g, before %g and %g", w, off[0], off[1], before[0],
                     before[1]);
        before[0] = off[0];
        before[1] = off[1];
        if (i == 2)
            same_modes(steep, sharp, 3e-3);
        th_flow_destroy(narrow);
        th_flow_destroy(steep);
    }
    th_flow_destroy(thin);
    th_flow_destroy(sharp);
}

/* Random profiles, depths found and given: index, census, matrix and matching function agree. */
static void test_random(void **state)
{
    uint64_t seed = 808;
    int growing = 0, solved = 0;

    (void)state;
    for (int i = 0; i < 10; i++) {
        const int profile = i % 2 == 0 ? WELL : BARRIERS;
        const double m = draw(&seed, 0.35, 0.85), width = draw(&seed, 0.03, i % 2 == 0 ? 0.2 : 0.8);
        const double gap = draw(&seed, 2.5 * width + 0.5, 6);
        const double a = i % 5 == 0 ? draw(&seed, 0.1, 1) : 0;
        th_flow *flow = build(profile, m, gap, width, 0, a);
        th_solution *s = solve(flow);

        if (s->verdict == TH_VERDICT_UNDECIDED)
            fail_msg("profile %d, mach %.17g, gap %.17g, width %.17g, a %.17g: %s", profile, m, gap,
                     width, a, s->reason);
        assert_true(s->index_known && s->index == s->unstable && s->census == s->unstable);
        growing += s->unstable;
        solved++;
        th_solution_destroy(s);
        th_flow_destroy(flow);
    }
    assert_true(solved == 10 && growing > 15);
}

/* A depth that was found for a plateau, given back: the same flow, not another one of that depth
 * (these once gave another, or none: the zeros of the mismatch lie close together or touch). */
static void test_given_back(void **state)
{
    static const struct {
        int profile;
        double m, gap, width, depth;
    } old[] = {{BARRIERS, 0.85, 6, 0.4, 0.05051332716},
               {BARRIERS, 0.5, 3.5, 0.4, 0.4167162354},
               {WELL, 0.6, 3, 0, 0.5688888888888889},
               {WELL, 0.6, 11.5, 0.4, 1.324707379}};

    (void)state;
    for (size_t i = 0; i < sizeof old / sizeof old[0]; i++) {
        th_flow *found = build(old[i].profile, old[i].m, old[i].gap, old[i].width, 0, 0);
        th_flow *given = build(old[i].profile, old[i].m, old[i].gap, old[i].width, old[i].depth, 0);

        close_to("density", density(given, 0.1), density(found, 0.1), 1e-4);
        th_flow_destroy(found);
        th_flow_destroy(given);
    }
}

/* What is refused, and that the depth named instead has a flow. */
static void test_refused(void **state)
{
    th_flow_setup s = setup_of(BARRIERS, 0.6, 5, 0.3, 3, 0);
    th_flow *flow = NULL;
    th_error err = {0};
    double near = 0;

    (void)state;
    assert_int_equal(th_flow_build(&s, &flow, &err), TH_EINVAL);
    assert_string_equal(err.key, "depth");
    assert_non_null(strstr(err.text, "the nearest depth with one is "));
    near = atof(strstr(err.text, "one is ") + 7);
    assert_true(near > 0.1 && near < 3);
    flow = build(BARRIERS, 0.6, 5, 0.3, near * 0.999, 0);
    th_flow_destroy(flow);
    flow = NULL;
    s.value[DEPTH] = near * 1.001;
    assert_int_equal(th_flow_build(&s, &flow, &err), TH_EINVAL);
    refused(setup_of(WELL, 0.6, 4, 0.8, 0, 0), "width", "edges narrower than about");
    refused(setup_of(WELL, 0.6, 0, 0.1, 0, 0), "gap", "missing");
    refused(setup_of(STEP, 0.6, 4, 0.1, 0, 0), "gap", "only the profiles");
    refused(setup_of(BARRIER, 0.6, 0, 0, 0, 0), "width", "a barrier wants > 0");
    /* the flux says the same as the Mach number; not both, not none, not too much */
    s = setup_of(WELL, 0.6, 4, 0.1, 0, 0);
    s.given[M] = false;
    refused(s, "mach", "needs it or flux");
    s.given[FLUX] = true;
    s.value[FLUX] = 1.7 * 0.6;
    assert_int_equal(th_flow_build(&s, &flow, &err), TH_OK);
    {
        th_flow *by_mach = build(WELL, 0.6, 4, 0.1, 0, 0);

        close_to("flux", th_flow_flux(flow), th_flow_flux(by_mach), 1e-15);
        close_to("density", density(flow, 0), density(by_mach, 0), 1e-13);
        th_flow_destroy(by_mach);
    }
    th_flow_destroy(flow);
    s.value[FLUX] = 1.71;
    refused(s, "flux", "supersonic");
    s = setup_of(WELL, 0.6, 4, 0.1, 0, 0);
    s.given[FLUX] = true;
    s.value[FLUX] = 1;
    refused(s, "flux", "both given");
    s = setup_of(WELL, 0.6, 4, 0.1, 0, 0);
    s.ends = ring(50, 3);
    refused(s, "kind", "cannot close on a ring");
}

/* The k-th allocation fails, for all k until the call has enough; depth found and given. */
static void test_memory(void **state)
{
    (void)state;
    for (int given = 0; given < 2; given++) {
        const th_flow_setup s = setup_of(WELL, 0.6, 1.5, given ? 0 : 0.12, given ? 0.5 : 0, 0);
        long k = 0;

        for (;; k++) {
            th_flow *flow = NULL;
            th_error err = {0};
            th_status st;

            refuse_from(k);
            st = th_flow_build(&s, &flow, &err);
            if (refuse_stop()) {
                assert_int_equal(st, TH_OK);
                th_flow_destroy(flow);
                break;
            }
            assert_int_equal(st, TH_ENOMEM);
            assert_null(flow);
        }
        assert_true(k > 10);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_sharp_well), cmocka_unit_test(test_bernoulli),
        cmocka_unit_test(test_waterfall),  cmocka_unit_test(test_limits),
        cmocka_unit_test(test_random),     cmocka_unit_test(test_refused),
        cmocka_unit_test(test_memory),     cmocka_unit_test(test_given_back),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
