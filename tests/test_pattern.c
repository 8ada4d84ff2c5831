/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of th_pattern: wave numbers against the roots of the dispersion relation
 * (omega - v k)^2 = c^2 k^2 + k^4/4 by GSL's polynomial solver; the judgement against its rules. */
#include <complex.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdlib.h>
#include <cmocka.h>
#include <gsl/gsl_poly.h>

#include "flows.h"
#include "refuse.h"
#include "twinhorizon/pattern.h"

static const th_solve_options usual = {.accuracy = 1e-9};

/* For real coefficients GSL's solver would do; omega is complex, so the quartic times its conjugate
 * is solved and the roots that satisfy the quartic itself are kept. */
static void roots(double complex w, double v, double c, double complex k[4])
{
    /* k^4/4 + (c^2 - v^2) k^2 + 2 w v k - w^2, times its conjugate polynomial */
    const double complex a[5] = {-w * w, 2 * w * v, c * c - v * v, 0, 0.25};
    double product[9] = {0}, z[16];
    gsl_poly_complex_workspace *space = gsl_poly_complex_workspace_alloc(9);
    int kept = 0;

    for (int i = 0; i < 5; i++)
        for (int j = 0; j < 5; j++)
            product[i + j] += creal(a[i] * conj(a[j]));
    assert_int_equal(gsl_poly_complex_solve(product, 9, space, z), 0);
    gsl_poly_complex_workspace_free(space);
    for (int i = 0; i < 8; i++) {
        const double complex q = z[2 * i] + I * z[2 * i + 1];
        const double complex left = (((a[4] * q + a[3]) * q + a[2]) * q + a[1]) * q + a[0];

        if (cabs(left) < 1e-7 && kept < 4)
            k[kept++] = q;
    }
    assert_int_equal(kept, 4);
}

typedef struct {
    double v, c_u, c_p, c_d, gap;
} step;

static void try_step(const step *s)
{
    th_flow *flow = step_flow(s->v, s->c_u, s->c_p, s->c_d, s->gap);
    th_solution *answer = NULL;
    int moving = 0;

    assert_int_equal(th_solve(flow, &usual, &answer, NULL), TH_OK);
    for (int i = 0; i < answer->count && answer->mode[i].label == TH_LABEL_UNSTABLE; i++) {
        const double complex w = answer->mode[i].omega_re + I * answer->mode[i].omega_im;
        double complex in[4], up[4], down[4];
        double nearest = HUGE_VAL, slow_up = -HUGE_VAL, slow_down = HUGE_VAL;
        th_pattern p;

        assert_int_equal(th_pattern_find(flow, &usual, creal(w), cimag(w), &p, NULL), TH_OK);
        roots(w, s->v, s->c_p, in);
        roots(w, s->v, s->c_u, up);
        roots(w, s->v, s->c_d, down);
        for (int j = 0; j < 4; j++) {
            /* a real mode holds k and -k alike */
            nearest = fmin(
                nearest, fabs((creal(w) == 0 ? fabs(creal(in[j])) : creal(in[j])) - p.wavenumber));
            if (cimag(up[j]) < 0)
                slow_up = fmax(slow_up, cimag(up[j]));
            if (cimag(down[j]) > 0)
                slow_down = fmin(slow_down, cimag(down[j]));
        }
        /* the ripple is a sum of such waves; the loudest is known to less than half a wave in the
         * pocket */
        close_to("wave number in the pocket", nearest, 0, 0.5 * p.resolution);
        close_to("resolution", p.resolution, 2 * pi / s->gap, 1e-12);
        close_to("undulation", p.undulation, 2 * sqrt(s->v * s->v - s->c_p * s->c_p), 1e-12);
        /* 1e-6: roots of the squared polynomial may be nearly double */
        close_to("decay upstream", p.upstream.decay * -slow_up, 1, 1e-6);
        close_to("decay downstream", p.downstream.decay * slow_down, 1, 1e-6);
        assert_true(p.upstream.known && p.downstream.known);
        assert_true(p.share > 0.2 && p.share <= 1);
        assert_true(fabs(p.place) <= s->gap / 2);
        assert_true(p.upstream.loudness > 0 && p.upstream.loudness < 1.5);
        if (creal(w) == 0)
            continue;
        moving++;
        /* long sound: omega = (v + c) k downstream, (v - c) k upstream, less k^3/(8 c) */
        close_to("downstream", p.downstream.wavenumber * (s->v + s->c_d) / creal(w), 1, 0.1);
        close_to("upstream", p.upstream.wavenumber * (s->v - s->c_u) / creal(w), 1, 0.2);
    }
    assert_true(moving > 0);
    th_solution_destroy(answer);
    th_flow_destroy(flow);
}

static void test_steps(void **state)
{
    static const step some[] = {{0.75, 1, 0.3, 1, 5},
                                {0.75, 1, 0.3, 1, 12},
                                {1, 1.5, 0.5, 1.5, 12},
                                {1, 1.4, 0.62, 1.55, 9.3},
                                {1.13, 1.71, 0.44, 1.37, 14.2}};

    (void)state;
    for (size_t i = 0; i < sizeof some / sizeof *some; i++)
        try_step(&some[i]);
}

/* Just above the first switch-on the mode is the zero mode of the static operator, in the pocket
 * cos(k0 x) with k0 = 2 sqrt(v^2 - c^2) ("Saturation of black hole lasers in Bose-Einstein
 * condensates", Phys. Rev. D 88, 125012 (2013)): less than half a wave, so its transform over the
 * pocket is largest at 0. At order 8 there are several waves and k0 is seen. */
static void test_undulation(void **state)
{
    const double v = 0.75, c_u = 1, c_p = 0.3, k0 = 2 * sqrt(v * v - c_p * c_p);
    const double once = 2 * atan(2 * sqrt(c_u * c_u - v * v) / k0);

    (void)state;
    for (int order = 0; order <= 8; order += 8) {
        const double gap = (once + order * pi) / k0 + 1e-3;
        th_flow *flow = step_flow(v, c_u, c_p, c_u, gap);
        th_solution *answer = NULL;
        th_pattern p = {0};
        int slowest = -1;

        assert_int_equal(th_solve(flow, &usual, &answer, NULL), TH_OK);
        for (int i = 0; i < answer->count; i++)
            if (answer->mode[i].label == TH_LABEL_UNSTABLE && answer->mode[i].omega_re == 0)
                slowest = i;
        assert_true(slowest >= 0);
        assert_int_equal(th_pattern_find(flow, &usual, 0, answer->mode[slowest].omega_im, &p, NULL),
                         TH_OK);
        close_to("wave number", p.wavenumber, order == 0 ? 0 : k0, 0.2 * p.resolution);
        if (order == 8)
            assert_true(p.share > 0.9);
        th_solution_destroy(answer);
        th_flow_destroy(flow);
    }
}

static void test_judge(void **state)
{
    /* periods 4 and 3 in a pocket of 30: 2.5 waves apart */
    th_pattern p = {.wavenumber = -2 * pi / 4, .undulation = 2 * pi / 3, .resolution = 2 * pi / 30};
    th_pattern_tell t = th_pattern_judge(&p, 0.5, 0.1, 4 * pi, 2.9);

    (void)state;
    assert_true(t.imaged && t.frequency && t.wavenumber && !t.growth);
    t = th_pattern_judge(&p, 0.5, 0.1, 20.01, 0);
    assert_true(t.growth && t.imaged && t.wavenumber);
    t = th_pattern_judge(&p, 0.5, 0.1, 4 * pi - 0.01, 3.1);
    assert_true(t.imaged && !t.frequency && !t.wavenumber); /* the undulation is too fine */
    t = th_pattern_judge(&p, 0.5, 0.1, 1, 4.1);
    assert_false(t.imaged || t.wavenumber);
    p.undulation = 2 * pi / 4 + 0.9 * p.resolution;
    assert_false(th_pattern_judge(&p, 0.5, 0.1, 1, 0).wavenumber);
    p.wavenumber = 0; /* the pocket is its period */
    t = th_pattern_judge(&p, 0, 0.1, 1, 29);
    assert_true(t.imaged && !t.frequency);
    assert_false(th_pattern_judge(&p, 0, 0.1, 1, 31).imaged);
}

static void test_errors(void **state)
{
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, 2), *slow = step_flow(0.2, 1, 0.3, 1, 2);
    th_pattern p;

    (void)state;
    assert_int_equal(th_pattern_find(NULL, &usual, 0, 0.1, &p, NULL), TH_EINVAL);
    assert_int_equal(th_pattern_find(flow, NULL, 0, 0.1, &p, NULL), TH_EINVAL);
    assert_int_equal(th_pattern_find(flow, &usual, 0, 0.1, NULL, NULL), TH_EINVAL);
    assert_int_equal(th_pattern_find(flow, &usual, 0, 0, &p, NULL), TH_EINVAL);
    assert_int_equal(th_pattern_find(slow, &usual, 0, 0.1, &p, NULL), TH_ENONE);
    th_flow_destroy(flow);
    th_flow_destroy(slow);
}

/* The growth rate is that of tests/test_modes.c. */
static void test_memory(void **state)
{
    th_flow *flow = step_flow(0.75, 1, 0.3, 1, 2);
    th_pattern p;
    long k;

    (void)state;
    for (k = 0;; k++) {
        th_status st;

        refuse_from(k);
        st = th_pattern_find(flow, &usual, 0, 0.0682749416476971603, &p, NULL);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
    }
    assert_true(k > 2);
    th_flow_destroy(flow);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_steps),  cmocka_unit_test(test_undulation),
        cmocka_unit_test(test_judge),  cmocka_unit_test(test_errors),
        cmocka_unit_test(test_memory),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
