/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of the flow: shapes against their closed forms, horizons, pockets, every kind of ends,
 * every rule of a callback. Reference values are closed formulas, written out where they are used.
 * Random cases have fixed seeds. */
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "refuse.h"
#include "twinhorizon/flow.h"

static const double pi = 3.141592653589793238462643383280;

/* ---- helpers -------------------------------------------------------------------------------- */

/* Uniform in [low, high): the 48-bit generator of POSIX written out, the same everywhere. */
static double draw(uint64_t *seed, double low, double high)
{
    *seed = (*seed * 0x5DEECE66Du + 0xBu) & 0xFFFFFFFFFFFFu;
    return low + (high - low) * (double)*seed / 281474976710656.0;
}

static void close_to(const char *what, double got, double want, double tolerance)
{
    if (!(fabs(got - want) <= tolerance))
        fail_msg("%s = %.17g, want %.17g to %g", what, got, want, tolerance);
}

static const th_ends open_ends = {.kind = TH_ENDS_OPEN};

/* A setup from "key", value pairs; NULL ends the list. */
static th_flow_setup setup_of(const char *shape, th_ends ends, ...)
{
    th_flow_setup s = {.shape = th_shape_find(shape), .density = 1, .ends = ends};
    const char *key;
    va_list args;

    assert_non_null(s.shape);
    va_start(args, ends);
    while ((key = va_arg(args, const char *)) != NULL) {
        int i = 0;

        while (i < s.shape->keys && strcmp(s.shape->key[i].key, key) != 0)
            i++;
        assert_true(i < s.shape->keys);
        s.value[i] = va_arg(args, double);
        s.given[i] = true;
    }
    va_end(args);
    return s;
}

static th_flow *build(const th_flow_setup *setup)
{
    th_flow *flow = NULL;
    th_error err = {0};

    if (th_flow_build(setup, &flow, &err) != TH_OK)
        fail_msg("%s: %s", err.key, err.text);
    assert_non_null(flow);
    return flow;
}

static th_flow_setup tanh_setup(double v, double c_u, double c_p, double c_d, double w_b,
                                double w_w, double gap)
{
    return setup_of("tanh", open_ends, "speed", v, "sound_upstream", c_u, "sound_pocket", c_p,
                    "sound_downstream", c_d, "width_black", w_b, "width_white", w_w, "gap", gap,
                    NULL);
}

static void must_fail(const th_flow_setup *setup, const char *key, const char *word)
{
    th_flow *flow = (th_flow *)&open_ends; /* must be replaced by NULL */
    th_error err = {0};

    assert_int_equal(th_flow_build(setup, &flow, &err), TH_EINVAL);
    assert_null(flow);
    assert_string_equal(err.key, key);
    if (strstr(err.text, word) == NULL)
        fail_msg("\"%s\" does not say \"%s\"", err.text, word);
    assert_int_equal(th_flow_build(setup, &flow, NULL), TH_EINVAL);
}

/* ---- tanh ----------------------------------------------------------------------------------- */

/* Far apart each edge has its horizon at -+gap/2 by construction. There the fraction of the rise is
 * F = (v - c_p)/(c_o - c_p), and c' = (c_o - c_p) 2 F (1 - F)/w (derivative of tanh), so
 * kappa = 2 (c_o - v)(v - c_p)/((c_o - c_p) w). The gap of 60 widths leaves exp(-60) of the other
 * edge. Tolerance: c = v is resolved to 4 roundings, thus x to that divided by kappa. */
static void test_tanh_horizons(void **state)
{
    uint64_t seed = 20240101;

    (void)state;
    for (int trial = 0; trial < 60; trial++) {
        double v = draw(&seed, 0.5, 2), c_p = v * draw(&seed, 0.2, 0.95);
        double c_u = v * draw(&seed, 1.05, 3), c_d = v * draw(&seed, 1.05, 3);
        double size = pow(10, draw(&seed, -6, 1));
        double w_b = size * draw(&seed, 0.5, 1), w_w = size * draw(&seed, 0.5, 1);
        double gap = 60 * size;
        th_flow_setup setup = tanh_setup(v, c_u, c_p, c_d, w_b, w_w, gap);
        th_flow *flow = build(&setup);
        double kappa_b = 2 * (c_u - v) * (v - c_p) / ((c_u - c_p) * w_b);
        double kappa_w = 2 * (c_d - v) * (v - c_p) / ((c_d - c_p) * w_w);
        const th_horizon *h;
        const th_pocket *p;
        int n, pockets;

        h = th_flow_horizons(flow, &n);
        p = th_flow_pockets(flow, &pockets);
        assert_int_equal(n, 2);
        assert_int_equal(pockets, 1);
        assert_int_equal(h[0].kind, TH_HORIZON_BLACK);
        assert_int_equal(h[1].kind, TH_HORIZON_WHITE);
        assert_false(h[0].sharp || h[1].sharp);
        close_to("black", h[0].x, -gap / 2, 4e-15 * v / kappa_b + 1e-15 * gap);
        close_to("white", h[1].x, gap / 2, 4e-15 * v / kappa_w + 1e-15 * gap);
        close_to("kappa black", h[0].kappa, kappa_b, 1e-12 * kappa_b);
        close_to("kappa white", h[1].kappa, kappa_w, 1e-12 * kappa_w);
        close_to("temperature", h[0].temperature, kappa_b / (2 * pi), 1e-12 * kappa_b);
        close_to("speed", h[0].speed, v, 0);
        close_to("distance", th_flow_horizon_distance(flow), h[1].x - h[0].x, 0);
        close_to("left", p->left, h[0].x, 0);
        close_to("right", p->right, h[1].x, 0);
        close_to("mach", p->mach, v / c_p, 1e-12);
        close_to("undulation", p->undulation, 2 * sqrt(v * v - c_p * c_p), 1e-12 * v);
        th_flow_destroy(flow);
    }
}

/* The formula of the shape as it is usually written, evaluated plainly; tolerance: its own
 * cancellation, a few roundings of the largest sound speed. */
static void test_tanh_formula(void **state)
{
    uint64_t seed = 7;

    (void)state;
    for (int trial = 0; trial < 200; trial++) {
        double v = 1, c_p = draw(&seed, 0.3, 0.9), c_u = draw(&seed, 1.1, 2);
        double c_d = draw(&seed, 1.1, 2), w_b = draw(&seed, 0.1, 2), w_w = draw(&seed, 0.1, 2);
        double gap = draw(&seed, 0.01, 60), x = draw(&seed, -40, 40);
        double x_b = -gap / 2 - w_b * atanh((c_u + c_p - 2 * v) / (c_u - c_p));
        double x_w = gap / 2 + w_w * atanh((c_d + c_p - 2 * v) / (c_d - c_p));
        th_flow_setup setup = tanh_setup(v, c_u, c_p, c_d, w_b, w_w, gap);
        th_flow *flow = build(&setup);
        th_flow_point p;

        th_flow_at(flow, x, &p);
        close_to("c", p.c,
                 c_p + (c_u - c_p) * (1 - tanh((x - x_b) / w_b)) / 2 +
                     (c_d - c_p) * (1 + tanh((x - x_w) / w_w)) / 2,
                 3e-15);
        th_flow_destroy(flow);
    }
}

/* A tail must keep its relative accuracy down to where it is cut: c_u - c = (c_u - c_p) e^{2 t}
 * there (1 - tanh t = 2 e^{2 t} for t << 0); read off c' = 2 (c_u - c)/w. And the ends are exact.
 */
static void test_tanh_tails(void **state)
{
    th_flow_setup setup = tanh_setup(1, 1.5, 0.5, 1.4, 0.5, 0.3, 8);
    th_flow *flow = build(&setup);
    const double *edge;
    th_flow_point p;
    int n;
    double x_b = -4; /* c_u + c_p = 2 v */

    (void)state;
    for (double t = -18; t < -8; t += 1) {
        th_flow_at(flow, x_b + 0.5 * t, &p);
        close_to("tail", p.dc / (-2 * exp(2 * t) / 0.5), 1, 2 * exp(2 * t) + 1e-13);
    }
    edge = th_flow_edges(flow, &n);
    th_flow_eval(flow, 0, edge[0], &p);
    close_to("left end", p.c, 1.5, 0);
    th_flow_eval(flow, n - 2, edge[n - 1], &p);
    close_to("right end", p.c, 1.4, 0);
    th_flow_at(flow, -1e9, &p);
    close_to("far left", p.c, 1.5, 0);
    close_to("far left slope", p.dc, 0, 0);
    th_flow_at(flow, 1e9, &p);
    close_to("far right", p.c, 1.4, 0);
    close_to("scale", th_flow_sound_max(flow), 1.5, 0);
    th_flow_destroy(flow);
}

static void test_tanh_single_horizon(void **state)
{
    th_flow_setup setup = tanh_setup(1, 1.5, 0.5, 0.5, 0.5, 0.7, 8);
    th_flow *flow = build(&setup);
    const th_horizon *h;
    int n;

    (void)state;
    h = th_flow_horizons(flow, &n);
    assert_int_equal(n, 1);
    assert_int_equal(h[0].kind, TH_HORIZON_BLACK);
    close_to("horizon", h[0].x, -4, 1e-14);
    (void)th_flow_pockets(flow, &n);
    assert_int_equal(n, 0);
    close_to("distance", th_flow_horizon_distance(flow), 0, 0);
    (void)th_flow_features(flow, &n);
    assert_int_equal(n, 1);
    th_flow_destroy(flow);

    setup = tanh_setup(1, 0.5, 0.5, 1.5, 0.5, 0.7, 8);
    flow = build(&setup);
    h = th_flow_horizons(flow, &n);
    assert_int_equal(n, 1);
    assert_int_equal(h[0].kind, TH_HORIZON_WHITE);
    close_to("horizon", h[0].x, 4, 1e-14);
    th_flow_destroy(flow);

    setup = tanh_setup(1, 0.5, 0.5, 0.5, 0.5, 0.7, 8); /* nothing at all */
    flow = build(&setup);
    (void)th_flow_horizons(flow, &n);
    assert_int_equal(n, 0);
    assert_true(th_flow_piece_uniform(flow, 0));
    th_flow_destroy(flow);
}

/* A wide pocket between narrow edges has a uniform plateau piece that joins on without a jump. */
static void test_tanh_plateau(void **state)
{
    th_flow_setup setup = tanh_setup(1, 1.5, 0.5, 1.4, 0.5, 0.7, 80);
    th_flow *flow = build(&setup);
    const double *edge;
    int n, uniform = 0;

    (void)state;
    edge = th_flow_edges(flow, &n);
    for (int i = 0; i < th_flow_pieces(flow); i++)
        uniform += th_flow_piece_uniform(flow, i);
    assert_int_equal(uniform, 1);
    for (int i = 1; i < n - 1; i++) {
        th_flow_point left, right;

        th_flow_eval(flow, i - 1, edge[i], &left);
        th_flow_eval(flow, i, edge[i], &right);
        close_to("join", left.c, right.c, 0);
    }
    th_flow_destroy(flow);
}

/* ---- well ----------------------------------------------------------------------------------- */

/* V must be a square well: 0 outside, -(1/m - m)^2/2 (upstream c = 1) on the plateau. Tolerance: V
 * is a difference of terms of the size v^2/2, largest 1/(2 m^2) on the plateau. Masses of 0.07 to
 * 0.995.
 */
static void test_well_potential(void **state)
{
    uint64_t seed = 99;

    (void)state;
    for (int trial = 0; trial < 40; trial++) {
        double m = draw(&seed, 0.07, 0.995), gap = draw(&seed, 0.1, 9);
        double c = pow(10, draw(&seed, -4, 4)), depth = c * c * (1 / m - m) * (1 / m - m) / 2;
        th_flow_setup setup =
            setup_of("well", open_ends, "mach", m, "gap", gap / c, "sound_upstream", c, NULL);
        th_flow *flow;
        const double *edge;
        th_flow_point p;
        int n;

        setup.density = draw(&seed, 0.1, 1000);
        flow = build(&setup);
        edge = th_flow_edges(flow, &n);
        assert_int_equal(n, 4);
        for (int i = 0; i < 3; i++)
            for (int j = 0; j < 20; j++) {
                th_flow_eval(flow, i, draw(&seed, edge[i], edge[i + 1]), &p);
                close_to("V", th_flow_potential(flow, &p), i == 1 ? -depth : 0,
                         4e-15 * c * c / (m * m));
                close_to("c^2/n", p.c * p.c / p.n, c * c / setup.density,
                         1e-14 * c * c / setup.density);
            }
        th_flow_eval(flow, 1, 0, &p);
        close_to("plateau n", p.n, setup.density * m * m, 1e-15 * setup.density);
        close_to("plateau c", p.c, c * m, 1e-15 * c);
        close_to("plateau v", p.v, c / m, 1e-15 * c / m);
        th_flow_at(flow, edge[0] - 1, &p);
        close_to("upstream n", p.n, setup.density, 0);
        close_to("upstream v", p.v, m * c, 1e-15 * c);
        close_to("edge", edge[2], gap / c / 2, 0);
        th_flow_destroy(flow);
    }
}

/* Horizons of the well: n/N = m^{2/3} (from m/r = sqrt r), at tanh^2 = (m^{2/3} - m^2)/(1 - m^2).
 */
static void test_well_horizons(void **state)
{
    const double m = 0.385, gap = 1.7;
    th_flow_setup setup = setup_of("well", open_ends, "mach", m, "gap", gap, NULL);
    th_flow *flow = build(&setup);
    double r = cbrt(m * m), q = sqrt(1 - m * m), t = sqrt(r - m * m) / q, s = atanh(t) / q;
    double kappa = 3 * q * q * q * t * (1 - t * t) / sqrt(r);
    const th_horizon *h;
    int n;

    (void)state;
    h = th_flow_horizons(flow, &n);
    assert_int_equal(n, 2);
    close_to("black", h[0].x, -gap / 2 - s, 1e-14);
    close_to("white", h[1].x, gap / 2 + s, 1e-14);
    close_to("kappa", h[0].kappa, kappa, 1e-13);
    close_to("kappa", h[1].kappa, kappa, 1e-13);
    th_flow_destroy(flow);
}

/* A tiny Mach number: near the plateau n/N = m^2 + q^2 tanh^2(q s) is a millionth, and must keep
 * its digits; the series q s - (q s)^3/3 stands for tanh at q s = 1e-3 (next term 2e-16 of it). */
static void test_well_slow(void **state)
{
    const double m = 1e-3, q2 = (1 - m) * (1 + m), t = 1e-3 - 1e-9 / 3;
    th_flow_setup setup = setup_of("well", open_ends, "mach", m, "gap", 2.0, NULL);
    th_flow *flow = build(&setup);
    th_flow_point p;
    double want = m * m + q2 * t * t;

    (void)state;
    th_flow_at(flow, 1 + 1e-3 / sqrt(q2), &p);
    close_to("n", p.n / want, 1, 1e-12); /* x - 1 has lost three digits */
    th_flow_destroy(flow);
}

/* ---- all shapes ----------------------------------------------------------------------------- */

static th_flow_setup sample_setup(int which, uint64_t *seed)
{
    double v = draw(seed, 0.8, 1.2), c_u;

    switch (which) {
    case 0:
        return setup_of("step", open_ends, "speed", v, "sound_upstream", draw(seed, 1.3, 2),
                        "sound_pocket", draw(seed, 0.2, 0.7), "sound_downstream",
                        draw(seed, 1.3, 2), "gap", draw(seed, 1, 10), NULL);
    case 1:
        return tanh_setup(v, draw(seed, 1.3, 2), draw(seed, 0.2, 0.7), draw(seed, 1.3, 2),
                          draw(seed, 0.2, 2), draw(seed, 0.2, 2), draw(seed, 1, 10));
    case 2:
        c_u = draw(seed, 1.3, 2);
        return setup_of("sech", open_ends, "speed", v, "sound_upstream", c_u, "depth",
                        c_u * c_u - pow(draw(seed, 0.2, 0.7), 2), "width", draw(seed, 0.3, 4),
                        NULL);
    default:
        return setup_of("well", open_ends, "mach", draw(seed, 0.2, 0.9), "gap", draw(seed, 1, 10),
                        NULL);
    }
}

/* Every derivative against a five-point central difference (error h^4/30 of the fifth derivative,
 * and rounding 1e-16/h; with h = 1e-3 of the local scale about 1e-11), and n v = J. */
static void test_derivatives(void **state)
{
    uint64_t seed = 4242;

    (void)state;
    for (int which = 0; which < 4; which++)
        for (int trial = 0; trial < 25; trial++) {
            th_flow_setup setup = sample_setup(which, &seed);
            th_flow *flow = build(&setup);
            const th_feature *f;
            const double *edge;
            int n, features;
            double w = 1;

            edge = th_flow_edges(flow, &n);
            f = th_flow_features(flow, &features);
            for (int i = 0; i < features; i++)
                w = fmin(w, f[i].width);
            for (int j = 0; j < 40; j++) {
                int piece = (int)draw(&seed, 0, n - 1);
                double h = 1e-3 * w, tol = 1e-9;
                double x = draw(&seed, edge[piece] + 2 * h, edge[piece + 1] - 2 * h);
                th_flow_point p, q[5];

                for (int i = 0; i < 5; i++)
                    th_flow_eval(flow, piece, x + (i - 2) * h, &q[i]);
                p = q[2];
#define SLOPE(member) ((8 * (q[3].member - q[1].member) - (q[4].member - q[0].member)) / (12 * h))
                close_to("dn", p.dn, SLOPE(n), tol * p.n / w);
                close_to("ddn", p.ddn, SLOPE(dn), tol * p.n / (w * w));
                close_to("dv", p.dv, SLOPE(v), tol * p.v / w);
                close_to("dc", p.dc, SLOPE(c), tol * p.c / w);
#undef SLOPE
                close_to("J", p.n * p.v, th_flow_flux(flow), 1e-14 * th_flow_flux(flow));
            }
            th_flow_destroy(flow);
        }
}

/* Largest v k - sqrt(c^2 k^2 + k^4/4) by search: a ternary search in k (the function has one
 * maximum between 0 and 2 sqrt(v^2 - c^2)), a fine grid in x. Tolerance 1e-6: the grid of x misses
 * the peak of a smooth function by half a step, 1e-6 of it squared. */
static double band_by_search(double v, double c)
{
    double a = 0, b = v > c ? 2 * sqrt(v * v - c * c) : 0;

#define OMEGA(k) (v * (k)-sqrt(c * c * (k) * (k) + (k) * (k) * (k) * (k) / 4))
    for (int i = 0; i < 100; i++) {
        double l = a + (b - a) / 3, r = b - (b - a) / 3;

        if (OMEGA(l) < OMEGA(r))
            a = l;
        else
            b = r;
    }
    return OMEGA((a + b) / 2);
#undef OMEGA
}

static void test_band_top(void **state)
{
    uint64_t seed = 3;

    (void)state;
    for (int i = 0; i < 300; i++) {
        double v = pow(10, draw(&seed, -4, 4)), c = v * draw(&seed, 0, 1);
        double want = band_by_search(v, c);

        close_to("band top", th_band_top(v, c), want, 1e-14 * v * v);
        if (c < 0.9 * v)
            close_to("band top", th_band_top(v, c) / want, 1, 1e-13);
    }
    /* Near v = c: omega = k (v - c) - k^3/(8 c), largest (2/3) (v - c) k at k^2 = 8 c (v - c)/3, up
     * to relative corrections of order (v - c)/c. */
    close_to("thin band", th_band_top(1 + 1e-8, 1) / (2e-8 / 3 * sqrt(8e-8 / 3)), 1, 1e-7);
    {
        double d = (1 + 1e-12) - 1; /* as rounded */

        close_to("thinnest band", th_band_top(1 + d, 1) / (2 * d / 3 * sqrt(8 * d / 3)), 1, 1e-11);
    }
    close_to("subsonic", th_band_top(1, 1), 0, 0);
    close_to("subsonic", th_band_top(1, 2), 0, 0);
    for (int which = 0; which < 4; which++)
        for (int trial = 0; trial < 10; trial++) {
            th_flow_setup setup = sample_setup(which, &seed);
            th_flow *flow = build(&setup);
            const th_pocket *p;
            int n;
            double want = 0;

            p = th_flow_pockets(flow, &n);
            assert_int_equal(n, 1);
            for (int i = 0; i <= 2000; i++) {
                th_flow_point q;

                th_flow_at(flow, p->left + (p->right - p->left) * i / 2000, &q);
                want = fmax(want, band_by_search(q.v, q.c));
            }
            close_to("omega_max", p->omega_max / want, 1, 1e-6);
            assert_true(p->omega_max >= want * (1 - 1e-12));
            th_flow_destroy(flow);
        }
}

/* Speeds times s and lengths over s change rates by s^2 and nothing else; 1e-4 and 1e4 are what
 * cases in odd units look like. Tolerances: the roundings of pow and of the root search. */
static void test_scaling(void **state)
{
    static const double factor[2] = {1e-4, 1e4};

    (void)state;
    for (int which = 0; which < 4; which++)
        for (int f = 0; f < 2; f++) {
            uint64_t seed = 11;
            double s = factor[f];
            th_flow_setup one = sample_setup(which, &seed), other = one;
            th_flow *a, *b;
            const th_horizon *h, *g;
            const th_pocket *p, *q;
            int n, m;

            for (int i = 0; i < one.shape->keys; i++) {
                double power = 0;

                if (one.shape->key[i].dimension == TH_DIM_SPEED)
                    power = 1;
                if (one.shape->key[i].dimension == TH_DIM_SPEED_SQUARED)
                    power = 2;
                if (one.shape->key[i].dimension == TH_DIM_LENGTH)
                    power = -1;
                other.value[i] *= pow(s, power);
                if (one.shape->key[i].si_only) {
                    other.value[i] = s;
                    other.given[i] = true;
                }
            }
            a = build(&one);
            b = build(&other);
            h = th_flow_horizons(a, &n);
            g = th_flow_horizons(b, &m);
            assert_int_equal(n, 2);
            assert_int_equal(m, 2);
            for (int i = 0; i < 2; i++) {
                close_to("x", g[i].x * s, h[i].x, 1e-13 * fabs(h[i].x));
                close_to("kappa", g[i].kappa / (s * s), h[i].kappa, 1e-12 * h[i].kappa);
                assert_int_equal(g[i].sharp, which == 0);
            }
            p = th_flow_pockets(a, &n);
            q = th_flow_pockets(b, &m);
            close_to("omega_max", q->omega_max / (s * s), p->omega_max, 1e-12 * p->omega_max);
            assert_int_equal(th_flow_pieces(a), th_flow_pieces(b));
            th_flow_destroy(a);
            th_flow_destroy(b);
        }
}

static void test_step(void **state)
{
    th_flow_setup setup =
        setup_of("step", open_ends, "speed", 0.75, "sound_upstream", 1.0, "sound_pocket", 0.3,
                 "sound_downstream", 1.25, "gap", 2.385, NULL);
    th_flow *flow = build(&setup);
    const th_horizon *h;
    th_flow_point p;
    int n;

    (void)state;
    assert_int_equal(th_flow_pieces(flow), 1);
    h = th_flow_horizons(flow, &n);
    assert_int_equal(n, 2);
    assert_true(h[0].sharp && h[1].sharp);
    close_to("black", h[0].x, -2.385 / 2, 0);
    close_to("white", h[1].x, 2.385 / 2, 0);
    close_to("kappa", h[0].kappa, 0, 0);
    close_to("temperature", h[0].temperature, 0, 0);
    close_to("speed", h[0].speed, 0.75, 0);
    th_flow_at(flow, -2.385 / 2, &p); /* the side to the right */
    close_to("c", p.c, 0.3, 0);
    th_flow_at(flow, 2.385 / 2, &p);
    close_to("c", p.c, 1.25, 0);
    th_flow_eval(flow, -1, 0, &p);
    close_to("c", p.c, 1.0, 0);
    th_flow_destroy(flow);
    /* No horizon is needed, and equal sound speeds are a uniform flow. */
    setup = setup_of("step", open_ends, "speed", 0.75, "sound_upstream", 1.0, "sound_pocket", 1.0,
                     "sound_downstream", 1.0, "gap", 2.385, NULL);
    flow = build(&setup);
    (void)th_flow_horizons(flow, &n);
    assert_int_equal(n, 0);
    th_flow_destroy(flow);
    /* A pocket at exactly v = c is sonic: no horizon, no NaN. */
    setup = setup_of("step", open_ends, "speed", 1.0, "sound_upstream", 1.5, "sound_pocket", 1.0,
                     "sound_downstream", 1.5, "gap", 2.385, NULL);
    flow = build(&setup);
    (void)th_flow_horizons(flow, &n);
    assert_int_equal(n, 0);
    th_flow_destroy(flow);
}

/* ---- rings and walls ------------------------------------------------------------------------ */

static void test_ring(void **state)
{
    const th_ends ring = {.kind = TH_ENDS_RING, .circumference = 50, .winding = 8};
    const double v = 2 * pi * 8 / 50;
    th_flow_setup setup[3] = {setup_of("step", ring, "sound_upstream", 1.4, "sound_pocket", 0.6,
                                       "sound_downstream", 1.4, "gap", 9.0, NULL),
                              setup_of("tanh", ring, "sound_upstream", 1.4, "sound_pocket", 0.6,
                                       "sound_downstream", 1.4, "width_black", 0.5, "width_white",
                                       0.5, "gap", 9.0, NULL),
                              setup_of("sech", ring, "sound_upstream", 1.4, "depth", 1.5, "width",
                                       1.2, "speed", v, NULL)};

    (void)state;
    for (int i = 0; i < 3; i++) {
        th_flow *flow = build(&setup[i]);
        const double *edge;
        th_flow_point p, q;
        int n;

        edge = th_flow_edges(flow, &n);
        close_to("left", edge[0], -25, 0);
        close_to("right", edge[n - 1], 25, 0);
        close_to("flux", th_flow_flux(flow), v, 1e-15);
        for (int j = 0; j < n - 1; j++) { /* an edge belongs to the piece on its right */
            th_flow_at(flow, edge[j], &p);
            th_flow_eval(flow, j, edge[j], &q);
            assert_memory_equal(&p, &q, sizeof p);
        }
        th_flow_at(flow, edge[n - 1], &p);
        th_flow_eval(flow, 0, edge[0], &q);
        assert_memory_equal(&p, &q, sizeof p);
        (void)th_flow_horizons(flow, &n);
        assert_int_equal(n, 2);
        for (double x = -24; x < 25; x += 0.77) { /* wrapped both ways */
            th_flow_at(flow, x, &p);
            th_flow_at(flow, x + 3 * 50, &q);
            close_to("wrap", q.c, p.c, 1e-12);
            th_flow_at(flow, x - 2 * 50, &q);
            close_to("wrap", q.c, p.c, 1e-12);
        }
        assert_int_equal(th_flow_ends(flow).winding, 8);
        th_flow_destroy(flow);
    }
    /* Tails that reach the seam but are negligible there: no uniform rest outside. */
    setup[2] = setup_of("sech", ring, "sound_upstream", 1.4, "depth", 1.5, "width", 1.6, NULL);
    setup[1] =
        setup_of("tanh", ring, "sound_upstream", 1.4, "sound_pocket", 0.6, "sound_downstream", 1.4,
                 "width_black", 0.5, "width_white", 0.5, "gap", 34.0, NULL);
    for (int i = 1; i < 3; i++) {
        th_flow *flow = build(&setup[i]);

        assert_int_equal(th_flow_pieces(flow), i == 1 ? 3 : 1); /* tanh has a plateau */
        assert_false(th_flow_piece_uniform(flow, 0));
        th_flow_destroy(flow);
    }
    { /* A speed given to ten digits becomes exact. */
        th_flow *flow;

        setup[0] = setup_of("step", ring, "sound_upstream", 1.4, "sound_pocket", 0.6,
                            "sound_downstream", 1.4, "gap", 9.0, "speed", v * (1 + 5e-10), NULL);
        flow = build(&setup[0]);
        close_to("flux", th_flow_flux(flow), v, 1e-15);
        th_flow_destroy(flow);
    }
}

static void test_walls(void **state)
{
    const double pad = 3.25;

    (void)state;
    for (int which = 0; which < 4; which++) {
        uint64_t seed = 5;
        th_flow_setup setup = sample_setup(which, &seed);
        th_flow *open = build(&setup), *bare, *padded;
        const double *e, *f, *g;
        th_flow_point p, q;
        int n, m, k;

        setup.ends = (th_ends){.kind = TH_ENDS_WALLS};
        bare = build(&setup);
        setup.ends.padding = pad;
        padded = build(&setup);
        e = th_flow_edges(open, &n);
        f = th_flow_edges(bare, &m);
        g = th_flow_edges(padded, &k);
        assert_int_equal(m, n);
        assert_int_equal(k, n + 2);
        for (int i = 0; i < n; i++) {
            close_to("edge", f[i], e[i], 0);
            close_to("edge", g[i + 1], e[i], 0);
        }
        close_to("wall", g[0], e[0] - pad, 0);
        close_to("wall", g[k - 1], e[n - 1] + pad, 0);
        assert_true(th_flow_piece_uniform(padded, 0));
        assert_true(th_flow_piece_uniform(padded, k - 2));
        for (double x = g[0]; x < g[k - 1]; x += (g[k - 1] - g[0]) / 77) {
            th_flow_at(open, x, &p);
            th_flow_at(padded, x, &q);
            assert_memory_equal(&p, &q, sizeof p);
        }
        th_flow_at(padded, g[k - 1] + 100, &p);
        th_flow_at(open, g[k - 1] + 100, &q);
        close_to("beyond the wall", p.c, q.c, 0);
        th_flow_destroy(open);
        th_flow_destroy(bare);
        th_flow_destroy(padded);
    }
    { /* Between bare walls at its jumps a step is its pocket alone. */
        uint64_t seed = 5;
        th_flow_setup setup = sample_setup(0, &seed);
        th_flow *flow;
        th_flow_point p;
        int n;

        setup.ends = (th_ends){.kind = TH_ENDS_WALLS};
        flow = build(&setup);
        (void)th_flow_horizons(flow, &n);
        assert_int_equal(n, 0);
        th_flow_at(flow, 1e3, &p);
        close_to("at the wall", p.c, setup.value[2], 0);
        th_flow_destroy(flow);
    }
}

/* ---- errors of setups ----------------------------------------------------------------------- */

static void test_setup_errors(void **state)
{
    const th_ends ring = {.kind = TH_ENDS_RING, .circumference = 50, .winding = 8};
    th_flow_setup good = tanh_setup(1, 1.5, 0.5, 1.4, 0.5, 0.7, 8), bad;
    th_flow *flow = NULL;
    th_error err = {0};

    (void)state;
    /* every key of every shape: missing, zero, negative, infinite, NaN */
    for (int which = 0; which < 4; which++) {
        uint64_t seed = 17;
        th_flow_setup base = sample_setup(which, &seed);

        for (int i = 0; i < base.shape->keys; i++) {
            static const double wrong[4] = {0, -1, HUGE_VAL, NAN};
            const th_shape_key *key = &base.shape->key[i];

            assert_true(strlen(key->doc) > 5);
            bad = base;
            bad.given[i] = false;
            bad.value[i] = NAN; /* must not be looked at */
            if (key->si_only || key->optional)
                th_flow_destroy(build(&bad));
            else
                must_fail(&bad, key->key, "missing");
            for (int j = 0; j < 4; j++) {
                bad = base;
                bad.given[i] = true;
                bad.value[i] = wrong[j];
                must_fail(&bad, key->key, "want");
            }
        }
    }
    bad = setup_of("well", open_ends, "mach", 1.0, "gap", 2.0, NULL);
    must_fail(&bad, "mach", "< 1");
    bad = good;
    bad.density = 0;
    must_fail(&bad, "density", "density = 0");
    bad.density = HUGE_VAL;
    must_fail(&bad, "density", "density");
    bad = good;
    bad.ends = (th_ends){.kind = (th_ends_kind)7};
    must_fail(&bad, "kind", "7");
    bad.ends = (th_ends){.kind = TH_ENDS_WALLS, .padding = -1};
    must_fail(&bad, "padding", "-1");
    bad.ends.padding = 1e-30;
    must_fail(&bad, "padding", "vanishes");
    bad.ends = (th_ends){.kind = TH_ENDS_RING, .circumference = 0, .winding = 8};
    must_fail(&bad, "circumference", "= 0");
    bad.ends = (th_ends){.kind = TH_ENDS_RING, .circumference = 50, .winding = 0};
    must_fail(&bad, "winding", "= 0");

    /* tanh: speed outside an edge */
    bad = tanh_setup(1, 0.9, 0.5, 1.4, 0.5, 0.7, 8);
    must_fail(&bad, "speed", "sound_upstream = 0.9");
    bad = tanh_setup(1, 1.5, 0.5, 0.9, 0.5, 0.7, 8);
    must_fail(&bad, "speed", "sound_downstream = 0.9");
    bad = tanh_setup(1, 1.5, 1.0, 1.4, 0.5, 0.7, 8);
    must_fail(&bad, "speed", "sound_pocket = 1");
    bad = tanh_setup(1, 1.0, 0.5, 1.4, 0.5, 0.7, 8);
    must_fail(&bad, "speed", "sound_upstream = 1");
    /* tanh: a subsonic island whose edges overlap to c < 0 */
    bad = tanh_setup(0.41, 0.4, 1.5, 0.4, 0.5, 0.5, 0.001);
    must_fail(&bad, "gap", "overlap");

    bad = setup_of("sech", open_ends, "speed", 1.0, "sound_upstream", 1.5, "depth", 2.25, "width",
                   1.0, NULL);
    must_fail(&bad, "depth", "2.25");

    bad = setup_of("well", ring, "mach", 0.5, "gap", 2.0, NULL);
    must_fail(&bad, "kind", "ring");
    bad = setup_of("step", ring, "sound_upstream", 1.4, "sound_pocket", 0.6, "sound_downstream",
                   1.5, "gap", 9.0, NULL);
    must_fail(&bad, "sound_downstream", "1.5");
    bad = setup_of("step", ring, "sound_upstream", 1.4, "sound_pocket", 0.6, "sound_downstream",
                   1.4, "gap", 50.0, NULL);
    must_fail(&bad, "gap", "fit");
    bad = setup_of("step", ring, "sound_upstream", 1.4, "sound_pocket", 0.6, "sound_downstream",
                   1.4, "gap", 9.0, "speed", 1.0, NULL);
    must_fail(&bad, "speed", "winding");
    bad = setup_of("tanh", ring, "sound_upstream", 1.4, "sound_pocket", 0.6, "sound_downstream",
                   1.4, "gap", 48.0, "width_black", 0.5, "width_white", 0.5, NULL);
    must_fail(&bad, "circumference", "seam");
    bad = setup_of("tanh", ring, "sound_upstream", 1.006, "sound_pocket", 0.1, "sound_downstream",
                   1.006, "gap", 49.0, "width_black", 3.0, "width_white", 3.0, NULL);
    must_fail(&bad, "circumference", "seam");
    bad = setup_of("tanh", ring, "sound_upstream", 9.0, "sound_pocket", 1.0, "sound_downstream",
                   9.0, "gap", 49.0, "width_black", 3.0, "width_white", 3.0, NULL);
    must_fail(&bad, "gap", "fit");
    bad = setup_of("sech", ring, "sound_upstream", 1.4, "depth", 1.5, "width", 3.0, NULL);
    must_fail(&bad, "circumference", "seam");

    bad = good;
    bad.shape = NULL;
    assert_int_equal(th_flow_build(&bad, &flow, &err), TH_EINVAL);
    assert_int_equal(th_flow_build(NULL, &flow, &err), TH_EINVAL);
    assert_int_equal(th_flow_build(&good, NULL, &err), TH_EINVAL);
}

static void test_table(void **state)
{
    static const char *const name[] = {"step", "tanh", "sech", "well", "barriers"};

    (void)state;
    for (size_t i = 0; i < sizeof name / sizeof name[0]; i++)
        assert_non_null(th_shape_find(name[i]));
    for (int i = 0; i < th_shape_count(); i++) {
        const th_shape *s = th_shape_at(i);

        assert_ptr_equal(th_shape_find(s->name), s);
        assert_true(s->keys <= TH_SHAPE_KEYS_MAX);
        assert_true(strlen(s->doc) > 5);
    }
    assert_null(th_shape_at(-1));
    assert_null(th_shape_at(th_shape_count()));
    assert_null(th_shape_find("no such shape"));
    assert_null(th_shape_find(NULL));
    th_flow_destroy(NULL);
}

/* ---- callbacks ------------------------------------------------------------------------------ */

/* c = c0 + bump(x) for various bumps; n = v = 1 unless spoilt. */
typedef struct {
    double c0, a, x0, w; /* c = c0 - a exp(-((x - x0)/w)^2) */
    double end_slope;    /* dc at every point, for a flow that does not become uniform */
    double n, v, period;
    double flux_slope; /* n grows by this per length while v stays */
    int released;
} bump;

static void bump_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    const bump *b = ctx;
    double y = x - b->x0, e;

    (void)piece;
    if (b->period > 0)
        y -= b->period * floor(y / b->period + 0.5);
    e = b->a * exp(-y * y / (b->w * b->w));
    *p = (th_flow_point){.n = b->n + b->flux_slope * x, .v = b->v};
    p->c = b->c0 - e + b->end_slope * x;
    p->dc = 2 * y / (b->w * b->w) * e + b->end_slope;
}

static void bump_release(void *ctx)
{
    ((bump *)ctx)->released++;
}

static const bump plain = {.c0 = 1.5, .a = 1, .x0 = 0.3, .w = 1, .n = 1, .v = 1};
static const double ten[2] = {-10, 10};

static th_flow_spec bump_spec(bump *b)
{
    return (th_flow_spec){
        .eval = bump_eval, .release = bump_release, .ctx = b, .pieces = 1, .edge = ten};
}

static void create_fails(const th_flow_spec *spec, const th_ends *ends, const char *key,
                         const char *word)
{
    th_flow *flow = (th_flow *)&open_ends;
    th_error err = {0};

    assert_int_equal(th_flow_create(spec, ends, &flow, &err), TH_EINVAL);
    assert_null(flow);
    assert_string_equal(err.key, key);
    if (strstr(err.text, word) == NULL)
        fail_msg("\"%s\" does not say \"%s\"", err.text, word);
    if (spec->ctx != NULL)
        assert_int_equal(((bump *)spec->ctx)->released, 0);
}

static void test_callback(void **state)
{
    bump b = plain;
    th_flow_spec spec = bump_spec(&b);
    th_flow *flow = NULL;
    const th_horizon *h;
    int n;

    (void)state;
    assert_int_equal(th_flow_create(&spec, &open_ends, &flow, NULL), TH_OK);
    h = th_flow_horizons(flow, &n);
    assert_int_equal(n, 2);
    /* 1.5 - exp(-y^2) = 1 at y^2 = ln 2; slope there 2 y/2 */
    close_to("black", h[0].x, 0.3 - sqrt(log(2)), 1e-14);
    close_to("white", h[1].x, 0.3 + sqrt(log(2)), 1e-14);
    close_to("kappa", h[0].kappa, sqrt(log(2)), 1e-14);
    close_to("scale", th_flow_sound_max(flow), 1.5, 1e-15);
    assert_int_equal(b.released, 0);
    th_flow_destroy(flow);
    assert_int_equal(b.released, 1);
    spec.release = NULL;
    assert_int_equal(th_flow_create(&spec, &open_ends, &flow, NULL), TH_OK);
    th_flow_destroy(flow);
}

/* A dip of c too narrow for even samples: found through its feature. A dip that crosses v = c only
 * between two samples: found by its peak. One that only touches: no horizon. */
static void test_hidden_dips(void **state)
{
    static const double width[4] = {1e-2, 1e-4, 1e-6, 1e-9};

    (void)state;
    for (int i = 0; i < 4; i++) {
        bump b = plain;
        th_feature f = {.x = 0.3, .width = width[i]};
        th_flow_spec spec = bump_spec(&b);
        th_flow *flow = NULL;
        const th_horizon *h;
        int n;

        b.w = width[i];
        spec.features = 1;
        spec.feature = &f;
        assert_int_equal(th_flow_create(&spec, &open_ends, &flow, NULL), TH_OK);
        h = th_flow_horizons(flow, &n);
        assert_int_equal(n, 2);
        /* x near 0.3 is known to a rounding of 0.3 */
        close_to("white", h[1].x, 0.3 + width[i] * sqrt(log(2)), 1e-14 * width[i] + 1e-16);
        th_flow_destroy(flow);
    }
    for (int i = 0; i < 3; i++) {
        static const double over[3] = {1e-6, 1e-11, 0};
        bump b = plain;
        th_flow_spec spec = bump_spec(&b);
        th_flow *flow = NULL;
        const th_pocket *p;
        int n;

        b.a = 0.5 + over[i]; /* c = v - over at the bottom */
        b.x0 = 0.1234;
        assert_int_equal(th_flow_create(&spec, &open_ends, &flow, NULL), TH_OK);
        p = th_flow_pockets(flow, &n);
        assert_int_equal(n, over[i] > 0 ? 1 : 0);
        if (n == 1) { /* half width sqrt(ln(a/0.5)) = sqrt(2 over) */
            close_to("pocket", (p->right - p->left) / (2 * sqrt(2 * over[i])), 1, 1e-3);
            close_to("mach", (p->mach - 1) / over[i], 1, 1e-4);
        }
        th_flow_destroy(flow);
    }
}

/* Three pieces: subsonic, exactly sonic, supersonic, and back; kinks instead of jumps. */
static void layer_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    static const double edge[6] = {-5, -2, -1, 1, 2, 5};
    double d = 0, slope = 0;

    (void)ctx;
    if (piece == 2) { /* parabola through 0 at -1 and 1 */
        d = 0.3 * (x * x - 1);
        slope = 0.6 * x;
    } else if (piece == 0 || piece == 4) {
        double y = piece == 0 ? x - edge[1] : x - edge[4], e = exp(-y * y * 9);

        d = 0.5 * (1 - e);
        slope = 9 * y * e;
    } else if (piece < 0 || piece > 4) {
        d = 0.5;
    }
    *p = (th_flow_point){.n = 2, .v = 1.1, .c = 1.1 + d, .dc = slope};
}

static void test_sonic_layer(void **state)
{
    static const double edge[6] = {-5, -2, -1, 1, 2, 5};
    th_flow_spec spec = {.eval = layer_eval, .pieces = 5, .edge = edge};
    th_flow *flow = NULL;
    const th_horizon *h;
    const th_pocket *p;
    int n;

    (void)state;
    assert_int_equal(th_flow_create(&spec, &open_ends, &flow, NULL), TH_OK);
    h = th_flow_horizons(flow, &n);
    assert_int_equal(n, 2); /* where the supersonic side begins */
    close_to("black", h[0].x, -1, 1e-14);
    close_to("white", h[1].x, 1, 1e-14);
    close_to("kappa", h[0].kappa, 0.6, 1e-13);
    assert_false(h[0].sharp);
    p = th_flow_pockets(flow, &n);
    assert_int_equal(n, 1);
    close_to("mach", p->mach, 1.1 / 0.8, 1e-14);
    th_flow_destroy(flow);
}

/* A pocket across the seam of a ring, and one whose horizon is the seam. */
static void test_ring_seam(void **state)
{
    const th_ends ring = {.kind = TH_ENDS_RING, .circumference = 20, .winding = 3};
    bump b = plain;
    th_feature f = {.x = 9.8, .width = 1};
    th_flow_spec spec = bump_spec(&b);
    th_flow *flow = NULL;
    const th_horizon *h;
    const th_pocket *p;
    int n;

    (void)state;
    b.x0 = 9.8;
    b.v = 2 * pi * 3 / 20;
    b.period = 20;
    spec.features = 1;
    spec.feature = &f;
    assert_int_equal(th_flow_create(&spec, &ring, &flow, NULL), TH_OK);
    h = th_flow_horizons(flow, &n);
    assert_int_equal(n, 2);
    assert_int_equal(h[0].kind, TH_HORIZON_WHITE);
    assert_int_equal(h[1].kind, TH_HORIZON_BLACK);
    p = th_flow_pockets(flow, &n);
    assert_int_equal(n, 1);
    close_to("left", p->left, 9.8 - sqrt(-log(1.5 - b.v)), 1e-13);
    close_to("right", p->right, 9.8 + sqrt(-log(1.5 - b.v)), 1e-13);
    close_to("mach", p->mach, b.v / 0.5, 1e-13);
    close_to("distance", th_flow_horizon_distance(flow), p->right - p->left, 0);
    th_flow_destroy(flow);
    { /* c falls along the ring and jumps back at the seam: a sharp white-hole horizon there */
        bump s = {.c0 = 1, .end_slope = -0.02, .w = 1, .n = 1, .v = 2 * pi * 3 / 20};

        spec = bump_spec(&s);
        assert_int_equal(th_flow_create(&spec, &ring, &flow, NULL), TH_OK);
        h = th_flow_horizons(flow, &n);
        assert_int_equal(n, 2);
        assert_int_equal(h[0].kind, TH_HORIZON_BLACK);
        close_to("black", h[0].x, (1 - s.v) / 0.02, 1e-12);
        close_to("kappa", h[0].kappa, 0.02, 1e-15);
        assert_true(h[1].sharp);
        close_to("white", h[1].x, 10, 0);
        p = th_flow_pockets(flow, &n);
        assert_int_equal(n, 1);
        close_to("right", p->right, 10, 0);
        close_to("mach", p->mach, s.v / 0.8, 1e-14);
        th_flow_destroy(flow);
    }
    { /* a narrow dip just beyond the seam, its feature named on this side */
        f = (th_feature){.x = 10.002, .width = 1e-4};
        b.x0 = 10.002;
        b.w = 1e-4;
        spec = bump_spec(&b);
        spec.features = 1;
        spec.feature = &f;
        assert_int_equal(th_flow_create(&spec, &ring, &flow, NULL), TH_OK);
        p = th_flow_pockets(flow, &n);
        assert_int_equal(n, 1);
        close_to("left", p->left, -9.998 - 1e-4 * sqrt(-log(1.5 - b.v)), 1e-13);
        th_flow_destroy(flow);
    }
    b = plain;
    b.period = 20;
    spec = bump_spec(&b);
    b.v = 2 * pi * 3 / 20 * (1 + 3e-9);
    create_fails(&spec, &ring, "winding", "want 2 pi x winding");
    b.v = 2 * pi * 3 / 20 * (1 + 3e-10);
    assert_int_equal(th_flow_create(&spec, &ring, &flow, NULL), TH_OK);
    th_flow_destroy(flow);
    {
        th_ends other = ring;

        other.circumference = 20.0001;
        b.released = 0;
        create_fails(&spec, &other, "circumference", "span 20");
    }
}

/* v = v0 (1 + 0.3 exp(-((x - 0.777)/w)^2)), n = 1/v: the closed integral over the length l is
 * v0 (l + 0.3 w sqrt pi), exact to rounding while w is far below l. */
typedef struct {
    double v0, w;
} surge;

static void surge_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    const surge *s = ctx;
    double y = (x - 0.777) / s->w, e = 0.3 * exp(-y * y);

    (void)piece;
    p->v = s->v0 * (1 + e);
    p->dv = -2 * y / s->w * s->v0 * e;
    p->n = 1 / p->v;
    p->dn = -p->n * p->dv / p->v;
    p->ddn = 0; /* not looked at here */
    p->c = 3 * s->v0;
    p->dc = 0;
}

static void test_ring_integral(void **state)
{
    static const double width[4] = {0.6, 0.1, 0.02, 0.01};

    (void)state;
    for (int i = 0; i < 4; i++) {
        const double length = 12.5, edge[3] = {-6.25, 1, 6.25}, w = width[i];
        const th_ends ring = {.kind = TH_ENDS_RING, .circumference = length, .winding = 5};
        surge s = {.v0 = 2 * pi * 5 / (length + 0.3 * w * sqrt(pi)), .w = w};
        th_flow_spec spec = {.eval = surge_eval, .ctx = &s, .pieces = 2, .edge = edge};
        th_flow *flow = NULL;

        assert_int_equal(th_flow_create(&spec, &ring, &flow, NULL), TH_OK);
        th_flow_destroy(flow);
        s.v0 *= 1 + 1e-8;
        assert_int_equal(th_flow_create(&spec, &ring, &flow, NULL), TH_EINVAL);
    }
}

static void test_callback_errors(void **state)
{
    static const double falling[3] = {-10, 11, 10}, infinite[2] = {-10, HUGE_VAL};
    const th_ends walls = {.kind = TH_ENDS_WALLS};
    bump b = plain;
    th_feature f = {.x = 0, .width = 0};
    th_flow_spec spec = bump_spec(&b), bad;
    th_flow *flow = NULL;

    (void)state;
    assert_int_equal(th_flow_create(NULL, &open_ends, &flow, NULL), TH_EINVAL);
    assert_int_equal(th_flow_create(&spec, NULL, &flow, NULL), TH_EINVAL);
    assert_int_equal(th_flow_create(&spec, &open_ends, NULL, NULL), TH_EINVAL);
    bad = spec;
    bad.eval = NULL;
    create_fails(&bad, &open_ends, "", "callback");
    bad = spec;
    bad.edge = NULL;
    create_fails(&bad, &open_ends, "", "edges");
    bad = spec;
    bad.pieces = 0;
    create_fails(&bad, &open_ends, "", "0 pieces");
    bad = spec;
    bad.pieces = 2;
    bad.edge = falling;
    create_fails(&bad, &open_ends, "", "edge 2 = 10");
    bad = spec;
    bad.edge = infinite;
    create_fails(&bad, &open_ends, "", "not finite");
    bad = spec;
    bad.features = 1;
    create_fails(&bad, &open_ends, "", "features");
    bad.feature = &f;
    create_fails(&bad, &open_ends, "", "width");
    f = (th_feature){.x = NAN, .width = 1};
    create_fails(&bad, &open_ends, "", "feature 0");
    bad.features = -1;
    create_fails(&bad, &open_ends, "", "-1 features");
    b = plain;
    b.a = 1.6;
    create_fails(&spec, &open_ends, "", "c = -");
    b = plain;
    b.n = NAN;
    create_fails(&spec, &open_ends, "", "n = nan");
    b = plain;
    b.v = HUGE_VAL;
    create_fails(&spec, &open_ends, "", "v = inf");
    b = plain;
    b.w = 1e-200; /* the slope overflows at the centre */
    b.x0 = 0;
    b.end_slope = NAN;
    create_fails(&spec, &open_ends, "", "c = nan");
    b = plain;
    b.flux_slope = 1e-9; /* n v changes by 1e-8 of itself at either end */
    create_fails(&spec, &open_ends, "", "constant");
    b.flux_slope = 4e-11;
    assert_int_equal(th_flow_create(&spec, &open_ends, &flow, NULL), TH_OK);
    th_flow_destroy(flow);
    b = plain;
    b.end_slope = 1e-9;
    create_fails(&spec, &open_ends, "", "not uniform at its left end");
    create_fails(&spec, &walls, "", "not uniform");
    b = plain;
    b.x0 = 6;
    create_fails(&spec, &open_ends, "", "not uniform at its right end");
}

/* Every allocation refused in turn: the status says so, nothing leaks and nothing is left behind.
 */
static void test_memory(void **state)
{
    const th_ends ring = {.kind = TH_ENDS_RING, .circumference = 50, .winding = 8};
    uint64_t seed = 8;

    (void)state;
    for (int which = 0; which < 5; which++) {
        th_flow_setup setup = sample_setup(which % 4, &seed);

        if (which == 4)
            setup = setup_of("tanh", ring, "sound_upstream", 1.4, "sound_pocket", 0.6,
                             "sound_downstream", 1.4, "width_black", 0.5, "width_white", 0.5, "gap",
                             9.0, NULL);
        for (long k = 0;; k++) {
            th_flow *flow = (th_flow *)&ring;
            th_error err = {0};
            th_status st;

            refuse_from(k);
            st = th_flow_build(&setup, &flow, &err);
            if (refuse_stop()) {
                assert_int_equal(st, TH_OK);
                assert_true(k > 5);
                th_flow_destroy(flow);
                break;
            }
            assert_int_equal(st, TH_ENOMEM);
            assert_null(flow);
            assert_int_equal(err.status, TH_ENOMEM);
        }
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_tanh_horizons), cmocka_unit_test(test_tanh_formula),
        cmocka_unit_test(test_tanh_tails),    cmocka_unit_test(test_tanh_single_horizon),
        cmocka_unit_test(test_tanh_plateau),  cmocka_unit_test(test_well_potential),
        cmocka_unit_test(test_well_horizons), cmocka_unit_test(test_well_slow),
        cmocka_unit_test(test_derivatives),   cmocka_unit_test(test_band_top),
        cmocka_unit_test(test_scaling),       cmocka_unit_test(test_step),
        cmocka_unit_test(test_ring),          cmocka_unit_test(test_walls),
        cmocka_unit_test(test_setup_errors),  cmocka_unit_test(test_table),
        cmocka_unit_test(test_callback),      cmocka_unit_test(test_hidden_dips),
        cmocka_unit_test(test_sonic_layer),   cmocka_unit_test(test_ring_seam),
        cmocka_unit_test(test_ring_integral), cmocka_unit_test(test_callback_errors),
        cmocka_unit_test(test_memory),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
