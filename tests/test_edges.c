/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shapes with tanh edges. Steep edges tend to jumps. Flows whose density follows the speed: the
 * equations of state and the stationary equation against GSL's numerical derivatives, rings against
 * GSL's quadrature, steep edges against a flow of uniform pieces. Frequencies of two such flows to
 * 20 digits: check_precision.py. Random ones: test_random.c.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include <gsl/gsl_deriv.h>
#include <gsl/gsl_integration.h>

#include "flows.h"
#include "twinhorizon/modes.h"

enum { V_U, V_P, V_D, C_U, W_B, W_W, GAP, STATE, A, KEYS };

static const double base[KEYS] = {0.6, 1.4, 0.55, 1.1, 0.5, 0.7, 9, 0, 0};

static th_flow_setup setup_of(const double *value, th_ends ends)
{
    th_flow_setup s = {.shape = th_shape_find("continuity"), .density = 1.7, .ends = ends};

    assert_non_null(s.shape);
    assert_int_equal(s.shape->keys, KEYS);
    for (int i = 0; i < KEYS; i++) {
        s.value[i] = value[i];
        s.given[i] = i != A || value[i] != 0;
    }
    return s;
}

static th_flow *build(const double *value, th_ends ends)
{
    const th_flow_setup s = setup_of(value, ends);
    th_flow *flow = NULL;
    th_error err = {0};

    if (th_flow_build(&s, &flow, &err) != TH_OK)
        fail_msg("%s: %s", err.key, err.text);
    return flow;
}

static double root_density(double x, void *flow)
{
    th_flow_point p;

    th_flow_at(flow, x, &p);
    return sqrt(p.n);
}

static double slope_of_root(double x, void *flow)
{
    gsl_function f = {.function = root_density, .params = flow};
    double value, error;

    gsl_deriv_central(&f, x, 1e-3, &value, &error);
    return value;
}

/* mu(n) with c = c_u at n_u, as the words say it: contact g n, transverse
 * omega_perp sqrt(1 + 4 a n) (Phys. Rev. A 77, 013617 (2008)). */
typedef struct {
    double a, factor; /* factor: g or omega_perp */
} law;

static double chemical(double n, void *params)
{
    const law *l = params;

    return l->a > 0 ? l->factor * sqrt(1 + 4 * l->a * n) : l->factor * n;
}

static law law_of(double n_u, double c_u, double a)
{
    /* transverse: c^2 = n omega_perp 2 a/sqrt(1 + 4 a n) */
    return (law){a, a > 0 ? c_u * c_u * sqrt(1 + 4 * a * n_u) / (2 * a * n_u) : c_u * c_u / n_u};
}

/* c^2 = n dmu/dn; V + mu(n) + v^2/2 - (sqrt n)''/(2 sqrt n) is the same everywhere. Derivatives by
 * GSL: about 1e-10 the first, 1e-6 of slopes of slopes. */
static void test_stationary(void **state)
{
    const double scattering[] = {0, 0.05, 0.4, 6};

    (void)state;
    for (size_t k = 0; k < sizeof scattering / sizeof *scattering; k++) {
        double value[KEYS];
        law l = law_of(1.7, base[C_U], scattering[k]);
        gsl_function mu = {.function = chemical, .params = &l};
        gsl_function slope = {.function = slope_of_root};
        th_flow *flow;
        double far = 0;

        memcpy(value, base, sizeof value);
        value[STATE] = scattering[k] > 0;
        value[A] = scattering[k];
        slope.params = flow = build(value, open_ends());
        for (double x = -12.3; x < 12; x += 0.73) {
            th_flow_point p;
            double dmu, curve, error, sum;

            th_flow_at(flow, x, &p);
            close_to("n v", p.n * p.v, 1.7 * 0.6, 1e-14);
            gsl_deriv_central(&mu, p.n, 1e-3, &dmu, &error);
            close_to("c^2", p.c * p.c, p.n * dmu, 1e-8);
            gsl_deriv_central(&slope, x, 1e-3, &curve, &error);
            sum = th_flow_potential(flow, &p) + chemical(p.n, &l) + p.v * p.v / 2 -
                  curve / (2 * sqrt(p.n));
            if (x < -12)
                far = sum;
            close_to("V + mu + v^2/2 + quantum pressure", sum, far, 1e-6);
            close_to("(sqrt n)''", p.ddn / (2 * sqrt(p.n)) - p.dn * p.dn / (4 * p.n * sqrt(p.n)),
                     curve, 1e-6);
        }
        th_flow_destroy(flow);
    }
}

/* Edges far apart each have their horizon at its place; surface gravity |d(c - v)/dx| by GSL. */
static double excess(double x, void *flow)
{
    th_flow_point p;

    th_flow_at(flow, x, &p);
    return p.c - p.v;
}

static void test_horizons(void **state)
{
    (void)state;
    for (int transverse = 0; transverse < 2; transverse++) {
        double value[KEYS];
        gsl_function f = {.function = excess};
        th_flow *flow;
        const th_horizon *h;
        int count;

        memcpy(value, base, sizeof value);
        value[GAP] = 20;
        value[STATE] = transverse;
        value[A] = transverse ? 0.8 : 0;
        f.params = flow = build(value, open_ends());
        h = th_flow_horizons(flow, &count);
        assert_int_equal(count, 2);
        for (int i = 0; i < 2; i++) {
            double slope, error;

            close_to("horizon", h[i].x, i == 0 ? -10 : 10, 1e-12);
            gsl_deriv_central(&f, h[i].x, 1e-3, &slope, &error);
            close_to("surface gravity", h[i].kappa, fabs(slope), 1e-8);
        }
        if (!transverse) /* v = c where v^3 = c_u^2 v_u */
            close_to("speed at the horizon", h[0].speed, cbrt(1.1 * 1.1 * 0.6), 1e-14);
        th_flow_destroy(flow);
    }
}

static double speed_at(double x, void *flow)
{
    th_flow_point p;

    th_flow_at(flow, x, &p);
    return p.v;
}

/* On a ring the winding fixes speed_upstream: quantised circulation, by GSL's quadrature. */
static void test_ring(void **state)
{
    (void)state;
    for (int winding = 3; winding <= 6; winding++) {
        th_flow_setup s = setup_of(base, ring(40, winding));
        gsl_integration_workspace *w = gsl_integration_workspace_alloc(400);
        gsl_function f = {.function = speed_at};
        th_flow *flow = NULL;
        th_flow_point p;
        th_error err = {0};
        double closed, error;

        s.given[V_U] = s.given[V_D] = false;
        if (th_flow_build(&s, &flow, &err) != TH_OK)
            fail_msg("%s: %s", err.key, err.text);
        f.params = flow;
        gsl_integration_qag(&f, -20, 20, 0, 1e-11, 400, GSL_INTEG_GAUSS61, w, &closed, &error);
        close_to("circulation", closed, 2 * pi * winding, 1e-9);
        gsl_integration_workspace_free(w);
        th_flow_at(flow, 19, &p);
        th_flow_destroy(flow);
        /* the same speed may be given, another not */
        s.given[V_U] = true;
        s.value[V_U] = p.v;
        assert_int_equal(th_flow_build(&s, &flow, &err), TH_OK);
        th_flow_destroy(flow);
        s.value[V_U] = p.v * 1.001;
        assert_int_equal(th_flow_build(&s, &flow, &err), TH_EINVAL);
        assert_string_equal(err.key, "winding");
    }
}

/* Uniform pieces with the speeds of `base`. */
static void pieces_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    const double *value = ctx, v = piece < 1 ? value[V_U] : piece == 1 ? value[V_P] : value[V_D];
    const double n = 1.7 * value[V_U] / v;

    (void)x;
    *p = (th_flow_point){.n = n, .v = v, .c = value[C_U] * sqrt(n / 1.7)};
}

static th_solution *solve(const th_flow *flow)
{
    const th_solve_options options = {.accuracy = 1e-9};
    th_solution *s = NULL;
    th_error err = {0};

    if (th_solve(flow, &options, &s, &err) != TH_OK)
        fail_msg("%s", err.text);
    assert_int_equal(s->verdict, TH_VERDICT_UNSTABLE);
    return s;
}

/* Edges that get steeper tend to jumps, with a difference that falls at least as the width. */
static void test_steep(void **state)
{
    static const bool uniform[3] = {true, true, true};
    const double edge[4] = {-5.5, -4.5, 4.5, 5.5};
    const th_flow_spec spec = {
        .eval = pieces_eval, .ctx = (void *)base, .pieces = 3, .edge = edge, .uniform = uniform};
    const th_ends open = open_ends();
    th_flow *jumps = NULL;
    th_solution *limit;
    th_error err = {0};
    double last = 0;

    (void)state;
    if (th_flow_create(&spec, &open, &jumps, &err) != TH_OK)
        fail_msg("%s", err.text);
    limit = solve(jumps);
    for (int k = 0; k < 3; k++) {
        double value[KEYS], off;
        th_flow *flow;
        th_solution *s;

        memcpy(value, base, sizeof value);
        value[W_B] = value[W_W] = 0.04 / (1 << k);
        flow = build(value, open_ends());
        s = solve(flow);
        assert_int_equal(s->unstable, limit->unstable);
        off = hypot(s->mode[0].omega_re - limit->mode[0].omega_re,
                    s->mode[0].omega_im - limit->mode[0].omega_im);
        assert_true(off < 0.02);
        if (k > 0 && !(off < 0.6 * last))
            fail_msg("width %g: off %g, before %g", value[W_B], off, last);
        last = off;
        th_solution_destroy(s);
        th_flow_destroy(flow);
    }
    th_solution_destroy(limit);
    th_flow_destroy(jumps);
}

/* The same of tanh, whose limit is step. */
static void test_steep_tanh(void **state)
{
    th_flow *jumps = step_flow(1, 1.4, 0.5, 1.6, 7);
    th_solution *limit = solve(jumps);
    double last[4] = {0};

    (void)state;
    assert_int_equal(limit->unstable, 4);
    for (int k = 0; k < 3; k++) {
        const double width = 0.02 / (1 << k);
        const double value[7] = {1, 1.4, 0.5, 1.6, width, 1.3 * width, 7};
        th_flow *flow = flow_of("tanh", open_ends(), value);
        th_solution *s = solve(flow);

        assert_int_equal(s->unstable, limit->unstable);
        for (int i = 0; i < 2; i++) { /* growing modes with Re omega >= 0 */
            const double off = hypot(s->mode[i].omega_re - limit->mode[i].omega_re,
                                     s->mode[i].omega_im - limit->mode[i].omega_im);

            assert_true(off < 0.01);
            if (k > 0 && !(off < 0.6 * last[i]))
                fail_msg("width %g, mode %d: off %g, before %g", width, i, off, last[i]);
            last[i] = off;
        }
        th_solution_destroy(s);
        th_flow_destroy(flow);
    }
    th_solution_destroy(limit);
    th_flow_destroy(jumps);
}

/* Rules between keys: the key to blame. */
static void test_refused(void **state)
{
    static const struct {
        int at;
        double value;
        const char *key;
    } wrong[] = {{V_U, 1.3, "speed_upstream"},  {V_D, 1.39, "speed_downstream"},
                 {V_P, 0.7, "speed_upstream"},  {STATE, 1, "scattering_length"},
                 {A, 0.1, "scattering_length"}, {STATE, 2, "state"}};

    (void)state;
    for (size_t i = 0; i < sizeof wrong / sizeof *wrong; i++) {
        double value[KEYS];
        th_flow_setup s;
        th_flow *flow = NULL;
        th_error err = {0};

        memcpy(value, base, sizeof value);
        value[wrong[i].at] = wrong[i].value;
        s = setup_of(value, open_ends());
        assert_int_equal(th_flow_build(&s, &flow, &err), TH_EINVAL);
        assert_string_equal(err.key, wrong[i].key);
        assert_null(flow);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_stationary), cmocka_unit_test(test_horizons),
        cmocka_unit_test(test_ring),       cmocka_unit_test(test_steep),
        cmocka_unit_test(test_steep_tanh), cmocka_unit_test(test_refused),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
