/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of the matching function: analytic, its derivative, its symmetry, its zeros, long and
 * steep flows, errors.
 *
 * Known zeros: "40 digits" were found with mpmath in that precision from the 8 x 8 determinant of
 * plane waves that match at the two steps, below the real axis with outgoing waves followed there;
 * "matching" as in the head of tests/test_modes.c: another integrator of the same equations. */
#include <complex.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <cmocka.h>

#include "flows.h"
#include "refuse.h"
#include "twinhorizon/matching.h"

static th_matching *prepare(const th_flow *flow, th_matching_grain grain)
{
    th_matching *m = NULL;
    th_error err = {0};

    if (th_matching_create(flow, th_flow_band_limit(flow), grain, &m, &err) != TH_OK)
        fail_msg("%s", err.text);
    return m;
}

static th_matching_value evaluate(const th_matching *m, double complex omega, bool slope)
{
    th_matching_value f;
    th_error err = {0};

    if (th_matching_eval(m, creal(omega), cimag(omega), slope, &f, &err) != TH_OK)
        fail_msg("omega = %g%+gi: %s", creal(omega), cimag(omega), err.text);
    assert_true(isfinite(f.re) && isfinite(f.im));
    return f;
}

/* F over 2^exponent. */
static double complex value_at(const th_matching_value *f, long exponent)
{
    assert_true(labs(f->exponent - exponent) < 900);
    return (f->re + I * f->im) * ldexp(1.0, (int)(f->exponent - exponent));
}

static double complex slope_at(const th_matching_value *f, long exponent)
{
    assert_true(labs(f->exponent - exponent) < 900);
    return (f->slope_re + I * f->slope_im) * ldexp(1.0, (int)(f->exponent - exponent));
}

/* ---- flows of every kind -------------------------------------------------------------------- */

enum { FLOWS = 9 };

static th_flow *flow_number(int i, const char **name)
{
    static const char *const names[FLOWS] = {"step",          "steep tanh", "tanh",
                                             "sech",          "well",       "single white horizon",
                                             "ring of tanhs", "walls",      "bumpy density"};
    static const double steep[7] = {0.9, 1.3, 0.4, 1.7, 0.02, 0.05, 5};
    static const double tanhs[7] = {1, 1.5, 0.5, 1.5, 0.5, 0.5, 8};
    static const double sech[4] = {0.9, 1.2, 0.9, 2.385}, well[3] = {1, 0.6, 1.5};
    static const double white[7] = {1, 0.5, 0.5, 1.5, 0.5, 0.7, 4};
    static const double around[7] = {0, 1.4, 0.6, 1.4, 0.5, 0.5, 10};

    *name = names[i];
    switch (i) {
    case 0:
        return step_flow(0.75, 1, 0.3, 1, 5);
    case 1:
        return flow_of("tanh", open_ends(), steep);
    case 2:
        return flow_of("tanh", open_ends(), tanhs);
    case 3:
        return flow_of("sech", open_ends(), sech);
    case 4:
        return flow_of("well", open_ends(), well);
    case 5:
        return flow_of("tanh", open_ends(), white);
    case 6:
        return flow_of("tanh", ring(50, 8), around);
    case 7:
        return flow_of("tanh", walls(7), tanhs);
    default:
        return bumpy_flow(open_ends());
    }
}

/* Frequencies inside the region where modes grow, on the real axis and below it. */
static const double complex place[] = {0.11 + 0.04 * I,  0.03 + 0.3 * I, 0.21,
                                       0.07 - 0.004 * I, 0.15 * I,       0.5 + 0.01 * I};
enum { PLACES = sizeof place / sizeof place[0], CIRCLE = 16 };

/* F on a circle, over a common power of two. */
static long circle(const th_matching *m, double complex centre, double radius,
                   double complex f[CIRCLE])
{
    long exponent = 0;

    for (int q = 0; q < CIRCLE; q++) {
        const th_matching_value v =
            evaluate(m, centre + radius * cexp(2 * pi * I * (q + 0.3) / CIRCLE), false);

        if (q == 0)
            exponent = v.exponent;
        f[q] = value_at(&v, exponent);
    }
    return exponent;
}

/* The mean of an analytic function over a circle is its value at the centre, and the mean of F
 * e^{-i theta}/r its derivative there (Cauchy): 16 points leave the term r^16 of the series. That
 * fails when F is not analytic, and when the derivative that it computes itself is not F's. */
static void expect_analytic(const char *name, const th_matching *m, double complex centre,
                            double radius)
{
    double complex f[CIRCLE], mean = 0, slope = 0;
    const long exponent = circle(m, centre, radius, f);
    const th_matching_value at = evaluate(m, centre, true);
    const double complex value = value_at(&at, exponent), change = slope_at(&at, exponent);
    double size = 0;

    for (int q = 0; q < CIRCLE; q++) {
        const double complex turn = cexp(2 * pi * I * (q + 0.3) / CIRCLE);

        mean += f[q] / CIRCLE;
        slope += f[q] / (turn * radius * CIRCLE);
        size = fmax(size, cabs(f[q]));
    }
    if (!(cabs(mean - value) <= 1e-12 * size))
        fail_msg("%s, omega = %g%+gi: mean over a circle of %g is off by %.2g", name, creal(centre),
                 cimag(centre), radius, cabs(mean - value) / size);
    if (!(cabs(slope - change) <= 1e-10 * fmax(cabs(change), size)))
        fail_msg("%s, omega = %g%+gi: F' = %.15g%+.15gi, contour %.15g%+.15gi", name, creal(centre),
                 cimag(centre), creal(change), cimag(change), creal(slope), cimag(slope));
}

static void test_analytic(void **state)
{
    (void)state;
    for (int i = 0; i < FLOWS; i++) {
        const char *name;
        th_flow *flow = flow_number(i, &name);
        th_matching *m = prepare(flow, TH_MATCHING_USUAL);

        for (int p = 0; p < PLACES; p++)
            expect_analytic(name, m, place[p], 0.01);
        th_matching_destroy(m);
        th_flow_destroy(flow);
    }
}

/* Where two outgoing wave numbers coincide, d omega/d k = 0, the pair of end vectors does not, and
 * F has no branch point. k = i kappa, with kappa^2 = 2 (c^2 - v^2/4 -+ sqrt(v^4/16 + v^2 c^2/2)),
 * omega = i (v kappa -+ sqrt(c^2 kappa^2 - kappa^4/4)): closed form, differentiated dispersion
 * relation. */
static void test_branch_points(void **state)
{
    const double v = 0.75, c = 1, root = sqrt(v * v * v * v / 16 + v * v * c * c / 2);
    th_flow *flow = step_flow(v, c, 0.3, c, 2);
    th_matching *m = NULL;
    int tried = 0;

    (void)state;
    assert_int_equal(th_matching_create(flow, 3, TH_MATCHING_USUAL, &m, NULL), TH_OK);
    for (int sign = -1; sign <= 1; sign += 2)
        for (int branch = -1; branch <= 1; branch += 2) {
            const double kappa = sqrt(2 * (c * c - v * v / 4 + sign * root));
            const double omega =
                v * kappa + branch * sqrt(c * c * kappa * kappa - pow(kappa, 4) / 4);

            if (omega <= 0) /* growing side only: a decaying pair may be cut */
                continue;
            expect_analytic("branch point", m, omega * I, 0.02);
            tried++;
        }
    assert_int_equal(tried, 3);
    th_matching_destroy(m);
    th_flow_destroy(flow);
}

/* The flow is real: F(-omega*) is F(omega)* up to one constant. */
static void test_mirror(void **state)
{
    (void)state;
    for (int i = 0; i < FLOWS; i++) {
        const char *name;
        th_flow *flow = flow_number(i, &name);
        th_matching *m = prepare(flow, TH_MATCHING_USUAL);
        double complex constant = 0;

        for (int p = 0; p < PLACES; p++) {
            const th_matching_value f = evaluate(m, place[p], false);
            const th_matching_value g = evaluate(m, -conj(place[p]), false);
            const double complex ratio = value_at(&g, f.exponent) / conj(value_at(&f, f.exponent));

            if (p == 0)
                constant = ratio;
            if (!(cabs(ratio - constant) <= 1e-11))
                fail_msg("%s, omega = %g%+gi: F(-omega*)/F(omega)* = %g%+gi, elsewhere %g%+gi",
                         name, creal(place[p]), cimag(place[p]), creal(ratio), cimag(ratio),
                         creal(constant), cimag(constant));
        }
        assert_true(fabs(cabs(constant) - 1) < 1e-11);
        th_matching_destroy(m);
        th_flow_destroy(flow);
    }
}

/* Ends that conserve energy: F(omega*) is F(omega)* up to one constant, too. */
static void test_conserving(void **state)
{
    (void)state;
    for (int i = 6; i <= 7; i++) {
        const char *name;
        th_flow *flow = flow_number(i, &name);
        th_matching *m = prepare(flow, TH_MATCHING_USUAL);
        double complex constant = 0;

        for (int p = 0; p < 2; p++) {
            const th_matching_value f = evaluate(m, place[p], false);
            const th_matching_value g = evaluate(m, conj(place[p]), false);
            const double complex ratio = value_at(&g, f.exponent) / conj(value_at(&f, f.exponent));

            if (p == 0)
                constant = ratio;
            assert_true(cabs(ratio - constant) < 1e-11);
        }
        th_matching_destroy(m);
        th_flow_destroy(flow);
    }
}

/* ---- long and steep flows ------------------------------------------------------------------- */

/* Usual and fine steps give one F to 1e-12, or one that differs by what a change of omega by the
 * share `moves` would do: long flows turn rounding of omega into much. */
static void expect_grains_agree(const char *name, th_flow *flow, double moves)
{
    th_matching *usual = prepare(flow, TH_MATCHING_USUAL), *fine = prepare(flow, TH_MATCHING_FINE);

    for (int p = 0; p < PLACES; p++) {
        const th_matching_value f = evaluate(usual, place[p], true);
        const th_matching_value g = evaluate(fine, place[p], true);
        const double complex a = value_at(&f, f.exponent), b = value_at(&g, f.exponent);
        const double moved = cabs(slope_at(&f, f.exponent)) * cabs(place[p]);

        if (!(cabs(a - b) <= fmax(1e-12 * cabs(a), moves * moved)))
            fail_msg("%s, omega = %g%+gi: F = %.17g%+.17gi, finer %.17g%+.17gi, F' omega = %g",
                     name, creal(place[p]), cimag(place[p]), creal(a), cimag(a), creal(b), cimag(b),
                     moved);
    }
    th_matching_destroy(usual);
    th_matching_destroy(fine);
    th_flow_destroy(flow);
}

static void test_grains(void **state)
{
    (void)state;
    for (int i = 0; i < FLOWS; i++) {
        const char *name;
        th_flow *flow = flow_number(i, &name);

        expect_grains_agree(name, flow, 1e-13);
    }
}

/* Solutions grow by e^(0.55 x) and more: without care e^100 and more. */
static void test_long(void **state)
{
    static const double tanhs[7] = {1, 1.5, 0.5, 1.5, 0.5, 0.5, 133};
    static const double around[7] = {0, 1.4, 0.6, 1.4, 0.5, 0.5, 133};
    static const double boxed[5] = {0.75, 1, 0.3, 1, 12};

    (void)state;
    expect_grains_agree("pocket of 200 healing lengths", step_flow(0.75, 1, 0.3, 1, 667), 1e-13);
    expect_grains_agree("smooth pocket of 133", flow_of("tanh", open_ends(), tanhs), 1e-13);
    expect_grains_agree("walls 300 away", flow_of("step", walls(300), boxed), 1e-13);
    expect_grains_agree("ring of 400", flow_of("tanh", ring(400, 64), around), 1e-12);
}

/* ---- near omega = 0 ------------------------------------------------------------------------- */

/* F is finite and not zero at 0, so it hardly changes from omega = 1e-7 to 1e-6; and it can be
 * evaluated at any omega but 0 itself. */
static void test_near_zero(void **state)
{
    static const double tiny[] = {1e-12, 1e-20, 1e-100};

    (void)state;
    for (int i = 0; i < FLOWS; i++) {
        const char *name;
        th_flow *flow = flow_number(i, &name);
        th_matching *m = prepare(flow, TH_MATCHING_USUAL);
        const bool closed = th_flow_ends(flow).kind == TH_ENDS_RING;
        const double near = closed ? 1e-4 : 1e-7; /* F = E/omega^2: rounding over omega^2 */
        const th_matching_value a = evaluate(m, I * near, true);
        const th_matching_value b = evaluate(m, 3 * I * near, true);
        const double change = cabs(value_at(&b, a.exponent) / value_at(&a, a.exponent) - 1);

        if (i != 5 && !(change < 1e-2)) /* a supersonic end lets waves of any k through */
            fail_msg("%s: F changes by %.2g between omega = %g i and three times that", name,
                     change, near);
        for (int t = 0; t < 3; t++) {
            (void)evaluate(m, tiny[t], false);
            (void)evaluate(m, tiny[t] * I, false);
        }
        th_matching_destroy(m);
        th_flow_destroy(flow);
    }
}

/* ---- zeros ---------------------------------------------------------------------------------- */

typedef struct {
    double re, im, tolerance;
} known;

/* From starts that are off by the share `off`, in eight directions. */
static void expect_roots(th_flow *flow, double off_by, const known *root, int roots)
{
    th_matching *m = prepare(flow, TH_MATCHING_USUAL);

    for (int i = 0; i < roots; i++)
        for (int q = 0; q < 8; q++) {
            const double size = hypot(root[i].re, root[i].im);
            const double complex off = off_by * size * cexp(2 * pi * I * q / 8);
            double re = root[i].re + creal(off), im = root[i].im + cimag(off), last = 0;
            th_error err = {0};

            if (th_matching_polish(m, 0.3 * size, &re, &im, &last, &err) != TH_OK)
                fail_msg("%.10g%+.10gi: %s", root[i].re, root[i].im, err.text);
            if (!(hypot(re - root[i].re, im - root[i].im) <= root[i].tolerance))
                fail_msg("omega = %.17g%+.17gi, want %.17g%+.17gi to %g", re, im, root[i].re,
                         root[i].im, root[i].tolerance);
            assert_true(last <= 1e-13);
        }
    th_matching_destroy(m);
    th_flow_destroy(flow);
}

static void test_zeros(void **state)
{
    /* v = 0.75, c = 1/0.3/1, gaps 1 (a damped mode, below the real axis), 2 and 5: 40 digits */
    static const known damped[] = {{0, -0.0166079473127458488, 2e-16}};
    static const known two[] = {{0, 0.0682749416476971602636, 2e-16}};
    static const known five[] = {{0.080272981380962308203, 0.0339088600448695185373, 2e-16}};
    /* the rest: matching. v = 0.75, c = 1/0.3/1, gap 8 */
    static const known eight[] = {{0.1425184754244990769, 0.00688361317667655843, 1e-15},
                                  {0.01415674480432746583, 0.00192438844739335119, 1e-15}};
    /* v = 1, c = 1.5/0.5/1.5, gap 12 */
    static const known deep[] = {{0, 0.01416371444060713382, 1e-15},
                                 {0.18624455735398988056, 0.01090828558517528931, 1e-15},
                                 {0.26904626755097769817, 0.00221631049737058347, 1e-15},
                                 {0.07472227945991715223, 0.00198925014565305891, 1e-15}};
    static const known smooth[] = {{0.06647747114694470596, 0.03713458666473244461, 1e-14},
                                   {0.24076045708853563162, 0.00986066464679759396, 1e-14}};
    static const known well[] = {{0, 0.09896952583168150539, 1e-14},
                                 {0.6453735581719886289, 0.00243696234374789411, 1e-14}};
    static const known bumpy[] = {{0, 0.05765965368168101256, 1e-14}};
    static const known ring_of[] = {{0, 0.03095496562351406755, 1e-13},
                                    {0.1109274415056831485, 0.00835332075081360569, 1e-13},
                                    {0.19692730039258645303, 0, 1e-13}};
    static const double boxed[5] = {0.75, 1, 0.3, 1.1, 5};
    static const known box[] = {{0.08227255939210096827, 0.05274546148103256462, 1e-14}};
    const char *name;

    (void)state;
    expect_roots(step_flow(0.75, 1, 0.3, 1, 1), 0.03, damped, 1);
    expect_roots(step_flow(0.75, 1, 0.3, 1, 2), 0.03, two, 1);
    expect_roots(step_flow(0.75, 1, 0.3, 1, 5), 0.03, five, 1);
    expect_roots(step_flow(0.75, 1, 0.3, 1, 8), 0.03, eight, 2);
    expect_roots(step_flow(1, 1.5, 0.5, 1.5, 12), 0.03, deep, 4);
    expect_roots(flow_number(2, &name), 0.03, smooth, 2);
    expect_roots(flow_number(4, &name), 0.03, well, 2);
    expect_roots(flow_number(6, &name), 0.002, ring_of, 3); /* neighbours are near */
    expect_roots(flow_number(8, &name), 0.03, bumpy, 1);
    expect_roots(flow_of("step", walls(6), boxed), 0.03, box, 1);
}

/* At a gap L_0 where the first mode switches on, F(0) = 0: |F| falls with omega. L_0 is the
 * closed form of tests/test_index.c. */
static void test_switch_on(void **state)
{
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, 1.1146026466253018);
    th_matching *m = prepare(flow, TH_MATCHING_USUAL);
    const th_matching_value a = evaluate(m, 1e-5 * I, false), b = evaluate(m, 1e-4 * I, false);

    (void)state;
    close_to("F(1e-5 i)/F(1e-4 i)", cabs(value_at(&a, 0) / value_at(&b, 0)), 0.1, 1e-3);
    th_matching_destroy(m);
    th_flow_destroy(flow);
}

/* A root farther away than the reach is not taken; where there is none, it says so, and leaves the
 * guess as it was. */
static void test_polish(void **state)
{
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, 2);
    th_matching *m = prepare(flow, TH_MATCHING_USUAL);
    double re = 0.001, im = 0.06, last;
    th_error err = {0};

    (void)state;
    assert_int_equal(th_matching_polish(m, 0.005, &re, &im, &last, &err), TH_ECONVERGE);
    assert_non_null(strstr(err.text, "no root within 0.005"));
    assert_true(re == 0.001 && im == 0.06);
    assert_int_equal(th_matching_polish(m, 0.02, &re, &im, &last, &err), TH_OK);
    close_to("Im omega", im, 0.0682749416476971603, 1e-15);
    close_to("Re omega", re, 0, 1e-15);
    re = 0.3;
    im = 0.3; /* the only growing mode of this flow is 0.4 away */
    assert_int_equal(th_matching_polish(m, 0.2, &re, &im, &last, NULL), TH_ECONVERGE);
    th_matching_destroy(m);
    th_flow_destroy(flow);
}

/* ---- units, errors, memory ------------------------------------------------------------------ */

/* Frequencies scale as c^2 when lengths scale as 1/c. */
static void test_scaling(void **state)
{
    const double scale = 1234.5, value[5] = {0.75 * scale, scale, 0.3 * scale, scale, 5 / scale};
    th_flow *flow = flow_of("step", open_ends(), value);
    th_matching *m = prepare(flow, TH_MATCHING_USUAL);
    double re = 0.08 * scale * scale, im = 0.034 * scale * scale, last;

    (void)state;
    assert_int_equal(th_matching_polish(m, 0.1 * re, &re, &im, &last, NULL), TH_OK);
    close_to("Re omega", re / (scale * scale), 0.0802729813809623, 1e-15);
    close_to("Im omega", im / (scale * scale), 0.0339088600448695, 1e-15);
    expect_analytic("scaled", m, (0.11 + 0.04 * I) * scale * scale, 0.01 * scale * scale);
    th_matching_destroy(m);
    th_flow_destroy(flow);
}

/* Varies by half on 1e-14 without saying so. */
static void rough_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    (void)ctx;
    (void)piece;
    *p = (th_flow_point){.n = 1, .v = 0.5, .c = 1 + 0.5 * exp(-fabs(x - 0.123) * 1e14)};
}

static void test_errors(void **state)
{
    const double edge[2] = {-1, 1};
    const th_feature feature = {.x = 0.123, .width = 1e-14};
    const th_flow_spec rough = {
        .eval = rough_eval, .pieces = 1, .edge = edge, .features = 1, .feature = &feature};
    const th_ends open = open_ends();
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, 5), *spiky = NULL;
    th_matching *m = NULL;
    th_matching_value f;
    th_error err = {0};

    (void)state;
    assert_int_equal(th_matching_create(NULL, 1, TH_MATCHING_USUAL, &m, &err), TH_EINVAL);
    assert_int_equal(th_matching_create(flow, 1, TH_MATCHING_USUAL, NULL, &err), TH_EINVAL);
    assert_int_equal(th_matching_create(flow, 0, TH_MATCHING_USUAL, &m, &err), TH_EINVAL);
    assert_int_equal(th_matching_create(flow, NAN, TH_MATCHING_USUAL, &m, NULL), TH_EINVAL);
    assert_null(m);
    m = prepare(flow, TH_MATCHING_USUAL);
    assert_int_equal(th_matching_eval(m, 0, 0, true, &f, &err), TH_EINVAL);
    assert_int_equal(th_matching_eval(m, HUGE_VAL, 0, true, &f, &err), TH_EINVAL);
    assert_int_equal(th_matching_eval(m, 0, NAN, true, &f, &err), TH_EINVAL);
    assert_int_equal(th_matching_eval(m, 1e9, 1e9, true, &f, &err), TH_ECONVERGE);
    assert_non_null(strstr(err.text, "does not converge"));
    th_matching_destroy(m);
    th_matching_destroy(NULL);
    assert_int_equal(th_flow_create(&rough, &open, &spiky, &err), TH_OK);
    assert_int_equal(th_matching_create(spiky, 0.2, TH_MATCHING_USUAL, &m, &err), TH_ECONVERGE);
    assert_null(m);
    th_flow_destroy(spiky);
    th_flow_destroy(flow);
}

static void test_refused(void **state)
{
    const char *name;
    th_flow *flow = flow_number(2, &name);

    (void)state;
    for (long k = 0;; k++) {
        th_matching *m = NULL;
        th_error err = {0};
        th_status st;

        refuse_from(k);
        st = th_matching_create(flow, 0.3, TH_MATCHING_USUAL, &m, &err);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            assert_true(k >= 2);
            th_matching_destroy(m);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_null(m);
    }
    th_flow_destroy(flow);
}

/* Printed, not judged: machines differ. */
static void test_speed(void **state)
{
    (void)state;
    for (int i = 0; i < FLOWS; i++) {
        const char *name;
        th_flow *flow = flow_number(i, &name);
        th_matching *m = prepare(flow, TH_MATCHING_USUAL);
        const clock_t start = clock();
        int done = 0;

        while (clock() - start < CLOCKS_PER_SEC / 50 || done == 0)
            for (int p = 0; p < PLACES; p++, done++)
                (void)evaluate(m, place[p], true);
        print_message("%s: %.0f us\n", name,
                      1e6 * (double)(clock() - start) / CLOCKS_PER_SEC / done);
        th_matching_destroy(m);
        th_flow_destroy(flow);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_analytic),  cmocka_unit_test(test_branch_points),
        cmocka_unit_test(test_mirror),    cmocka_unit_test(test_conserving),
        cmocka_unit_test(test_grains),    cmocka_unit_test(test_long),
        cmocka_unit_test(test_near_zero), cmocka_unit_test(test_zeros),
        cmocka_unit_test(test_switch_on), cmocka_unit_test(test_polish),
        cmocka_unit_test(test_scaling),   cmocka_unit_test(test_errors),
        cmocka_unit_test(test_refused),   cmocka_unit_test(test_speed),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
