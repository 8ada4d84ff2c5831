/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of sweeps: order and contents of the points, points without an answer, branches. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "branches.h"
#include "flows.h"
#include "twinhorizon/sweep.h"

extern void openblas_set_num_threads(int threads);

static th_case *case_of(const char *sweep)
{
    char text[1024];
    th_case *c = NULL;
    th_error err = {0};

    (void)snprintf(text, sizeof text,
                   "[units]\nsystem = reduced\n[flow]\nshape = step\nspeed = 0.75\n"
                   "sound_upstream = 1\nsound_pocket = 0.3\nsound_downstream = 1\ngap = 2\n"
                   "[ends]\nkind = open\n[solve]\naccuracy = 1e-6\n%s",
                   sweep);
    if (th_case_read_text("text", text, NULL, 0, &c, &err) != TH_OK)
        fail_msg("%s", err.text);
    return c;
}

/* What a sink saw. */
typedef struct {
    long seen, stop_at;
    double value[64][2];
    int unstable[64], branches[64][8], count[64];
    double re[64][8], im[64][8], distance[64];
    th_status status[64];
    char message[64][128];
} record;

static th_status take(void *ctx, const th_sweep_point *point, th_error *err)
{
    record *r = ctx;
    const long i = r->seen;

    if (i == r->stop_at)
        return th_fail(err, TH_EIO, "the sink is full");
    assert_int_equal(point->number, i);
    r->value[i][0] = point->value[0];
    r->value[i][1] = point->value[1];
    r->status[i] = point->status;
    r->distance[i] = point->horizon_distance;
    (void)snprintf(r->message[i], sizeof r->message[i], "%s", point->message);
    assert_true((point->answer != NULL) == (point->status == TH_OK));
    r->count[i] = r->unstable[i] = 0;
    if (point->answer != NULL) {
        r->unstable[i] = point->answer->unstable;
        r->count[i] = point->answer->count < 8 ? point->answer->count : 8;
        for (int k = 0; k < r->count[i]; k++) {
            r->branches[i][k] = point->branch[k];
            r->re[i][k] = point->answer->mode[k].omega_re;
            r->im[i][k] = point->answer->mode[k].omega_im;
        }
    }
    r->seen++;
    return TH_OK;
}

/* First axis slowest; every point as a configuration of its own (number of switch-on lengths
 * L_j = [2 atan(k/k_0) + j pi]/k_0 passed, set-up of Phys. Rev. D 88, 125012 (2013)). */
static void test_grid(void **state)
{
    th_case *c = case_of("[sweep]\nsound_pocket = 0.3, 0.5\ngap = 1 to 7 in 4\n");
    static record r;
    long points = 0;

    (void)state;
    r = (record){.stop_at = 64};
    assert_int_equal(th_sweep_size(c, &points, NULL), TH_OK);
    assert_int_equal(points, 8);
    assert_int_equal(th_sweep_run(c, take, &r, NULL), TH_OK);
    assert_int_equal(r.seen, 8);
    for (int i = 0; i < 8; i++) {
        const double sound = i < 4 ? 0.3 : 0.5, gap = 1 + 2 * (i % 4);
        const double k_0 = 2 * sqrt(0.75 * 0.75 - sound * sound), k = 2 * sqrt(1 - 0.75 * 0.75);
        int want = 0;

        while ((2 * atan(k / k_0) + want * pi) / k_0 < gap)
            want++;
        close_to("sound_pocket", r.value[i][0], sound, 1e-15);
        close_to("gap", r.value[i][1], gap, 1e-14);
        close_to("distance of the horizons", r.distance[i], gap, 1e-12);
        assert_int_equal(r.status[i], TH_OK);
        assert_string_equal(r.message[i], "");
        assert_int_equal(r.unstable[i], want);
    }
    th_case_destroy(c);
}

/* A point whose flow breaks a rule (pocket not supersonic is fine, tanh edges that need v between
 * the sound speeds are not) is handed on with its sentence, and the sweep goes on. */
static void test_failed_points(void **state)
{
    static const char *const set[] = {"flow.shape=tanh", "flow.width_black=0.5",
                                      "flow.width_white=0.5"};
    static record r;
    th_case *c = NULL;
    th_error err = {0};

    (void)state;
    r = (record){.stop_at = 64};
    if (th_case_read_text("text",
                          "[units]\nsystem = reduced\n[flow]\nshape = tanh\nspeed = 0.75\n"
                          "sound_upstream = 1\nsound_pocket = 0.3\nsound_downstream = 1\n"
                          "width_black = 0.5\nwidth_white = 0.5\ngap = 3\n[solve]\n"
                          "accuracy = 1e-4\n[sweep]\ngap = 2, 3\nsound_pocket = 0.5, 0.8, 0.6\n",
                          set, 0, &c, &err) != TH_OK)
        fail_msg("%s", err.text);
    assert_int_equal(th_sweep_run(c, take, &r, &err), TH_OK);
    assert_int_equal(r.seen, 6);
    for (int i = 0; i < 6; i++) {
        if (i % 3 == 1) {
            assert_int_equal(r.status[i], TH_EINVAL);
            assert_non_null(strstr(r.message[i], "sound_pocket"));
            assert_true(r.distance[i] == 0);
        } else {
            assert_int_equal(r.status[i], TH_OK);
            assert_true(r.unstable[i] > 0);
        }
    }
    th_case_destroy(c);
}

static void test_contract(void **state)
{
    th_case *c = case_of(""), *many;
    static record r;
    th_error err = {0};
    long points = 0;
    double *value;

    (void)state;
    assert_int_equal(th_sweep_size(c, &points, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "[sweep]"));
    assert_int_equal(th_sweep_run(c, take, &r, &err), TH_EINVAL);
    assert_int_equal(th_sweep_size(NULL, &points, &err), TH_EINVAL);
    assert_int_equal(th_sweep_size(c, NULL, &err), TH_EINVAL);
    th_case_destroy(c);
    /* more than 2^31 - 1 points are too many */
    many = case_of("[sweep]\nsound_pocket = 0.3 to 0.5 in 40000\ngap = 1 to 7 in 20000\n");
    assert_int_equal(th_sweep_size(many, &points, &err), TH_OK);
    assert_int_equal(points, 800000000);
    many->axis[1].count = 60000; /* the reader of cases has a limit of its own */
    value = many->axis[1].value;
    assert_int_equal(th_sweep_size(many, &points, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "more than"));
    assert_ptr_equal(value, many->axis[1].value);
    th_case_destroy(many);
    /* a sink that refuses ends the sweep with its own status */
    c = case_of("[sweep]\ngap = 1 to 7 in 4\nsound_pocket = 0.3, 0.4\n");
    r = (record){.stop_at = 2};
    assert_int_equal(th_sweep_run(c, take, &r, &err), TH_EIO);
    assert_string_equal(err.text, "the sink is full");
    assert_int_equal(r.seen, 2);
    th_case_destroy(c);
}

/* Along the gap every branch is continuous: one mode a point, small steps, numbers from 1 in each
 * line, born at a switch-on. Between gap 2 and 5.6 a growing mode becomes a pair (L_1 = 3.40), and
 * at 5.68 the next is born. */
static void test_continuous(void **state)
{
    th_case *c = case_of("[sweep]\nsound_upstream = 1, 1.02\ngap = 2 to 6 in 26\n");
    static record r;

    (void)state;
    r = (record){.stop_at = 64};
    assert_int_equal(th_sweep_run(c, take, &r, NULL), TH_OK);
    assert_int_equal(r.seen, 52);
    for (int i = 0; i < 52; i++) {
        int used = 0;

        for (int k = 0; k < r.count[i]; k++) {
            assert_true(r.branches[i][k] >= 1);
            assert_false(used >> r.branches[i][k] & 1); /* no two share one */
            used |= 1 << r.branches[i][k];
            if (i % 26 == 0) {
                assert_int_equal(r.branches[i][k], k + 1);
                continue;
            }
            for (int q = 0; q < r.count[i - 1]; q++) {
                const double step = hypot(r.re[i][k] - r.re[i - 1][q], r.im[i][k] - r.im[i - 1][q]);

                if (r.branches[i][k] == r.branches[i - 1][q])
                    assert_true(step < 0.03);
            }
        }
        assert_true(r.count[i] > 0);
        /* the first mode lives on throughout; the second comes near the end */
        assert_true(used & 2);
        assert_int_equal(used >> 2 & 1, i % 26 >= 24 || r.unstable[i] > 2);
    }
    th_case_destroy(c);
}

/* ---- branches by hand ----------------------------------------------------------------------- */

static void follow(th_branches *line, int count, const double *re, double reach, const int *want)
{
    th_mode mode[4] = {0};
    const th_solution answer = {.count = count, .mode = mode};
    int branch[4];

    for (int i = 0; i < count; i++)
        mode[i].omega_re = re[i];
    assert_int_equal(th_branches_next(line, &answer, reach, branch, NULL), TH_OK);
    for (int i = 0; i < count; i++)
        assert_int_equal(branch[i], want[i]);
}

/* Two modes that pass through each other keep their numbers, a mode that jumps is a new one, a
 * number that has died does not come back, a new line starts at 1. */
static void test_branches(void **state)
{
    th_branches line = {0};

    (void)state;
    follow(&line, 2, (double[]){1.0, 2.0}, 0.45, (int[]){1, 2});
    follow(&line, 2, (double[]){1.4, 1.7}, 0.45, (int[]){1, 2});
    follow(&line, 2, (double[]){1.4, 1.8}, 0.45, (int[]){2, 1}); /* crossed: 1.8 and 1.4 foreseen */
    follow(&line, 2, (double[]){1.1, 2.2}, 0.45, (int[]){2, 1});
    follow(&line, 2, (double[]){0.8, 4.0}, 0.45, (int[]){2, 3}); /* too far for 1 */
    follow(&line, 0, NULL, 0.45, NULL);
    follow(&line, 1, (double[]){0.5}, 0.45, (int[]){4});
    th_branches_clear(&line);
    follow(&line, 3, (double[]){3.0, 1.0, 2.0}, 0.45, (int[]){1, 2, 3});
    /* the nearest pair is joined first: 2.1 is 0.1 from 2, 2.3 0.3 from it */
    follow(&line, 3, (double[]){2.3, 2.1, 1.0}, 0.45, (int[]){4, 3, 2});
    th_branches_clear(&line);
    th_branches_clear(&line);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_grid),     cmocka_unit_test(test_failed_points),
        cmocka_unit_test(test_contract), cmocka_unit_test(test_continuous),
        cmocka_unit_test(test_branches),
    };

    openblas_set_num_threads(1); /* small matrices: more threads only wait for each other */
    return cmocka_run_group_tests(tests, NULL, NULL);
}
