/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of sweeps: order and contents of the points, points without an answer, threads, branches.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>
#include <cmocka.h>

#include "flows.h"
#include "twinhorizon/modes.h"
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

enum { MOST = 64 };

/* What a sink saw. */
typedef struct {
    int seen, stop_at;
    th_point point[MOST];
} record;

static th_status take(void *ctx, const th_point *point, th_error *err)
{
    record *r = ctx;

    if (r->seen == r->stop_at)
        return th_fail(err, TH_EIO, "the sink is full");
    return th_point_copy(point, &r->point[r->seen++], err);
}

static void record_clear(record *r)
{
    for (int i = 0; i < MOST; i++)
        th_point_clear(&r->point[i]);
    *r = (record){.stop_at = MOST};
}

/* Every block of a case, in order. */
static void run_blocks(const th_case *c, record *r)
{
    th_error err = {0};

    record_clear(r);
    for (long b = 0; b < th_sweep_blocks(c); b++) {
        long first;
        int count;

        th_sweep_block(c, b, &first, &count);
        assert_int_equal(first, r->seen);
        if (th_sweep_run_block(c, b, NULL, 0, NULL, take, r, NULL, &err) != TH_OK)
            fail_msg("%s", err.text);
        assert_int_equal(r->seen, first + count);
    }
}

/* ---- the grid ------------------------------------------------------------------------------- */

/* First axis slowest; every point as a configuration of its own (number of switch-on lengths
 * L_j = [2 atan(k/k_0) + j pi]/k_0 passed, set-up of Phys. Rev. D 88, 125012 (2013)). */
static void test_grid(void **state)
{
    th_case *c = case_of("[sweep]\nsound_pocket = 0.3, 0.5\ngap = 1 to 7 in 4\n");
    static record r;
    long points = 0;

    (void)state;
    assert_int_equal(th_sweep_size(c, &points, NULL), TH_OK);
    assert_int_equal(points, 8);
    run_blocks(c, &r);
    assert_int_equal(r.seen, 8);
    for (int i = 0; i < 8; i++) {
        const double sound = i < 4 ? 0.3 : 0.5, gap = 1 + 2 * (i % 4);
        const double k_0 = 2 * sqrt(0.75 * 0.75 - sound * sound), k = 2 * sqrt(1 - 0.75 * 0.75);
        const th_point *p = &r.point[i];
        const th_flow_setup setup = th_sweep_setup(c, i);
        double value[2];
        int want = 0;

        while ((2 * atan(k / k_0) + want * pi) / k_0 < gap)
            want++;
        th_sweep_values(c, i, value);
        close_to("sound_pocket", value[0], sound, 1e-15);
        close_to("gap", value[1], gap, 1e-14);
        assert_true(setup.value[c->axis[0].key] == value[0] && setup.given[c->axis[0].key]);
        assert_true(setup.value[c->axis[1].key] == value[1] && setup.given[c->axis[1].key]);
        assert_int_equal(p->number, i);
        assert_int_equal(p->state, TH_POINT_OK);
        assert_string_equal(p->message, "");
        close_to("distance of the horizons", p->horizon_distance, gap, 1e-12);
        assert_int_equal(p->unstable, want);
        assert_true(p->index_known && p->index == want);
    }
    record_clear(&r);
    th_case_destroy(c);
}

/* Blocks cover every point once, in order, and stay inside a line of the last axis. */
static void test_blocks(void **state)
{
    th_case *c = case_of("[sweep]\nsound_pocket = 0.3, 0.4, 0.5\ngap = 1 to 7 in 71\n");
    long next = 0;

    (void)state;
    for (long b = 0; b < th_sweep_blocks(c); b++) {
        long first;
        int count;

        th_sweep_block(c, b, &first, &count);
        assert_int_equal(first, next);
        assert_true(count >= 1 && count <= TH_SWEEP_BLOCK);
        assert_int_equal(first / 71, (first + count - 1) / 71);
        next += count;
    }
    assert_int_equal(next, 3 * 71);
    th_case_destroy(c);
}

/* A point whose flow breaks a rule (tanh edges need v between the sound speeds) is recorded with
 * its sentence, and the sweep goes on. */
static void test_failed_points(void **state)
{
    static record r;
    th_case *c = NULL;
    th_error err = {0};

    (void)state;
    if (th_case_read_text("text",
                          "[units]\nsystem = reduced\n[flow]\nshape = tanh\nspeed = 0.75\n"
                          "sound_upstream = 1\nsound_pocket = 0.3\nsound_downstream = 1\n"
                          "width_black = 0.5\nwidth_white = 0.5\ngap = 3\n[solve]\n"
                          "accuracy = 1e-4\n[sweep]\ngap = 5, 6\nsound_pocket = 0.5, 0.8, 0.6\n",
                          NULL, 0, &c, &err) != TH_OK)
        fail_msg("%s", err.text);
    run_blocks(c, &r);
    assert_int_equal(r.seen, 6);
    for (int i = 0; i < 6; i++) {
        const th_point *p = &r.point[i];

        if (i % 3 == 1) {
            assert_int_equal(p->state, TH_POINT_FAILED);
            assert_non_null(strstr(p->message, "sound_pocket"));
            assert_true(p->horizon_distance == 0);
            assert_int_equal(p->count, 0);
        } else {
            assert_int_equal(p->state, TH_POINT_OK);
            assert_true(p->unstable > 0);
        }
    }
    record_clear(&r);
    th_case_destroy(c);
}

static void test_contract(void **state)
{
    th_case *c = case_of(""), *many;
    static record r;
    th_error err = {0};
    long points = 0;

    (void)state;
    assert_int_equal(th_sweep_size(c, &points, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "[sweep]"));
    assert_int_equal(th_sweep_size(NULL, &points, &err), TH_EINVAL);
    assert_int_equal(th_sweep_size(c, NULL, &err), TH_EINVAL);
    th_case_destroy(c);
    /* more than 2^31 - 1 points are too many */
    many = case_of("[sweep]\nsound_pocket = 0.3 to 0.5 in 40000\ngap = 1 to 7 in 20000\n");
    assert_int_equal(th_sweep_size(many, &points, &err), TH_OK);
    assert_int_equal(points, 800000000);
    many->axis[1].count = 60000; /* the reader of cases has a limit of its own */
    assert_int_equal(th_sweep_size(many, &points, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "more than"));
    th_case_destroy(many);
    /* a sink that refuses ends the block with its own status */
    c = case_of("[sweep]\ngap = 1 to 7 in 4\n");
    record_clear(&r);
    r.stop_at = 2;
    assert_int_equal(th_sweep_run_block(c, 0, NULL, 0, NULL, take, &r, NULL, &err), TH_EIO);
    assert_string_equal(err.text, "the sink is full");
    assert_int_equal(r.seen, 2);
    record_clear(&r);
    th_case_destroy(c);
}

/* ---- journals ------------------------------------------------------------------------------- */

/* The points of a run with so many threads and parts, read back from its journal. */
static void run_journal(const th_case *c, const char *folder, int threads, int parts, record *r)
{
    char path[64];
    th_journal *journal = NULL;
    long points;
    th_error err = {0};

    record_clear(r);
    (void)snprintf(path, sizeof path, "%s/j%d-%d", folder, threads, parts);
    assert_int_equal(th_sweep_size(c, &points, NULL), TH_OK);
    assert_int_equal(th_journal_open(path, c, points, false, &journal, &err), TH_OK);
    for (int part = 1; part <= parts; part++) {
        const th_sweep_options o = {.threads = threads, .part = part, .parts = parts};

        if (th_sweep_run(c, &o, journal, &err) != TH_OK)
            fail_msg("%s", err.text);
    }
    assert_int_equal(th_journal_count(journal), points);
    for (long i = 0; i < points; i++) {
        assert_int_equal(th_journal_get(journal, i, &r->point[i], &err), TH_OK);
        r->seen++;
    }
    assert_int_equal(th_journal_close(journal, &err), TH_OK);
    assert_int_equal(remove(path), 0);
}

/* The numbers do not depend on threads, on parts, nor on the journal: the same bits. */
static void test_threads(void **state)
{
    th_case *c = case_of("[sweep]\nsound_pocket = 0.3, 0.45\ngap = 2 to 8 in 25\n");
    static record one, other;
    static const int setting[3][2] = {{1, 1}, {3, 1}, {2, 2}};
    char folder[] = "/tmp/test_sweep_XXXXXX";

    (void)state;
    assert_non_null(mkdtemp(folder));
    run_blocks(c, &one);
    for (int k = 0; k < 3; k++) {
        run_journal(c, folder, setting[k][0], setting[k][1], &other);
        assert_int_equal(other.seen, one.seen);
        for (int i = 0; i < one.seen; i++) {
            const th_point *a = &one.point[i], *b = &other.point[i];

            assert_int_equal(a->count, b->count);
            assert_int_equal(a->state, b->state);
            assert_true(a->number == b->number && a->unstable == b->unstable);
            for (int m = 0; m < a->count; m++)
                assert_true(a->mode[m].omega_re == b->mode[m].omega_re &&
                            a->mode[m].omega_im == b->mode[m].omega_im &&
                            a->mode[m].omega_error == b->mode[m].omega_error);
        }
    }
    assert_int_equal(rmdir(folder), 0);
    record_clear(&one);
    record_clear(&other);
    th_case_destroy(c);
}

/* Points that start from their neighbours find what th_solve finds alone. */
static void test_alone(void **state)
{
    th_case *c = case_of("[sweep]\ngap = 2 to 9 in 15\n");
    static record r;

    (void)state;
    run_blocks(c, &r);
    for (int i = 0; i < r.seen; i++) {
        const th_flow_setup setup = th_sweep_setup(c, i);
        const th_solve_options o = {.accuracy = 1e-9};
        th_flow *flow = NULL;
        th_solution *s = NULL;
        int growing = 0;

        assert_int_equal(th_flow_build(&setup, &flow, NULL), TH_OK);
        assert_int_equal(th_solve(flow, &o, &s, NULL), TH_OK);
        assert_int_equal(r.point[i].unstable, s->unstable);
        for (int m = 0; m < s->count; m++) {
            if (s->mode[m].label != TH_LABEL_UNSTABLE)
                continue;
            assert_true(growing < r.point[i].count);
            close_to("Re omega", r.point[i].mode[growing].omega_re, s->mode[m].omega_re,
                     r.point[i].mode[growing].omega_error + s->mode[m].omega_error);
            close_to("Im omega", r.point[i].mode[growing].omega_im, s->mode[m].omega_im,
                     r.point[i].mode[growing].omega_error + s->mode[m].omega_error);
            growing++;
        }
        assert_true(growing > 0);
        th_solution_destroy(s);
        th_flow_destroy(flow);
    }
    record_clear(&r);
    th_case_destroy(c);
}

/* ---- branches ------------------------------------------------------------------------------- */

/* Along the gap every branch is continuous: one mode a point, small steps, born at a switch-on.
 * The first mode grows, becomes a pair at L_1 = 3.40 and lives on; the second is born at
 * L_2 = 5.6849. Reach 0.05: at L_1 the frequency goes as a square root, 0.04 in the first step. */
static void test_continuous(void **state)
{
    th_case *c = case_of("[sweep]\ngap = 2 to 6 in 26\n");
    static record r;
    th_branches line = {0};
    int branch[2][8] = {{0}};

    (void)state;
    run_blocks(c, &r);
    assert_int_equal(r.seen, 26);
    for (int i = 0; i < 26; i++) {
        const th_point *p = &r.point[i], *before = i > 0 ? p - 1 : NULL;
        const int *old = branch[(i + 1) % 2];
        int *now = branch[i % 2];

        assert_int_equal(p->count, i < 24 ? 1 : 2);
        assert_int_equal(th_branches_next(&line, p, 0.05, now, NULL), TH_OK);
        for (int k = 0; k < p->count; k++) {
            const bool first = p->count == 1 || p->mode[k].omega_re > 0;

            assert_int_equal(now[k], first ? 1 : 2);
            for (int q = 0; before != NULL && q < before->count; q++)
                if (old[q] == now[k])
                    close_to("step",
                             hypot(p->mode[k].omega_re - before->mode[q].omega_re,
                                   p->mode[k].omega_im - before->mode[q].omega_im),
                             0, 0.05);
        }
    }
    th_branches_clear(&line);
    record_clear(&r);
    th_case_destroy(c);
}

/* Frequencies by hand: answers of one number each. */
static void follow(th_branches *line, int count, const double *re, double reach, const int *want)
{
    th_point_mode mode[4] = {0};
    const th_point point = {.count = count, .mode = mode};
    int branch[4];

    for (int i = 0; i < count; i++)
        mode[i].omega_re = re[i];
    assert_int_equal(th_branches_next(line, &point, reach, branch, NULL), TH_OK);
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
        cmocka_unit_test(test_grid),          cmocka_unit_test(test_blocks),
        cmocka_unit_test(test_failed_points), cmocka_unit_test(test_contract),
        cmocka_unit_test(test_threads),       cmocka_unit_test(test_alone),
        cmocka_unit_test(test_continuous),    cmocka_unit_test(test_branches),
    };

    openblas_set_num_threads(1); /* small matrices: more threads only wait for each other */
    return cmocka_run_group_tests(tests, NULL, NULL);
}
