/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of th_solve: known frequencies and their error bars, counts, labels, symmetry.
 *
 * Source of the frequencies called "matching": the 4 x 4 transfer matrices of the first-order
 * system of (eta, n eta', phi, n phi') across stretches of at most 3, from Taylor series of 40 to
 * 60 terms (step size 0.15 to 0.3, series of n, 1/n and c^2 from their differential equations), in
 * 64-bit significands; the outgoing waves of the quartic dispersion relation at both ends (or the
 * ring closed, or eta = phi = 0 at walls); the determinant of all matching conditions together,
 * zero by the secant method. No elements, no matrix of the operator, no complex scaling. Repeated
 * with another step size the values agree to 1e-17. Set-up of the step: Phys. Rev. D 88, 125012
 * (2013) and Phys. Rev. A 94, 043616 (2016). Random cases have fixed seeds. */
#include <complex.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <string.h>
#include <cmocka.h>

#include "dispersion.h"
#include "flows.h"
#include "modes/level.h"
#include "modes/shape.h"
#include "refuse.h"
#include "spectrum.h"
#include "twinhorizon/index.h"
#include "twinhorizon/modes.h"

extern void openblas_set_num_threads(int threads);

static th_solution *solve_to(const th_flow *flow, double accuracy)
{
    const th_solve_options options = {.accuracy = accuracy};
    th_solution *s = NULL;
    th_error err = {0};

    if (th_solve(flow, &options, &s, &err) != TH_OK)
        fail_msg("%s", err.text);
    return s;
}

static th_solution *solve(const th_flow *flow)
{
    return solve_to(flow, 1e-9);
}

static const th_mode *nearest(const th_solution *s, double complex omega)
{
    const th_mode *best = NULL;

    for (int i = 0; i < s->count; i++)
        if (best == NULL || cabs(s->mode[i].omega_re + I * s->mode[i].omega_im - omega) <
                                cabs(best->omega_re + I * best->omega_im - omega))
            best = &s->mode[i];
    assert_non_null(best);
    return best;
}

/* The mode is there, as near as `tolerance`, and its error bar covers. */
static const th_mode *expect(const th_solution *s, double re, double im, double tolerance)
{
    const th_mode *m = nearest(s, re + I * im);
    const double off = hypot(m->omega_re - re, m->omega_im - im);

    if (!(off <= tolerance))
        fail_msg("omega = %.17g %+.17g i, want %.17g %+.17g i: off by %.2g, more than %g",
                 m->omega_re, m->omega_im, re, im, off, tolerance);
    if (!(off <= m->omega_error))
        fail_msg("omega = %.17g %+.17g i is off by %.3g, outside its error bar %.3g", m->omega_re,
                 m->omega_im, off, m->omega_error);
    return m;
}

/* Unstable, with `unstable` modes, both signs of Re omega counted; all computations agree. */
static void expect_unstable(const th_solution *s, int unstable)
{
    int count = 0;

    assert_int_equal(s->unstable, unstable);
    assert_int_equal(s->verdict, TH_VERDICT_UNSTABLE);
    assert_string_equal(s->reason, "");
    assert_true(s->index_known);
    assert_int_equal(s->index, unstable + 2 * s->negative);
    for (int i = 0; i < s->count; i++) {
        const th_mode *m = &s->mode[i];

        assert_true(m->omega_re >= 0 && m->omega_error > 0 && m->condition >= 1 - 1e-9);
        assert_true(m->pocket_share >= 0 && m->pocket_share <= 1);
        assert_true(m->residual >= 0 && m->residual < 1e-13);
        assert_true((m->confirmed & TH_BY_MATRIX) != 0);
        if (m->label == TH_LABEL_UNSTABLE) {
            count += m->omega_re > 0 ? 2 : 1;
            assert_true(m->omega_im > m->omega_error);
            assert_int_equal(m->norm, 0);
            assert_true((m->confirmed & TH_BY_INDEX) != 0);
        }
        if (i > 0)
            assert_true(m->omega_im <= s->mode[i - 1].omega_im);
    }
    assert_int_equal(count, unstable);
}

/* ---- known frequencies ---------------------------------------------------------------------- */

typedef struct {
    double re, im;
} known;

static void expect_all(th_flow *flow, int unstable, const known *mode, int modes, double tolerance)
{
    th_solution *s = solve(flow);

    expect_unstable(s, unstable);
    for (int i = 0; i < modes; i++)
        (void)expect(s, mode[i].re, mode[i].im, tolerance);
    th_solution_destroy(s);
    th_flow_destroy(flow);
}

/* v = 0.75, c = 1/0.3/1: matching; measured errors are up to 2e-14. */
static void test_step(void **state)
{
    static const known two[] = {{0, 0.06827494164769716051}};
    static const known five[] = {{0.08027298138096230815, 0.03390886004486951852}};
    static const known eight[] = {{0.1425184754244990769, 0.00688361317667655843},
                                  {0.01415674480432746583, 0.00192438844739335119}};
    static const known twelve[] = {{0, 0.0288302909215668038},
                                   {0.09334221913953386527, 0.01932465807380122649},
                                   {0.17948264247014790594, 0.00267911113370677024}};
    /* v = 1, c = 1.5/0.5/1.5 */
    static const known deep[] = {{0, 0.01416371444060713382},
                                 {0.18624455735398988056, 0.01090828558517528931},
                                 {0.26904626755097769817, 0.00221631049737058347},
                                 {0.07472227945991715223, 0.00198925014565305891}};
    /* v = 0.8, c = 1.05/0.35/1.4: unequal ends */
    static const known unequal[] = {{0.04868824236231185274, 0.03766453702335061746},
                                    {0.17767663062602854434, 0.00880736586574028319}};

    (void)state;
    expect_all(step_flow(0.75, 1, 0.3, 1, 2), 1, two, 1, 1e-12);
    expect_all(step_flow(0.75, 1, 0.3, 1, 5), 2, five, 1, 1e-12);
    expect_all(step_flow(0.75, 1, 0.3, 1, 8), 4, eight, 2, 1e-12);
    expect_all(step_flow(0.75, 1, 0.3, 1, 12), 5, twelve, 3, 1e-12);
    expect_all(step_flow(1, 1.5, 0.5, 1.5, 12), 7, deep, 4, 1e-12);
    expect_all(step_flow(0.8, 1.05, 0.35, 1.4, 9), 4, unequal, 2, 1e-12);
}

/* Smooth edges: matching; measured errors are up to 3e-13. */
static void test_smooth(void **state)
{
    static const double equal[7] = {1, 1.5, 0.5, 1.5, 0.5, 0.5, 8};
    static const double unequal[7] = {1, 1.35, 0.55, 1.45, 0.5, 0.7, 10};
    static const double sech[4] = {1, 1.3, 1.4, 3};
    static const known a[] = {{0.06647747114694470596, 0.03713458666473244461},
                              {0.24076045708853563162, 0.00986066464679759396}};
    static const known b[] = {{0, 0.03733204877488673925},
                              {0.11876577227718941641, 0.02003118691423895063},
                              {0.22542539943052765208, 0.00105302022307639332}};
    static const known c[] = {{0.08836039975505572594, 0.00429695742272606165}};

    (void)state;
    expect_all(flow_of("tanh", open_ends(), equal), 4, a, 2, 3e-12);
    expect_all(flow_of("tanh", open_ends(), unequal), 5, b, 3, 3e-12);
    expect_all(flow_of("sech", open_ends(), sech), 2, c, 1, 3e-12);
}

/* Density and speed vary too: matching. The well is an exact stationary flow, the bumps of flows.h
 * come through the callback. */
static void test_density(void **state)
{
    static const double well[3] = {1, 0.6, 1.5};
    static const known a[] = {{0, 0.09896952583168150539},
                              {0.6453735581719886289, 0.00243696234374789411}};
    static const known b[] = {{0, 0.05765965368168101256}};

    (void)state;
    expect_all(flow_of("well", open_ends(), well), 3, a, 2, 3e-12);
    expect_all(bumpy_flow(open_ends()), 1, b, 1, 3e-12);
}

/* Walls and rings, real frequencies included: matching. */
static void test_closed(void **state)
{
    static const double step[5] = {0.75, 1, 0.3, 1.1, 5};
    static const known box[] = {{0.08227255939210096827, 0.05274546148103256462}};
    double value[7] = {0, 1.4, 0.6, 1.4, 0.5, 0.5, 10};
    static const known ten[] = {{0, 0.03095496562351406755},
                                {0.1109274415056831485, 0.00835332075081360569},
                                {0.19692730039258645303, 0}};
    th_solution *s;
    th_flow *flow;
    const th_mode *m;

    (void)state;
    expect_all(flow_of("step", walls(6), step), 2, box, 1, 1e-12);
    expect_all(flow_of("tanh", ring(50, 8), value), 3, ten, 3, 1e-11);
    /* gap 9: a band of stability, with pocket modes of negative energy that find no partner */
    value[6] = 9;
    flow = flow_of("tanh", ring(50, 8), value);
    s = solve(flow);
    assert_int_equal(s->verdict, TH_VERDICT_STABLE);
    assert_int_equal(s->unstable, 0);
    assert_int_equal(s->zero_modes, 2);
    assert_int_equal(s->negative, 2);
    assert_int_equal(s->index, 4);
    for (int i = 0; i < s->count; i++) {
        close_to("growth", s->mode[i].omega_im, 0, 0);
        assert_true(s->mode[i].omega_re > 0.01); /* the zero modes are not in the list */
    }
    m = expect(s, 0.05935885795230490798, 0, 1e-11);
    assert_int_equal(m->label, TH_LABEL_TRAPPED);
    assert_int_equal(m->norm, -1);
    m = expect(s, 0.19310623246395442595, 0, 1e-11);
    assert_int_equal(m->label, TH_LABEL_TRAPPED);
    m = expect(s, 0.08554516184694523855, 0, 1e-11);
    assert_int_equal(m->label, TH_LABEL_STABLE);
    assert_int_equal(m->norm, 1);
    th_solution_destroy(s);
    th_flow_destroy(flow);
}

/* Whatever accuracy is asked for, it is reached (relative to omega_top) and the bar covers. Below
 * 1e-10 rounding can be larger than what is asked for. */
static void test_accuracy(void **state)
{
    static const double equal[7] = {1, 1.5, 0.5, 1.5, 0.5, 0.5, 8};
    th_flow *flow[3] = {flow_of("tanh", open_ends(), equal), bumpy_flow(open_ends()),
                        step_flow(0.75, 1, 0.3, 1, 8)};
    static const known want[3][2] = {{{0.06647747114694470596, 0.03713458666473244461},
                                      {0.24076045708853563162, 0.00986066464679759396}},
                                     {{0, 0.05765965368168101256}, {0, 0.05765965368168101256}},
                                     {{0.1425184754244990769, 0.00688361317667655843},
                                      {0.01415674480432746583, 0.00192438844739335119}}};

    (void)state;
    for (int f = 0; f < 3; f++) {
        for (double accuracy = 1e-3; accuracy > 0.9e-10; accuracy /= 100) {
            th_solution *s = solve_to(flow[f], accuracy);

            for (int i = 0; i < 2; i++) {
                const th_mode *m = expect(s, want[f][i].re, want[f][i].im, accuracy * s->omega_top);

                assert_true(m->omega_error <= accuracy * s->omega_top);
            }
            th_solution_destroy(s);
        }
        th_flow_destroy(flow[f]);
    }
}

/* ---- counts --------------------------------------------------------------------------------- */

/* Switch-on lengths of the step, closed form (set-up of Phys. Rev. D 88, 125012 (2013)):
 * L_j = [atan(k_u/k_0) + atan(k_d/k_0) + j pi]/k_0. */
static double step_length(double v, double c_u, double c_p, double c_d, int j)
{
    const double k_0 = 2 * sqrt((v - c_p) * (v + c_p));
    const double k_u = 2 * sqrt((c_u - v) * (c_u + v)), k_d = 2 * sqrt((c_d - v) * (c_d + v));

    return (atan(k_u / k_0) + atan(k_d / k_0) + j * pi) / k_0;
}

/* The count is `want`, by matrix and by static index. */
static void expect_count(th_flow *flow, int want)
{
    th_solution *s = solve_to(flow, 1e-6);

    if (s->verdict == TH_VERDICT_UNDECIDED)
        fail_msg("undecided, %d expected: %s", want, s->reason);
    assert_int_equal(s->index, want);
    assert_int_equal(s->unstable, want);
    assert_int_equal(s->verdict, want > 0 ? TH_VERDICT_UNSTABLE : TH_VERDICT_STABLE);
    assert_int_equal(s->zero_modes, 0);
    th_solution_destroy(s);
    th_flow_destroy(flow);
}

/* Number of L_j below the gap; every third gap lies within 1e-6 (relative) of a switch-on. */
static void test_count_step(void **state)
{
    uint64_t seed = 51;
    int largest = 0;

    (void)state;
    for (int trial = 0; trial < 34; trial++) {
        const double v = draw(&seed, 0.4, 2), c_u = v * draw(&seed, 1.05, 1.8);
        const double c_p = v * draw(&seed, 0.15, 0.9), c_d = v * draw(&seed, 1.05, 1.8);
        const int j = (int)draw(&seed, 0, 5);
        const double near = step_length(v, c_u, c_p, c_d, j);
        const double shift = trial % 3 == 0 ? draw(&seed, -1e-6, 1e-6) : draw(&seed, -0.5, 0.3);
        const double gap = near * (1 + shift);
        int want = 0;

        while (step_length(v, c_u, c_p, c_d, want) < gap)
            want++;
        expect_count(step_flow(v, c_u, c_p, c_d, gap), want);
        largest = want > largest ? want : largest;
    }
    assert_true(largest >= 5);
}

/* Sech: number of switch-on widths passed (Poeschl-Teller),
 * s_j = [(2j+1) K + sqrt((2j+1)^2 K^2 + 4 (4D - K^2)(j^2 + j))]/[2 (4D - K^2)],
 * K = 2 sqrt(c_u^2 - v^2). Well: 2 + number of gaps j pi/(2 sqrt(1/m^2 - m^2)) passed. */
static void test_count_exact(void **state)
{
    uint64_t seed = 52;

    (void)state;
    for (int trial = 0; trial < 6; trial++) {
        const double v = draw(&seed, 0.6, 1.5), c_u = v * draw(&seed, 1.1, 1.6);
        const double c_p = v * draw(&seed, 0.2, 0.8), depth = c_u * c_u - c_p * c_p;
        const double width = draw(&seed, 0.5, 5) / v, k = 2 * sqrt(c_u * c_u - v * v);
        const double d = 4 * depth - k * k;
        const double value[4] = {v, c_u, depth, width};
        int want = 0;

        for (;; want++) {
            const double odd = 2 * want + 1;

            if ((odd * k + sqrt(odd * odd * k * k + 4 * d * (want * want + want))) / (2 * d) >
                width)
                break;
        }
        expect_count(flow_of("sech", open_ends(), value), want);
    }
    for (int trial = 0; trial < 6; trial++) {
        const double m = draw(&seed, 0.3, 0.9), turn = pi / (2 * sqrt(1 / (m * m) - m * m));
        const double gap = draw(&seed, 0.2, 3.8) * turn;
        const double value[3] = {1, m, gap};

        expect_count(flow_of("well", open_ends(), value), 2 + (int)floor(gap / turn));
    }
}

/* Tanh pockets have no closed form: matrix against the Pruefer count, which tests/test_index.c
 * compares with the inertia of finite differences. */
static void test_count_smooth(void **state)
{
    uint64_t seed = 53;
    int largest = 0;

    (void)state;
    for (int trial = 0; trial < 14; trial++) {
        const double v = draw(&seed, 0.5, 1.5);
        const double value[7] = {v,
                                 v * draw(&seed, 1.1, 1.8),
                                 v * draw(&seed, 0.2, 0.85),
                                 v * draw(&seed, 1.1, 1.8),
                                 draw(&seed, 0.1, 1) / v,
                                 draw(&seed, 0.1, 1) / v,
                                 draw(&seed, 0.5, 11) / v};
        th_flow *flow = flow_of("tanh", open_ends(), value);
        th_index index;

        assert_int_equal(th_index_open(flow, &index, NULL), TH_OK);
        expect_count(flow, index.count);
        largest = index.count > largest ? index.count : largest;
    }
    assert_true(largest >= 5);
}

/* Near even L_j a purely growing mode starts, with growth rate
 * 2 c_1 p^4 k^2 (gap - L_j)/[(c_1^2 - c_2^2)(c_1^2 + v^2)], p^2 = v^2 - c_2^2, k^2 = c_1^2 - v^2,
 * for equal ends c_1 (set-up of Phys. Rev. D 88, 125012 (2013)); next order measured below 1 x gap
 * - L. The new mode carries as many zeros of the density as its place in the order, as the static
 * solution does (Sturm). Just above odd L_j the slowest mode is a pair. */
static void test_switch_on(void **state)
{
    const double v = 0.75, c_1 = 1, c_2 = 0.3;
    const double p2 = v * v - c_2 * c_2, k2 = c_1 * c_1 - v * v;
    const double slope = 2 * c_1 * p2 * p2 * k2 / ((c_1 * c_1 - c_2 * c_2) * (c_1 * c_1 + v * v));

    (void)state;
    for (int j = 0; j < 5; j++)
        for (double past = 1e-2; past > 0.5e-6; past /= 100) {
            th_flow *flow = step_flow(v, c_1, c_2, c_1, step_length(v, c_1, c_2, c_1, j) + past);
            th_solution *s = solve(flow);
            const th_mode *slow = nearest(s, 0);

            expect_unstable(s, j + 1);
            assert_int_equal(slow->nodes, j);
            if (j % 2 == 0) {
                assert_true(slow->omega_re == 0);
                close_to("growth over slope", slow->omega_im / (slope * past), 1, 5 * past + 1e-6);
            } else {
                assert_true(slow->omega_re > 0);
            }
            th_solution_destroy(s);
            th_flow_destroy(flow);
        }
}

/* Below L_0 the root is damped (gap 1.0: -0.0166079473127458 i, lower half plane, by matching):
 * nothing grows. */
static void test_damped(void **state)
{
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, 1);
    th_solution *s = solve(flow);

    (void)state;
    assert_int_equal(s->verdict, TH_VERDICT_STABLE);
    assert_int_equal(s->unstable, 0);
    assert_int_equal(s->index, 0);
    for (int i = 0; i < s->count; i++)
        assert_true(s->mode[i].omega_im < 0 && s->mode[i].label == TH_LABEL_STABLE);
    th_solution_destroy(s);
    th_flow_destroy(flow);
}

/* One horizon of either sense, sharp or smooth, never grows (set-up of Phys. Rev. A 80, 043601
 * (2009), from memory). A static index does not exist at a supersonic end. */
static void test_single_horizon(void **state)
{
    (void)state;
    for (int i = 0; i < 8; i++) {
        const double c_p = i < 4 ? 0.5 : 0.8, c_out = i < 4 ? 1.5 : 1.1;
        const bool black = i % 2 == 0;
        const double value[7] = {1, black ? c_out : c_p, c_p, black ? c_p : c_out, 0.5, 0.7, 4};
        th_flow *flow =
            flow_of(i % 4 < 2 ? "step" : "tanh", open_ends(),
                    i % 4 < 2 ? (const double[5]){1, value[1], c_p, value[3], 4} : value);
        th_solution *s = solve(flow);

        if (s->verdict != TH_VERDICT_STABLE)
            fail_msg("single horizon %d: %d growing modes; %s", i, s->unstable, s->reason);
        assert_int_equal(s->unstable, 0);
        assert_false(s->index_known);
        assert_true(s->absorbing);
        th_solution_destroy(s);
        th_flow_destroy(flow);
    }
}

/* ---- rings and walls ------------------------------------------------------------------------ */

/* index = growing + 2 x neutral modes of negative energy (Hamiltonian-Krein index, Physica D 195,
 * 263 (2004)), on rings and in boxes. */
static void test_identity(void **state)
{
    uint64_t seed = 54;
    int growing = 0, negative = 0, trapped = 0;

    (void)state;
    for (int trial = 0; trial < 16; trial++) {
        const bool closed = trial % 2 == 0;
        const double length = draw(&seed, 40, 48), v = closed ? 2 * pi * 7 / length : 1;
        const double out = v * draw(&seed, 1.15, 1.6);
        const double value[7] = {v,
                                 out,
                                 v * draw(&seed, 0.4, 0.8),
                                 closed ? out : v * draw(&seed, 1.15, 1.6),
                                 draw(&seed, 0.3, 0.7),
                                 draw(&seed, 0.3, 0.7),
                                 draw(&seed, 2, 11)};
        th_flow *flow =
            flow_of("tanh", closed ? ring(length, 7) : walls(draw(&seed, 2, 12)), value);
        th_solution *s = solve_to(flow, 1e-8);

        if (s->verdict == TH_VERDICT_UNDECIDED)
            fail_msg("trial %d: %s", trial, s->reason);
        assert_int_equal(s->index, s->unstable + 2 * s->negative);
        assert_int_equal(s->zero_modes, closed ? 2 : 0);
        growing += s->unstable;
        negative += s->negative;
        for (int i = 0; i < s->count; i++) {
            const th_mode *m = &s->mode[i];

            /* a neutral mode has a norm, and a trapped one a negative one, most of it inside */
            assert_true(m->omega_im > 0 ? m->norm == 0 : m->norm != 0);
            assert_int_equal(m->label == TH_LABEL_TRAPPED,
                             m->omega_im == 0 && m->norm < 0 && m->pocket_share > 0.5);
            trapped += m->label == TH_LABEL_TRAPPED;
        }
        th_solution_destroy(s);
        th_flow_destroy(flow);
    }
    if (!(growing >= 20 && negative >= 5 && trapped >= 5))
        fail_msg("too tame: %d growing, %d negative, %d trapped", growing, negative, trapped);
}

/* The same where the density follows the speed. On the rings the winding fixes the speed outside.
 */
static void test_identity_density(void **state)
{
    uint64_t seed = 63;
    int growing = 0, negative = 0;

    (void)state;
    for (int trial = 0; trial < 10; trial++) {
        const bool closed = trial % 2 == 0;
        const double scattering = trial % 4 < 2 ? 0 : draw(&seed, 0.1, 2);
        const double value[9] = {draw(&seed, 0.5, 0.8),
                                 draw(&seed, 1.15, 1.7),
                                 draw(&seed, 0.5, 0.8),
                                 1,
                                 draw(&seed, 0.3, 0.7),
                                 draw(&seed, 0.3, 0.7),
                                 draw(&seed, 2, 9),
                                 scattering > 0,
                                 scattering};
        th_flow_setup setup = {.shape = th_shape_find("continuity"),
                               .density = 1.7,
                               .ends = closed ? ring(draw(&seed, 44, 48), 5)
                                              : walls(draw(&seed, 2, 10))};
        th_flow *flow = NULL;
        th_solution *s;
        th_error err = {0};

        for (int i = 0; i < 9; i++) {
            setup.value[i] = value[i];
            setup.given[i] = !(closed && (i == 0 || i == 2)) && (i != 8 || scattering > 0);
        }
        if (th_flow_build(&setup, &flow, &err) != TH_OK)
            fail_msg("trial %d: %s", trial, err.text);
        s = solve_to(flow, 1e-8);
        if (s->verdict == TH_VERDICT_UNDECIDED)
            fail_msg("trial %d: %s", trial, s->reason);
        assert_int_equal(s->index, s->unstable + 2 * s->negative);
        growing += s->unstable;
        negative += s->negative;
        th_solution_destroy(s);
        th_flow_destroy(flow);
    }
    if (!(growing >= 10 && negative >= 3))
        fail_msg("too tame: %d growing, %d negative", growing, negative);
}

/* A ring that once was undecided: its one mode of negative energy lies above the top of the band of
 * a pocket without end, and index 2 stands for it (Hamiltonian-Krein index as above). */
static void test_above_band(void **state)
{
    static const double value[5] = {0, 1.5, 0.9, 1.5, 9.05802};
    th_flow *flow = flow_of("step", ring(12, 2), value);
    th_solution *s = solve(flow);

    (void)state;
    assert_int_equal(s->verdict, TH_VERDICT_STABLE);
    assert_int_equal(s->index, 2);
    assert_int_equal(s->negative, 1);
    assert_int_equal(s->count, 1);
    assert_true(s->mode[0].omega_re > s->omega_top && s->mode[0].norm < 0);
    th_solution_destroy(s);
    th_flow_destroy(flow);
}

/* Uniform ring at supersonic speed: omega = v k +- sqrt(c^2 k^2 + k^4/4), k = 2 pi j/L, the lower
 * sign with omega > 0 being the waves of negative norm (sign of omega - v k). No pocket, no label
 * trapped. */
static void test_uniform_ring(void **state)
{
    uniform_state u = {.c = 0.8};
    th_flow *flow = uniform_flow(ring(20, 4), 20, &u);
    th_solution *s = solve(flow);
    int want = 0;

    (void)state;
    assert_int_equal(s->verdict, TH_VERDICT_STABLE);
    for (int j = 1; j < 60; j++)
        for (int sign = -1; sign <= 1; sign += 2) {
            const double k = 2 * pi * j / 20, root = k * sqrt(u.c * u.c + k * k / 4);
            const double omega = u.v * k + sign * root;
            const double listed = fabs(omega); /* -omega of wave number -k is listed if omega < 0 */

            if (omega > 0 && sign < 0)
                want++;
            if (listed < 0.99 * s->omega_top) {
                const th_mode *m = expect(s, listed, 0, 1e-11);

                assert_int_equal(m->norm, omega * sign > 0 ? 1 : -1);
                assert_int_equal(m->label, TH_LABEL_STABLE);
            }
        }
    assert_true(want >= 2);
    assert_int_equal(s->negative, want);
    assert_int_equal(s->index, 2 * want);
    th_solution_destroy(s);
    th_flow_destroy(flow);
}

/* The box forgets its walls as they move away: a wave goes out as k_1 and comes back as k_2, the
 * two roots of the dispersion relation at omega that decay least on either side of the real axis,
 * and is smaller by exp(-(Im k_1 - Im k_2) padding) then. */
static void test_far_walls(void **state)
{
    static const double value[5] = {0.75, 1, 0.3, 1, 5};
    const double complex omega = 0.08027298138096230815 + 0.03390886004486951852 * I;
    double complex k[4];

    (void)state;
    assert_int_equal(th_dispersion_roots(omega, 0.75, 1, k, NULL), TH_OK);
    for (double padding = 40; padding < 170; padding += 40) {
        th_flow *flow = flow_of("step", walls(padding), value);
        th_solution *s = solve(flow);
        const double want = cabs(omega) * exp(-cimag(k[1] - k[2]) * padding);
        const th_mode *m = nearest(s, omega);
        const double off = cabs(m->omega_re + I * m->omega_im - omega);

        expect_unstable(s, 2);
        assert_int_equal(s->negative, 0);
        if (!(off < 2 * want + m->omega_error && off > 0.1 * want))
            fail_msg("padding %g: off by %g, expected about %g", padding, off, want);
        th_solution_destroy(s);
        th_flow_destroy(flow);
    }
}

/* ---- invariance ----------------------------------------------------------------------------- */

/* Speeds times s, lengths over s: omega times s^2, everything else unchanged. */
static void test_scaling(void **state)
{
    th_solution *first = NULL;

    (void)state;
    for (int i = 0; i < 3; i++) {
        const double s = i == 0 ? 1 : i == 1 ? 1e-3 : 1e3;
        const double value[7] = {s, 1.5 * s, 0.5 * s, 1.3 * s, 0.5 / s, 0.7 / s, 8 / s};
        th_flow *flow = flow_of("tanh", open_ends(), value);
        th_solution *got = solve(flow);

        if (first == NULL)
            first = got;
        assert_int_equal(got->count, first->count);
        assert_int_equal(got->unstable, first->unstable);
        for (int k = 0; k < got->count; k++) {
            const th_mode *a = &got->mode[k], *b = &first->mode[k];
            const double size = hypot(b->omega_re, b->omega_im);

            close_to("Re omega", a->omega_re / (s * s) / size, b->omega_re / size, 1e-10);
            close_to("Im omega", a->omega_im / (s * s) / size, b->omega_im / size, 1e-10);
            assert_int_equal(a->label, b->label);
            assert_int_equal(a->nodes, b->nodes);
            close_to("share", a->pocket_share, b->pocket_share, 1e-7);
        }
        if (got != first)
            th_solution_destroy(got);
        th_flow_destroy(flow);
    }
    assert_true(first->unstable >= 3);
    th_solution_destroy(first);
}

/* Upstream and downstream are not the same, but density is only a scale: 1.7 (flows.h) or 50. */
static void test_density_scale(void **state)
{
    th_flow_setup setup = {.shape = th_shape_find("step"), .density = 50};
    const double value[5] = {0.75, 1, 0.3, 1.2, 5};
    th_flow *flow = NULL, *other = step_flow(0.75, 1, 0.3, 1.2, 5);
    th_solution *a, *b;

    (void)state;
    for (int i = 0; i < 5; i++) {
        setup.value[i] = value[i];
        setup.given[i] = true;
    }
    assert_int_equal(th_flow_build(&setup, &flow, NULL), TH_OK);
    a = solve(flow);
    b = solve(other);
    assert_int_equal(a->count, b->count);
    assert_true(a->unstable > 0);
    for (int i = 0; i < a->count; i++) {
        close_to("Re omega", a->mode[i].omega_re, b->mode[i].omega_re, 1e-12);
        close_to("Im omega", a->mode[i].omega_im, b->mode[i].omega_im, 1e-12);
    }
    th_solution_destroy(a);
    th_solution_destroy(b);
    th_flow_destroy(flow);
    th_flow_destroy(other);
}

/* ---- what modes look like ------------------------------------------------------------------- */

/* Conservation of the norm: growing modes have none. In a box the classifier's integral runs over
 * the whole mode, and must find the value zero by itself (th_solve also knows it from the label).
 */
static void test_norm(void **state)
{
    static const double value[5] = {0.75, 1, 0.3, 1.1, 8};
    th_flow *flow = flow_of("step", walls(12), value);
    th_solution *s = solve(flow);
    th_level level;
    int growing = 0, ordinary = 0;

    (void)state;
    assert_int_equal(th_level_create(flow, TH_LEVEL_CHECK, 1e-9, s->omega_top, 1e-3 * s->omega_top,
                                     &level, NULL),
                     TH_OK);
    for (int i = 0; i < s->count; i++) {
        const th_mode *m = &s->mode[i];
        th_mode_shape shape;
        th_eigenpair pair;

        assert_int_equal(th_spectrum_refine(level.op, m->omega_re + I * m->omega_im, &pair, NULL),
                         TH_OK);
        assert_int_equal(
            th_mode_shape_find(flow, level.mesh, level.op, pair.omega, pair.right, &shape, NULL),
            TH_OK);
        assert_int_equal(shape.norm, m->norm);
        assert_int_equal(shape.nodes, m->nodes);
        close_to("share", shape.pocket_share, m->pocket_share, 1e-9);
        growing += m->omega_im > 0;
        ordinary += m->norm > 0;
        assert_true(m->omega_im > 0 ? shape.norm == 0 : shape.norm != 0);
        th_eigenpair_clear(&pair);
    }
    assert_true(growing >= 2 && ordinary >= 2);
    th_level_clear(&level);
    th_solution_destroy(s);
    th_flow_destroy(flow);
}

/* ---- contract ------------------------------------------------------------------------------- */

static void test_words(void **state)
{
    char text[TH_CONFIRMED_SIZE];

    (void)state;
    assert_string_equal(th_label_text(TH_LABEL_UNSTABLE), "unstable");
    assert_string_equal(th_label_text(TH_LABEL_TRAPPED), "trapped");
    assert_string_equal(th_label_text(TH_LABEL_STABLE), "stable");
    assert_string_equal(th_label_text(TH_LABEL_UNDECIDED), "undecided");
    th_confirmed_text(0, text);
    assert_string_equal(text, "");
    th_confirmed_text(TH_BY_INDEX, text);
    assert_string_equal(text, "index");
    th_confirmed_text(TH_BY_MATRIX | TH_BY_INDEX, text);
    assert_string_equal(text, "matrix+index");
    th_confirmed_text(~0u, text); /* all of them fit */
    assert_true(strlen(text) < TH_CONFIRMED_SIZE);
}

/* Within 1e-14 of a switch-on nothing can be decided; that is said, with the reason. */
static void test_undecided(void **state)
{
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, step_length(0.75, 1, 0.3, 1, 2));
    th_solution *s = solve(flow);

    (void)state;
    assert_int_equal(s->verdict, TH_VERDICT_UNDECIDED);
    assert_true(s->reason[0] != '\0');
    th_solution_destroy(s);
    th_flow_destroy(flow);
}

static void test_errors(void **state)
{
    static const double wrong[4] = {0.9e-12, 1.1e-3, 0, NAN};
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, 2);
    th_solve_options o = {.accuracy = 1e-9};
    th_solution *s = NULL;
    th_error err = {0};

    (void)state;
    assert_int_equal(th_solve(NULL, &o, &s, &err), TH_EINVAL);
    assert_int_equal(th_solve(flow, NULL, &s, &err), TH_EINVAL);
    assert_int_equal(th_solve(flow, &o, NULL, &err), TH_EINVAL);
    for (int i = 0; i < 4; i++) {
        o.accuracy = wrong[i];
        assert_int_equal(th_solve(flow, &o, &s, &err), TH_EINVAL);
        assert_non_null(strstr(err.text, "accuracy"));
        assert_null(s);
        assert_int_equal(th_matrix_write(flow, &o, "title", stdout, &err), TH_EINVAL);
    }
    th_solution_destroy(NULL);
    th_flow_destroy(flow);
}

static void test_refused(void **state)
{
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, 2);
    const th_solve_options o = {.accuracy = 1e-3};
    long refused = 0;

    (void)state;
    /* every one of the first 40, then more and more sparsely: a call makes hundreds */
    for (long k = 0;; k += 1 + (k > 40 ? k / 6 : 0)) {
        th_solution *s = NULL;
        th_error err = {0};
        th_status st;

        refuse_from(k);
        st = th_solve(flow, &o, &s, &err);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            assert_int_equal(s->unstable, 1);
            th_solution_destroy(s);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_true(err.text[0] != '\0');
        assert_null(s);
        refused++;
    }
    assert_true(refused >= 30);
    th_flow_destroy(flow);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_step),           cmocka_unit_test(test_smooth),
        cmocka_unit_test(test_density),        cmocka_unit_test(test_closed),
        cmocka_unit_test(test_accuracy),       cmocka_unit_test(test_count_step),
        cmocka_unit_test(test_count_exact),    cmocka_unit_test(test_count_smooth),
        cmocka_unit_test(test_switch_on),      cmocka_unit_test(test_damped),
        cmocka_unit_test(test_single_horizon), cmocka_unit_test(test_identity),
        cmocka_unit_test(test_uniform_ring),   cmocka_unit_test(test_far_walls),
        cmocka_unit_test(test_above_band),     cmocka_unit_test(test_identity_density),
        cmocka_unit_test(test_scaling),        cmocka_unit_test(test_density_scale),
        cmocka_unit_test(test_norm),           cmocka_unit_test(test_words),
        cmocka_unit_test(test_undecided),      cmocka_unit_test(test_errors),
        cmocka_unit_test(test_refused),
    };

    openblas_set_num_threads(1); /* small matrices: more threads only wait for each other */
    return cmocka_run_group_tests(tests, NULL, NULL);
}
