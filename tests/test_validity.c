/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of th_validity_check: every number against the formula of its definition, worked out here
 * for flows whose extremes are known. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include "flows.h"
#include "twinhorizon/validity.h"

static void ask(const th_flow *flow, const th_experiment *x, th_check check[TH_CHECKS])
{
    th_error err = {0};

    if (th_validity_check(flow, x, check, &err) != TH_OK)
        fail_msg("%s", err.text);
    for (int i = 0; i < TH_CHECKS; i++) {
        assert_int_equal(check[i].id, i);
        assert_true(check[i].name != NULL && check[i].title != NULL && check[i].fails != NULL);
        assert_true(check[i].limit > 0);
    }
}

static void number(const th_check *check, double want, bool holds)
{
    assert_true(check->known);
    close_to(check->name, check->value / want, 1, 1e-12);
    assert_int_equal(check->holds, holds);
}

/* Step: c from 0.5 to 1.5, n = 1.7 in the flow's own units, gap 6. */
static void test_step(void **state)
{
    th_flow *flow = step_flow(1, 1.5, 0.5, 1.4, 6);
    const double a_n = 0.031; /* planted; omega_perp = c^2 sqrt(1 + 4 a n)/(2 a n), c largest */
    th_experiment x = {.density = 40,
                       .transverse = 2.25 * sqrt(1 + 4 * a_n) / (2 * a_n),
                       .temperature = 0.2,
                       .hold = 30,
                       .loss_rate = 0.002,
                       .resolution = 2,
                       .contrast = 0.3};
    th_check check[TH_CHECKS];

    (void)state;
    ask(flow, &x, check);
    number(&check[TH_CHECK_STATE], sqrt(1 + 4 * a_n) - 1, true);
    number(&check[TH_CHECK_TRANSVERSE], sqrt(1 + 4 * a_n), true);
    number(&check[TH_CHECK_MEAN_FIELD], 40 / 1.5, true); /* n/c where c is largest */
    assert_false(check[TH_CHECK_KAPPA].known);           /* sharp horizons */
    number(&check[TH_CHECK_RIPPLE], 2 * pi / (2 * sqrt(0.75) * 2), true);
    number(&check[TH_CHECK_HEALING], 1 / (1.0 * 2), false); /* (1.5 + 0.5)/2 at a jump */
    number(&check[TH_CHECK_THERMAL], 0.2 / 2.25, true);
    number(&check[TH_CHECK_COHERENCE], 2 * 40 / (0.2 * 6), true);
    number(&check[TH_CHECK_LOSS], 1 - exp(-0.06), true);
    number(&check[TH_CHECK_LINEAR], 0.3, true);

    x = (th_experiment){.density = 14,
                        .transverse = 1,
                        .temperature = 5,
                        .hold = 100,
                        .loss_rate = 0.002,
                        .resolution = 5,
                        .contrast = 0.6};
    ask(flow, &x, check);
    number(&check[TH_CHECK_TRANSVERSE],
           sqrt(1 + 2 * (2.25 * 2.25 + sqrt(pow(2.25, 4) + 2.25 * 2.25))), false);
    number(&check[TH_CHECK_MEAN_FIELD], 14 / 1.5, false);
    number(&check[TH_CHECK_RIPPLE], 2 * pi / (2 * sqrt(0.75) * 5), false);
    number(&check[TH_CHECK_HEALING], 1 / (1.0 * 5), false);
    number(&check[TH_CHECK_THERMAL], 5 / 2.25, false);
    number(&check[TH_CHECK_COHERENCE], 28 / 30.0, false);
    number(&check[TH_CHECK_LOSS], 1 - exp(-0.2), false);
    number(&check[TH_CHECK_LINEAR], 0.6, false);
    assert_false(check[TH_CHECK_STATE].holds);

    x = (th_experiment){0}; /* nothing known: nothing to say, and nothing holds */
    ask(flow, &x, check);
    for (int i = 0; i < TH_CHECKS; i++)
        assert_false(check[i].known || check[i].holds || check[i].value != 0);
    th_flow_destroy(flow);
}

/* tanh edges: kappa = |c'| where c = v, (c_u - c_p)/(2 w) (1 - t^2), t = (c_u + c_p - 2 v)/(c_u -
 * c_p); here t = 0 at both. */
static void test_kappa(void **state)
{
    th_flow *flow = flow_of("tanh", open_ends(), (const double[]){1, 1.5, 0.5, 1.5, 0.8, 0.4, 12});
    const th_experiment x = {0};
    th_check check[TH_CHECKS];

    (void)state;
    ask(flow, &x, check);
    assert_true(check[TH_CHECK_KAPPA].known && !check[TH_CHECK_KAPPA].holds);
    close_to("kappa", check[TH_CHECK_KAPPA].value, 1 / 0.8, 1e-6);
    th_flow_destroy(flow);
}

/* n and c vary: well, c = sqrt(n), n = m^2 in the pocket. Atoms per healing length go as n/c =
 * sqrt(n), least in the pocket; coherence too. */
static void test_well(void **state)
{
    const double m = 0.5;
    th_flow *flow = flow_of("well", open_ends(), (const double[]){1, m, 4});
    const th_experiment x = {.density = 30, .temperature = 0.1};
    th_check check[TH_CHECKS];

    (void)state;
    ask(flow, &x, check);
    close_to("mean field", check[TH_CHECK_MEAN_FIELD].value, 30 * m, 30 * 1e-6);
    close_to("coherence", check[TH_CHECK_COHERENCE].value * th_flow_horizon_distance(flow),
             2 * 30 * m * m / 0.1, 1e-3);
    close_to("thermal", check[TH_CHECK_THERMAL].value, 0.1, 1e-6); /* c = 1 upstream */
    th_flow_destroy(flow);
}

static void test_errors(void **state)
{
    th_flow *flow = step_flow(1, 1.5, 0.5, 1.4, 6);
    th_experiment x = {0};
    th_check check[TH_CHECKS];

    (void)state;
    assert_int_equal(th_validity_check(NULL, &x, check, NULL), TH_EINVAL);
    assert_int_equal(th_validity_check(flow, NULL, check, NULL), TH_EINVAL);
    assert_int_equal(th_validity_check(flow, &x, NULL, NULL), TH_EINVAL);
    x.hold = -1;
    assert_int_equal(th_validity_check(flow, &x, check, NULL), TH_EINVAL);
    x.hold = NAN;
    assert_int_equal(th_validity_check(flow, &x, check, NULL), TH_EINVAL);
    th_flow_destroy(flow);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_step),
        cmocka_unit_test(test_kappa),
        cmocka_unit_test(test_well),
        cmocka_unit_test(test_errors),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
