/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * How safe the number of growing modes is: the margin of the static index scatters over noisy
 * copies of one table as th_count_distance says it does for one of them. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <unistd.h>
#include <cmocka.h>

#include "flows.h"
#include "twinhorizon/index.h"
#include "twinhorizon/count_distance.h"

static const char *const path = "test_count_distance.csv.tmp";

/* Normal numbers: the polar form of two uniform ones. */
static double normal(uint64_t *seed)
{
    const double u = draw(seed, 1e-12, 1), w = draw(seed, 0, 1);

    return sqrt(-2 * log(u)) * cos(2 * pi * w);
}

/* A tanh pocket of length 6.3 with 1 % of noise on both columns, the errors stated. */
static th_flow *noisy(uint64_t *seed)
{
    const double noise = 0.01;
    th_flow_setup s = {.shape = th_shape_find("table"), .density = 1, .ends = open_ends()};
    FILE *file = fopen(path, "w");
    th_data *data = NULL;
    th_flow *flow = NULL;
    th_error err = {0};

    assert_non_null(file);
    fputs("x,speed,sound,speed_error,sound_error\n", file);
    for (int i = -160; i <= 160; i++) {
        const double x = i / 10.0, b = (1 - tanh((x + 3.15) / 0.6)) / 2;
        const double w = (1 + tanh((x - 3.15) / 0.7)) / 2, c = 0.55 + 0.8 * b + 0.9 * w;

        fprintf(file, "%.10g,%.12g,%.12g,%g,%.6g\n", x, 1 + noise * normal(seed),
                c * (1 + noise * normal(seed)), noise, noise * c);
    }
    assert_int_equal(fclose(file), 0);
    if (th_data_read(path, TH_SYSTEM_REDUCED, &data, &err) != TH_OK)
        fail_msg("%s", err.text);
    s.data = data;
    if (th_flow_build(&s, &flow, &err) != TH_OK)
        fail_msg("%s: %s", err.key, err.text);
    th_data_destroy(data);
    (void)unlink(path);
    return flow;
}

/* 60 copies: the ratio of their scatter to the quoted one is within 0.75 and 1.3 at more than 99 %
 * (chi-square of 59 degrees of freedom), if the quoted one is right to a tenth. */
static void test_distance(void **state)
{
    enum { COPIES = 60 };
    uint64_t seed = 2718;
    double margin[COPIES], quoted = 0, mean = 0, scatter = 0;

    (void)state;
    for (int i = 0; i < COPIES; i++) {
        th_flow *flow = noisy(&seed);
        th_index index;
        th_error err = {0};
        double sigmas;

        if (th_index_open(flow, &index, &err) != TH_OK)
            fail_msg("%s", err.text);
        margin[i] = index.margin;
        mean += margin[i] / COPIES;
        if (i % 6 == 0) {
            if (th_count_distance(flow, &sigmas, &err) != TH_OK)
                fail_msg("%s", err.text);
            assert_true(sigmas > 0);
            quoted += fabs(index.margin) / sigmas / (COPIES / 6);
        }
        th_flow_destroy(flow);
    }
    for (int i = 0; i < COPIES; i++)
        scatter += (margin[i] - mean) * (margin[i] - mean) / (COPIES - 1);
    scatter = sqrt(scatter);
    print_message("# margin scatters by %.3g, quoted %.3g\n", scatter, quoted);
    assert_true(scatter > 0.75 * quoted && scatter < 1.3 * quoted);
}

static void test_none(void **state)
{
    th_flow *flow = step_flow(1, 1.5, 0.5, 1.5, 6);
    double sigmas;

    (void)state;
    assert_int_equal(th_count_distance(flow, &sigmas, NULL), TH_ENONE);
    assert_int_equal(th_count_distance(NULL, &sigmas, NULL), TH_EINVAL);
    th_flow_destroy(flow);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_distance),
        cmocka_unit_test(test_none),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
