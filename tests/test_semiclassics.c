/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Semiclassical levels. Integrals against GSL's adaptive quadrature of wave numbers taken from the
 * quartic (th_dispersion_roots), which shares neither branches nor quadrature with them; a parabola
 * of c^2 whose static action is a closed form; a uniform stretch; series of arg Gamma (Handbook of
 * Mathematical Functions, NBS AMS 55 (1964), 6.1.27). The picture itself against the exact growing
 * modes of th_solve, in tables that are printed as comments. */
#include <complex.h>
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

#include <cmocka.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_integration.h>

#include "dispersion.h"
#include "flows.h"
#include "refuse.h"
#include "semiclassics/inside.h"
#include "twinhorizon/modes.h"
#include "twinhorizon/semiclassics.h"

enum { MODES = 40 };

static th_flow *tanh_flow(double c_u, double c_p, double c_d, double w_b, double w_w, double gap)
{
    return flow_of("tanh", open_ends(), (const double[]){1, c_u, c_p, c_d, w_b, w_w, gap});
}

/* Two tanh edges of c, n = c, v = 1/c: the impedance n/c of phonons is the same everywhere. The
 * horizons lie at v = c = 1. Only the ends beyond 20 widths are cut off. */
typedef struct {
    double outer, inner, width, gap;
} matched;

static void matched_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    const matched *m = ctx;
    const double h = (m->outer - m->inner) / 2, middle = (m->outer + m->inner) / 2;
    const double off = m->gap / 2 + m->width * atanh((middle - 1) / h);
    const double a = tanh((x + off) / m->width), b = tanh((x - off) / m->width);
    const double w = m->width;

    (void)piece;
    p->c = p->n = m->inner + h * (2 - a + b);
    p->dc = p->dn = h / w * (a * a - b * b);
    p->ddn = 2 * h / (w * w) * (a * (1 - a * a) - b * (1 - b * b));
    p->v = 1 / p->n;
    p->dv = -p->dn / (p->n * p->n);
}

static th_flow *made(th_flow_spec spec, th_ends ends)
{
    th_flow *flow = NULL;
    th_error err = {0};

    if (th_flow_create(&spec, &ends, &flow, &err) != TH_OK)
        fail_msg("%s", err.text);
    return flow;
}

static th_flow *matched_flow(const matched *m)
{
    const double near = 4 * m->width, far = 22 * m->width, half = m->gap / 2;
    const double edge[6] = {-half - far, -half - near, -half + near,
                            half - near, half + near,  half + far};
    const th_feature feature[2] = {{-half, m->width}, {half, m->width}};

    return made((th_flow_spec){.eval = matched_eval,
                               .ctx = (void *)m,
                               .pieces = 5,
                               .edge = edge,
                               .features = 2,
                               .feature = feature},
                open_ends());
}

static void levels_of(const th_flow *flow, th_semiclassics *out)
{
    th_error err = {0};

    *out = (th_semiclassics){.count = 0};
    if (th_semiclassics_find(flow, 0, out, &err) != TH_OK)
        fail_msg("%s", err.text);
}

/* ---- integrals ------------------------------------------------------------------------------- */

typedef struct {
    const th_flow *flow;
    double omega;
    int which;
} integrand;

enum { DIFFERENCE, LARGE, PARTNER, SMALL, TIME };

/* Real roots k > 0 of negative energy and the one below 0, from the quartic. The speed of energy
 * is a difference quotient of the relation itself. */
static double quartic(double x, void *params)
{
    const integrand *f = params;
    th_flow_point p;
    double complex k[4];
    double small = HUGE_VAL, large = 0, lowest = 0;

    th_flow_at(f->flow, x, &p);
    assert_int_equal(th_dispersion_roots(f->omega, p.v, p.c, k, NULL), TH_OK);
    for (int i = 0; i < 4; i++) {
        const double re = creal(k[i]);

        lowest = fmin(lowest, re);
        if (f->omega - p.v * re < 0) {
            small = fmin(small, re);
            large = fmax(large, re);
        }
    }
    switch (f->which) {
    case DIFFERENCE:
        return large - small;
    case LARGE:
        return large;
    case SMALL:
        return small;
    case PARTNER:
        return -lowest;
    default: { /* 1/speed = dk/domega = 2 (omega - v k)/(2 v (omega - v k) + 2 c^2 k + k^3) */
        double time = 0;

        for (int i = 0; i < 2; i++) {
            const double q = i == 0 ? small : large, o = f->omega - p.v * q;

            time += fabs(2 * o / (2 * p.v * o + 2 * p.c * p.c * q + q * q * q));
        }
        return time;
    }
    }
}

static double quad(const th_flow *flow, double omega, int which, double a, double b,
                   double accuracy)
{
    gsl_integration_workspace *w = gsl_integration_workspace_alloc(2000);
    integrand f = {flow, omega, which};
    const gsl_function g = {quartic, &f};
    double value, error;

    (void)gsl_integration_qags(&g, a, b, 0, accuracy, 2000, w, &value, &error);
    gsl_integration_workspace_free(w);
    if (!(error < 100 * accuracy * value))
        fail_msg("reference integral %d: %g +- %g", which, value, error);
    return value;
}

/* Every number of a level from adaptive integrals. The quartic loses half of its digits at a
 * turning point, where the integrand vanishes (S: 1e-8 would be pessimistic) or is singular (T). */
static void test_integrals(void **state)
{
    th_flow *flow = tanh_flow(1.35, 0.55, 1.45, 1.5, 2.1, 30);
    th_semiclassics s;
    const double near_horizon = 1 + log(2) / 3;

    (void)state;
    levels_of(flow, &s);
    assert_true(s.count >= 6);
    for (int i = 0; i < s.count; i += 2) {
        const th_semiclassical_mode *m = &s.mode[i];
        int horizons;
        const th_horizon *h = th_flow_horizons(flow, &horizons);
        const double e = m->omega / h[0].kappa + m->omega / h[1].kappa;
        const double phase = quad(flow, m->omega, LARGE, m->left, m->right, 1e-8) +
                             quad(flow, m->omega, PARTNER, h[0].x, h[1].x, 1e-9);
        th_flow_point p;

        assert_int_equal(m->level, i);
        th_flow_at(flow, m->left, &p);
        close_to("left turning point", th_band_top(p.v, p.c), m->omega, 1e-12);
        th_flow_at(flow, m->right, &p);
        close_to("right turning point", th_band_top(p.v, p.c), m->omega, 1e-12);
        close_to("action / (2 pi)",
                 quad(flow, m->omega, DIFFERENCE, m->left, m->right, 1e-8) / (2 * pi), i + 0.5,
                 1e-7);
        close_to("round trip", m->round_trip, quad(flow, m->omega, TIME, m->left, m->right, 1e-6),
                 3e-6 * m->round_trip);
        close_to("phase", m->phase, phase + near_horizon * e, 1e-6 * phase);
    }
    th_semiclassics_clear(&s);
    th_flow_destroy(flow);
}

/* T = -dS/domega: fourth-order difference, h^4 of truncation about 1e-8. */
static void test_round_trip(void **state)
{
    th_flow *flow = tanh_flow(1.5, 0.5, 1.3, 1, 1.7, 25);
    th_valley valley;

    (void)state;
    assert_int_equal(th_valley_look(flow, 0, &valley, NULL), TH_OK);
    for (int i = 1; i < 10; i++) {
        const double omega = 0.1 * i * valley.top, h = 2e-3 * (valley.top - omega);
        th_orbit o[5];

        for (int j = 0; j < 5; j++)
            assert_int_equal(th_orbit_follow(&valley, omega + (j - 2) * h, &o[j], NULL), TH_OK);
        close_to("-dS/domega", o[2].round_trip,
                 (8 * (o[1].action - o[3].action) - (o[0].action - o[4].action)) / (12 * h),
                 1e-6 * o[2].round_trip);
    }
    th_flow_destroy(flow);
}

/* A longer uniform middle adds length (k_l - k_s) to S, and the quartic knows that. */
static void test_uniform_middle(void **state)
{
    th_flow *brief = tanh_flow(1.4, 0.6, 1.4, 0.5, 0.5, 60);
    th_flow *extended = tanh_flow(1.4, 0.6, 1.4, 0.5, 0.5, 160);
    th_valley v1, v2;

    (void)state;
    assert_int_equal(th_valley_look(brief, 0, &v1, NULL), TH_OK);
    assert_int_equal(th_valley_look(extended, 0, &v2, NULL), TH_OK);
    close_to("top", v1.top, th_band_top(1, 0.6), 1e-14);
    for (int i = 1; i < 8; i++) {
        const double omega = v1.top * i / 8;
        integrand f = {brief, omega, DIFFERENCE};
        th_orbit o1, o2;

        assert_int_equal(th_orbit_follow(&v1, omega, &o1, NULL), TH_OK);
        assert_int_equal(th_orbit_follow(&v2, omega, &o2, NULL), TH_OK);
        close_to("100 (k_l - k_s)", o2.action - o1.action, 100 * quartic(0, &f), 2e-9 * o2.action);
        f.which = TIME;
        close_to("100 (1/speed)", o2.round_trip - o1.round_trip, 100 * quartic(0, &f),
                 2e-9 * o2.round_trip);
    }
    th_flow_destroy(brief);
    th_flow_destroy(extended);
}

/* v = 1, c^2 = 1 - a^2 (1 - (x/b)^2): S(0) = Int 2 a sqrt(1 - (x/b)^2) dx = pi a b, and
 * kappa = a^2/b. The parabola goes on to |x| = 1.5 b. */
static void parabola_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    const double a = 0.8, b = 37, *scale = ctx;
    const double y = fmax(-1.5, fmin(1.5, x / b)) * *scale;

    *p = (th_flow_point){.n = 1, .v = 1, .c = sqrt(1 - a * a * (1 - y * y))};
    if (piece == 1)
        p->dc = a * a * y / b / p->c;
}

static void test_parabola(void **state)
{
    static const double scale = 1;
    const double edge[4] = {-60, -55.5, 55.5, 60};
    const bool uniform[3] = {true, false, true};
    th_flow *flow = made((th_flow_spec){.eval = parabola_eval,
                                        .ctx = (void *)&scale,
                                        .pieces = 3,
                                        .edge = edge,
                                        .uniform = uniform},
                         open_ends());
    const double kappa = 0.64 / 37, top = th_band_top(1, 0.6);
    th_semiclassics s;
    double last = HUGE_VAL;

    (void)state;
    levels_of(flow, &s);
    close_to("levels", s.levels, 0.8 * 37 / 2, 1e-7);
    assert_int_equal(s.count, 15); /* 14.8 levels: n = 0 .. 14 lie at n + 1/2 < 14.8 */
    close_to("omega_max", s.omega_max, top, 1e-13);
    close_to("kappa", s.kappa_black, kappa, 1e-13);
    close_to("kappa", s.kappa_white, kappa, 1e-13);
    close_to("thermal", s.thermal, kappa / top, 1e-12);
    close_to("steepness", s.steepness, kappa, 1e-12);
    close_to("impedance", s.impedance, log(1 / 0.6), 1e-4); /* the middle is a sample */
    for (int i = 0; i < s.count; i++) {
        assert_true(s.mode[i].omega < last && s.mode[i].omega > 0);
        last = s.mode[i].omega;
    }
    th_semiclassics_clear(&s);
    th_flow_destroy(flow);
}

/* ---- horizons -------------------------------------------------------------------------------- */

/* arg Gamma(1 + i e) = -gamma e + sum (e/n - atan(e/n)); the tail is e^3/(6 N^2) + ... */
static double arg_gamma(double e)
{
    const int terms = 200000;
    double sum = -0.57721566490153286 * e;

    for (int n = terms; n >= 1; n--)
        sum += e / n - atan(e / n);
    return sum + e * e * e / (6.0 * terms * (double)terms);
}

/* What is written for a level follows from its omega, T and phase. */
static void test_formulas(void **state)
{
    th_flow *flow = tanh_flow(1.3, 0.6, 1.4, 1, 1.6, 30);
    th_semiclassics s;

    (void)state;
    levels_of(flow, &s);
    for (int i = 0; i < s.count; i++) {
        const th_semiclassical_mode *m = &s.mode[i];
        const double e[2] = {m->omega / s.kappa_black, m->omega / s.kappa_white};
        double b[2], a[2], f = 0;
        double complex round;

        for (int h = 0; h < 2; h++) {
            b[h] = sqrt(1 / (exp(2 * pi * e[h]) - 1));
            a[h] = sqrt(1 + b[h] * b[h]);
            f += arg_gamma(e[h]) - e[h] * log(e[h]) + e[h] - pi / 4;
        }
        round = a[0] * a[1] + b[0] * b[1] * cexp(I * m->phase);
        close_to("created, black", m->created_black, b[0] * b[0], 1e-12 * b[0] * b[0]);
        close_to("created, white", m->created_white, b[1] * b[1], 1e-12 * b[1] * b[1]);
        close_to("growth", m->growth, log(cabs(round)) / m->round_trip, 1e-15);
        close_to("least", m->growth_low, log(a[0] * a[1] - b[0] * b[1]) / m->round_trip, 1e-15);
        close_to("largest", m->growth_high, log(a[0] * a[1] + b[0] * b[1]) / m->round_trip, 1e-15);
        close_to("uniform", m->omega_uniform, m->omega + (f - carg(round)) / m->round_trip, 1e-9);
    }
    th_semiclassics_clear(&s);
    th_flow_destroy(flow);
}

/* The constant 1 + (ln 2)/3 from a horizon whose c is linear over many times the length on which
 * waves turn: Int |k_p| upstream of it less Int k_s downstream, both out to X = 6 lengths, where
 * k = +-e/x but for (length/X)^3, a part in 200. The dispersion relation departs from
 * omega = (v - c) k - k^3/(8 c) by k^2/(16 c^2), a part in 400. */
static void test_near_horizon(void **state)
{
    th_flow *flow = tanh_flow(1.5, 0.5, 1.5, 4000, 4000, 40000);
    const double omega = 0.001;
    th_valley valley;
    th_orbit o;
    double e, far, rest;

    (void)state;
    assert_int_equal(th_valley_look(flow, 0, &valley, NULL), TH_OK);
    assert_int_equal(th_orbit_follow(&valley, omega, &o, NULL), TH_OK);
    e = omega / valley.black.kappa;
    far = 6 * e / cbrt(8 * omega);
    rest = quad(flow, omega, PARTNER, valley.left - far, valley.left, 1e-8) -
           quad(flow, omega, SMALL, o.left, valley.left + far, 1e-8);
    close_to("what is left at a horizon", rest / e, 1 + log(2) / 3, 0.01);
    th_flow_destroy(flow);
}

/* ---- against exact modes --------------------------------------------------------------------- */

typedef struct {
    double omega, growth;
} exact_mode;

/* Growing modes with Re omega > 0 by falling Re omega. */
static int exact_modes(const th_flow *flow, exact_mode *mode)
{
    th_solution *answer = NULL;
    int n = 0;

    assert_int_equal(th_solve(flow, &(th_solve_options){.accuracy = 1e-6}, &answer, NULL), TH_OK);
    assert_int_equal(answer->verdict, TH_VERDICT_UNSTABLE);
    for (int i = 0; i < answer->count; i++) {
        const th_mode *m = &answer->mode[i];
        int at = n;

        if (m->label != TH_LABEL_UNSTABLE || m->omega_re == 0.0)
            continue;
        assert_true(n < MODES);
        for (; at > 0 && mode[at - 1].omega < m->omega_re; at--)
            mode[at] = mode[at - 1];
        mode[at] = (exact_mode){m->omega_re, m->omega_im};
        n++;
    }
    th_solution_destroy(answer);
    return n;
}

/* The part of the band where errors are compared: below it e is small at the smaller scales. */
static const double upper_band = 0.7;

/* One scale of the table: largest relative errors of omega and omega_uniform in the upper band. */
static void one_scale(double scale, double *plain, double *uniform)
{
    th_flow *flow = tanh_flow(1.5, 0.5, 1.5, 0.5 * scale, 0.5 * scale, 8 * scale);
    th_semiclassics s;
    exact_mode mode[MODES];
    const int n = exact_modes(flow, mode);

    levels_of(flow, &s);
    assert_int_equal(n, s.count);
    print_message("# widths %g, gap %g: thermal %.3f, roughness %.2f, impedance %.2f\n",
                  0.5 * scale, 8 * scale, s.thermal, s.roughness, s.impedance);
    print_message("#  n    e  omega     plain    uniform  growth    semi      low..high\n");
    *plain = *uniform = 0;
    for (int i = 0; i < n; i++) {
        const th_semiclassical_mode *m = &s.mode[i];
        const double off = m->omega / mode[i].omega - 1;
        const double off_uniform = m->omega_uniform / mode[i].omega - 1;
        const double e = m->omega / s.kappa_black;

        print_message("# %2d %.2f %.6f  %+.1e %+.1e %.2e  %.2e  %.1e..%.1e\n", i, e, mode[i].omega,
                      off, off_uniform, mode[i].growth, m->growth, m->growth_low, m->growth_high);
        if (mode[i].omega > upper_band * s.omega_max) {
            *plain = fmax(*plain, fabs(off));
            *uniform = fmax(*uniform, fabs(off_uniform));
        }
        if (e > 0.14)
            assert_true(fabs(off_uniform) < fabs(off));
        /* phonons that move downstream add to the horizons' part, the more the larger e */
        if (e < 0.4)
            assert_true(mode[i].growth > 0.9 * m->growth && mode[i].growth < 4.5 * m->growth);
    }
    th_semiclassics_clear(&s);
    th_flow_destroy(flow);
}

/* The picture becomes exact as the edges widen. What is left of it goes as 1/scale^2 (the next
 * order of WKB in omega, 1/(12 e) in the horizons' phases over a time that grows with the scale),
 * that is by 4 a doubling; the smallest scale is not there yet. */
static void test_convergence(void **state)
{
    double plain[4], uniform[4];

    (void)state;
    for (int i = 0; i < 4; i++) {
        one_scale(1 << i, &plain[i], &uniform[i]);
        print_message("# scale %d: largest error in the upper band %.2e, uniform %.2e\n", 1 << i,
                      plain[i], uniform[i]);
        if (i > 0) {
            assert_true(plain[i] < plain[i - 1] / (i == 1 ? 2.2 : 3.5));
            assert_true(uniform[i] < uniform[i - 1] / (i == 1 ? 2.2 : 3.0));
        }
    }
}

/* Growth where the horizons alone create: its phase is right when the rates go up and down from
 * level to level with it. Below the highest level, 0.1 < e < 1.3, the logarithm of growth/exact is
 * compared with that of the largest rate and of the mean over the phase, ln(alpha alpha)/T. */
static void test_growth(void **state)
{
    static const matched pocket[] = {{1.3, 0.7, 1, 16}, {1.3, 0.7, 2, 32}, {1.2, 0.8, 1, 24}};
    double off = 0, off_high = 0, off_mean = 0;
    int compared = 0;

    (void)state;
    print_message("#  n    e  omega     plain    uniform  growth    semi     low..high\n");
    for (size_t f = 0; f < sizeof pocket / sizeof pocket[0]; f++) {
        th_flow *flow = matched_flow(&pocket[f]);
        exact_mode mode[MODES];
        const int n = exact_modes(flow, mode);
        th_semiclassics s;

        levels_of(flow, &s);
        assert_int_equal(n, s.count);
        assert_true(s.impedance < 1e-14);
        for (int i = 0; i < n; i++) {
            const th_semiclassical_mode *m = &s.mode[i];
            const double e = m->omega / s.kappa_black, growth = mode[i].growth;
            const double mean =
                (log1p(m->created_black) + log1p(m->created_white)) / (2 * m->round_trip);

            print_message("# %2d %.2f %.6f  %+.1e %+.1e %.2e %.2e  %.1e..%.1e\n", i, e,
                          mode[i].omega, m->omega / mode[i].omega - 1,
                          m->omega_uniform / mode[i].omega - 1, growth, m->growth, m->growth_low,
                          m->growth_high);
            if (i == 0 || e < 0.1 || e > 1.3)
                continue;
            /* an error of the phase moves the rate by a part of its largest value */
            assert_true(fabs(m->growth - growth) < 0.35 * m->growth_high);
            assert_true(growth < 1.2 * m->growth_high);
            off += fabs(log(m->growth / growth));
            off_high += fabs(log(m->growth_high / growth));
            off_mean += fabs(log(mean / growth));
            compared++;
        }
        th_semiclassics_clear(&s);
        th_flow_destroy(flow);
    }
    off /= compared;
    off_high /= compared;
    off_mean /= compared;
    print_message("# |ln(growth/exact)|, mean of %d: %.2f; largest rate %.2f, mean rate %.2f\n",
                  compared, off, off_high, off_mean);
    assert_true(off < 0.4 && off < 0.4 * off_high && off < 0.5 * off_mean);
}

/* ---- the rest -------------------------------------------------------------------------------- */

/* Ring of 8 quanta: v = 1, c = 1 - 0.4 cos(2 pi (x - at)/circumference), pocket around `at`. */
static void wave_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    const double *at = ctx;

    (void)piece;
    *p = (th_flow_point){.n = 1, .v = 1, .c = 1 - 0.4 * cos((x - *at) / 8)};
    p->dc = 0.4 / 8 * sin((x - *at) / 8);
}

/* The same with another c on the middle piece. */
static void steps_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    wave_eval(ctx, piece, x, p);
    if (piece == 1)
        p->c -= 0.02;
}

/* The pocket of a ring moved on to its seam has the same levels. */
static void test_seam(void **state)
{
    const double half = 8 * pi, edge[4] = {-half, -0.6 * half, 0.3 * half, half};
    static const double centre[3] = {0, 8 * 3.141592653589793, -20};
    th_semiclassics s[3];

    (void)state;
    for (int i = 0; i < 3; i++) {
        th_flow *flow = made(
            (th_flow_spec){.eval = wave_eval, .ctx = (void *)&centre[i], .pieces = 3, .edge = edge},
            ring(2 * half, 8));

        levels_of(flow, &s[i]);
        assert_int_equal(s[i].count, s[0].count);
        close_to("levels", s[i].levels, s[0].levels, 1e-8);
        close_to("omega_max", s[i].omega_max, s[0].omega_max, 1e-13);
        for (int n = 0; n < s[0].count; n++) {
            close_to("omega", s[i].mode[n].omega, s[0].mode[n].omega, 1e-8);
            close_to("growth", s[i].mode[n].growth, s[0].mode[n].growth, 1e-8);
            close_to("left", s[i].mode[n].left - s[0].mode[n].left,
                     s[i].mode[n].right - s[0].mode[n].right, 1e-6);
        }
        th_flow_destroy(flow);
    }
    assert_true(s[0].count > 3);
    for (int i = 0; i < 3; i++)
        th_semiclassics_clear(&s[i]);
}

/* Two dips of c that v = 1 turns into a pocket where the top of the band has two maxima. */
typedef struct {
    double apart, scale;
} dips;

static void dips_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    const dips *d = ctx;
    const double y = x / d->scale, r = y - d->apart / 2, l = y + d->apart / 2;
    const double a = 0.5 * exp(-r * r / 4), b = 0.5 * exp(-l * l / 4);

    (void)piece;
    *p = (th_flow_point){.n = 1, .v = 1, .c = 1.2 - a - b, .dc = (r * a + l * b) / (2 * d->scale)};
}

static th_flow *dips_flow(const dips *d)
{
    const double edge[2] = {-16 * d->scale, 16 * d->scale};

    return made((th_flow_spec){.eval = dips_eval, .ctx = (void *)d, .pieces = 1, .edge = edge},
                open_ends());
}

/* Levels below the dip between the maxima are those of the whole pocket. */
static void test_dips(void **state)
{
    static const dips d = {4, 5};
    th_flow *flow = dips_flow(&d);
    const double single = th_band_top(1, 1.2 - exp(-1));
    th_semiclassics s;

    (void)state;
    levels_of(flow, &s);
    close_to("dip", s.omega_single, single, 1e-12); /* the middle is a sample */
    assert_true(s.omega_max > 1.01 * single);
    assert_true(s.count >= 2 && s.mode[0].level > 0);
    assert_int_equal(s.mode[s.count - 1].level + 1, (int)ceil(s.levels - 0.5));
    for (int i = 0; i < s.count; i++) {
        const th_semiclassical_mode *m = &s.mode[i];

        assert_int_equal(m->level, s.mode[0].level + i);
        assert_true(m->omega < single);
        close_to("action / (2 pi)",
                 quad(flow, m->omega, DIFFERENCE, m->left, m->right, 1e-8) / (2 * pi),
                 m->level + 0.5, 1e-7);
    }
    th_semiclassics_clear(&s);
    th_flow_destroy(flow);
}

/* One dip; c falls by 0.02 at its middle. */
static void fall_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    const double a = 0.5 * exp(-x * x / 16);

    (void)ctx;
    *p = (th_flow_point){.n = 1, .v = 1, .c = (piece > 0 ? 1.18 : 1.2) - a, .dc = x * a / 8};
}

static void refused(th_flow *flow, int pocket, th_status want, const char *text)
{
    th_semiclassics s = {.count = 0};
    th_error err = {0};

    assert_int_equal(th_semiclassics_find(flow, pocket, &s, &err), want);
    assert_int_equal(err.status, want);
    if (strstr(err.text, text) == NULL)
        fail_msg("\"%s\" does not say \"%s\"", err.text, text);
    assert_null(s.mode);
    th_flow_destroy(flow);
}

static void test_errors(void **state)
{
    static const dips d = {4.6, 1};
    static const double seam = 8 * 3.141592653589793;
    const double edge[3] = {-26, 0, 26}, around[4] = {-seam, -0.8 * seam, 0.3 * seam, seam};
    th_semiclassics s = {.count = 0};

    (void)state;
    refused(step_flow(1, 1.5, 0.5, 1.5, 6), 0, TH_ENONE, "the black-hole horizon is sharp");
    refused(tanh_flow(1.5, 0.5, 1.5, 1, 1, 9), 1, TH_EINVAL, "pocket = 1, want 0 <= pocket < 1");
    refused(tanh_flow(1.5, 0.5, 1.5, 1, 1, 9), -1, TH_EINVAL, "pocket = -1");
    refused(dips_flow(&d), 0, TH_ENONE, "at the frequencies of all levels");
    refused(made((th_flow_spec){.eval = fall_eval, .pieces = 2, .edge = edge}, open_ends()), 0,
            TH_ENONE, "jumps at x = 0");
    /* pocket from 0.5 to 1.5 seam */
    refused(
        made((th_flow_spec){.eval = steps_eval, .ctx = (void *)&seam, .pieces = 3, .edge = around},
             ring(2 * seam, 8)),
        0, TH_ENONE, "jumps at x = -20.1");
    assert_int_equal(th_semiclassics_find(NULL, 0, &s, NULL), TH_EINVAL);
    th_semiclassics_clear(NULL);
}

/* A pocket too short for half a wave is no error. */
static void test_short(void **state)
{
    th_flow *flow = tanh_flow(1.2, 0.8, 1.2, 0.5, 0.5, 1);
    th_semiclassics s;

    (void)state;
    levels_of(flow, &s);
    assert_int_equal(s.count, 0);
    assert_true(s.levels > 0 && s.levels < 0.5);
    assert_true(s.roughness == 0.0);
    th_semiclassics_clear(&s);
    th_flow_destroy(flow);
}

static void test_memory(void **state)
{
    th_flow *flow = tanh_flow(1.3, 0.7, 1.3, 1, 1, 12);
    long k = 0;

    (void)state;
    for (;; k++) {
        th_semiclassics s = {.count = 0};
        th_status st;

        refuse_from(k);
        st = th_semiclassics_find(flow, 0, &s, NULL);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            th_semiclassics_clear(&s);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_null(s.mode);
    }
    assert_true(k == 3);
    th_flow_destroy(flow);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_integrals),      cmocka_unit_test(test_round_trip),
        cmocka_unit_test(test_uniform_middle), cmocka_unit_test(test_parabola),
        cmocka_unit_test(test_formulas),       cmocka_unit_test(test_near_horizon),
        cmocka_unit_test(test_convergence),    cmocka_unit_test(test_growth),
        cmocka_unit_test(test_seam),           cmocka_unit_test(test_errors),
        cmocka_unit_test(test_short),          cmocka_unit_test(test_memory),
        cmocka_unit_test(test_dips),
    };

    gsl_set_error_handler_off();
    return cmocka_run_group_tests(tests, NULL, NULL);
}
