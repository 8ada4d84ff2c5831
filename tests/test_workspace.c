/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Workspaces: contents of blocks, their reuse, refused memory, a point answered in one. What a
 * whole sweep asks for: test_allocations.c. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>
#include <cmocka.h>

#include "flows.h"
#include "refuse.h"
#include "twinhorizon/sweep.h"
#include "workspace.h"

extern void openblas_set_num_threads(int threads);

static th_workspace *create(void)
{
    th_workspace *w = NULL;

    assert_int_equal(th_workspace_create(&w, NULL), TH_OK);
    return w;
}

static bool all_are(const unsigned char *bytes, size_t count, int value)
{
    for (size_t i = 0; i < count; i++)
        if (bytes[i] != value)
            return false;
    return true;
}

/* With and without a workspace: taken blocks are zero whatever stood there before, aligned for
 * anything, apart from each other, and keep their contents when stretched. */
static void test_blocks(void **state)
{
    (void)state;
    for (int with = 0; with < 2; with++) {
        th_workspace *w = with ? create() : NULL;

        for (int round = 0; round < 3; round++) {
            unsigned char *block[40];

            for (size_t i = 0; i < 40; i++) {
                block[i] = th_take(w, i * i, 3);
                assert_non_null(block[i]);
                assert_int_equal((uintptr_t)block[i] % _Alignof(max_align_t), 0);
                assert_true(all_are(block[i], 3 * i * i, 0));
                memset(block[i], (int)i + 1, 3 * i * i);
            }
            for (size_t i = 0; i < 40; i++) {
                assert_true(all_are(block[i], 3 * i * i, (int)i + 1));
                block[i] = th_stretch(w, block[i], 5 * i * i + 1);
                assert_non_null(block[i]);
                assert_true(all_are(block[i], 3 * i * i, (int)i + 1));
                memset(block[i], (int)i + 1, 5 * i * i + 1);
            }
            for (size_t i = 0; i < 40; i++) {
                assert_true(all_are(block[i], 5 * i * i + 1, (int)i + 1));
                th_give(w, block[i]);
            }
        }
        th_give(w, NULL);
        th_workspace_destroy(w);
    }
    th_workspace_destroy(NULL);
    assert_int_equal(th_workspace_create(NULL, NULL), TH_EINVAL);
}

/* What was given back serves again: with all memory refused the same sizes are granted, others are
 * not. Sizes that no machine has, and products that overflow, are refused in any case. */
static void test_reuse(void **state)
{
    th_workspace *w = create();
    void *block[10], *small;

    (void)state;
    for (size_t i = 0; i < 10; i++) {
        block[i] = th_take(w, 1000 + i, 8);
        assert_non_null(block[i]);
    }
    for (size_t i = 0; i < 10; i++)
        th_give(w, block[i]);
    refuse_from(0);
    for (size_t i = 0; i < 10; i++) {
        block[i] = th_take(w, 1001 - i, 8);
        assert_non_null(block[i]);
    }
    assert_null(th_take(w, 1000, 8));
    block[9] = th_stretch(w, block[9], 8000); /* within the block's power of two */
    assert_non_null(block[9]);
    assert_null(th_stretch(w, block[9], 20000)); /* and the old one stays */
    assert_null(th_stretch(w, NULL, 1));
    assert_false(refuse_stop());
    assert_null(th_take(w, SIZE_MAX / 2, 4));
    assert_null(th_take(w, SIZE_MAX / 2, 1));
    assert_null(th_stretch(w, NULL, SIZE_MAX));
    small = th_stretch(w, NULL, 1);
    assert_non_null(small);
    th_give(w, small);
    for (size_t i = 0; i < 10; i++)
        th_give(w, block[i]);
    th_workspace_destroy(w);
    refuse_from(0);
    assert_int_equal(th_workspace_create(&w, NULL), TH_ENOMEM);
    assert_false(refuse_stop());
    assert_null(w);
}

static const char *const shape_name[] = {"step", "tanh", "sech", "well", "barriers"};
enum { SHAPES = sizeof shape_name / sizeof *shape_name };

/* A short pocket of a shape; keys are found by their names. */
static th_flow_setup setup_of(int which)
{
    static const struct {
        const char *key;
        double value;
    } all[] = {{"speed", 1},
               {"sound_upstream", 1.5},
               {"sound_pocket", 0.5},
               {"depth", 2},
               {"sound_downstream", 1.5},
               {"width_black", 0.5},
               {"width_white", 0.5},
               {"gap", 2},
               {"width", 1},
               {"mach", 0.6}};
    th_flow_setup setup = {.shape = th_shape_find(shape_name[which]), .density = 1};

    assert_non_null(setup.shape);
    for (int i = 0; i < setup.shape->keys; i++)
        for (size_t k = 0; k < sizeof all / sizeof *all; k++)
            if (strcmp(setup.shape->key[i].key, all[k].key) == 0 && !setup.shape->key[i].si_only) {
                setup.value[i] = all[k].value;
                setup.given[i] = true;
            }
    return setup;
}

static void same_point(const th_point *a, const th_point *b)
{
    assert_int_equal(a->state, b->state);
    assert_int_equal(a->unstable, b->unstable);
    assert_int_equal(a->count, b->count);
    for (int i = 0; i < a->count; i++) {
        assert_true(a->mode[i].omega_re == b->mode[i].omega_re);
        assert_true(a->mode[i].omega_im == b->mode[i].omega_im);
        assert_true(a->mode[i].omega_error == b->mode[i].omega_error);
    }
}

/* A point answered in a workspace is the one answered without, every shape; a third one asks for
 * no memory but the list of roots that the finder hands out. */
static void test_points(void **state)
{
    const th_point *none[2] = {NULL, NULL};

    (void)state;
    for (int s = 0; s < SHAPES; s++) {
        th_workspace *w = create();
        th_flow_setup setup = setup_of(s);
        th_point plain = {0}, point = {.workspace = w}, copy = {.workspace = w};

        assert_int_equal(th_point_answer(&setup, 1e-9, none, &plain, NULL), TH_OK);
        assert_int_equal(plain.state, TH_POINT_OK);
        assert_true(plain.unstable > 0);
        setup.workspace = w;
        for (int i = 0; i < 2; i++) { /* the second time the point holds its modes from the start */
            assert_int_equal(th_point_answer(&setup, 1e-9, none, &point, NULL), TH_OK);
            same_point(&plain, &point);
        }
        refuse_from(1);
        assert_int_equal(th_point_answer(&setup, 1e-9, none, &point, NULL), TH_OK);
        assert_true(refuse_stop());
        same_point(&plain, &point);
        assert_int_equal(th_point_copy(&point, &copy, NULL), TH_OK); /* between workspaces */
        same_point(&plain, &copy);
        assert_int_equal(th_point_copy(&copy, &plain, NULL), TH_OK);
        th_point_clear(&plain);
        th_point_clear(&point);
        th_point_clear(&copy);
        th_workspace_destroy(w);
    }
}

/* Every allocation refused in turn, in a new workspace each time: the status says so, and nothing
 * stays behind (the address checker looks for that). */
static void test_refused(void **state)
{
    const th_point *none[2] = {NULL, NULL};

    (void)state;
    for (int s = 0; s < SHAPES; s++) {
        long k = 0;

        for (;; k++) {
            th_workspace *w = create();
            th_flow_setup setup = setup_of(s);
            th_point point = {.workspace = w};
            th_status st;
            bool enough;

            setup.workspace = w;
            refuse_from(k);
            st = th_point_answer(&setup, 1e-9, none, &point, NULL);
            enough = refuse_stop();
            th_point_clear(&point);
            th_workspace_destroy(w);
            assert_int_equal(st, enough ? TH_OK : TH_ENOMEM);
            if (enough)
                break;
        }
        assert_true(k > 10); /* so many blocks at least: the flow's alone are nine */
    }
}

/* The same for a sweep with its workspaces: what was finished before is in the journal, and with
 * memory again it goes on to the end. */
static void test_sweep_refused(void **state)
{
    static const char text[] = "[units]\nsystem = reduced\n[flow]\nshape = step\nspeed = 1\n"
                               "sound_upstream = 1.5\nsound_pocket = 0.5\nsound_downstream = 1.5\n"
                               "[sweep]\ngap = 2, 2.1, 3\n";
    const th_sweep_options o = {.threads = 1, .part = 1, .parts = 1};
    char folder[] = "/tmp/test_workspace_XXXXXX", path[64];
    th_case *c = NULL;
    long before = 0;
    bool enough = false;

    (void)state;
    assert_int_equal(th_case_read_text("text", text, NULL, 0, &c, NULL), TH_OK);
    assert_non_null(mkdtemp(folder));
    (void)snprintf(path, sizeof path, "%s/journal", folder);
    for (long k = 0; !enough; k++) {
        th_journal *journal = NULL;
        th_status st;

        assert_int_equal(th_journal_open(path, c, 3, false, &journal, NULL), TH_OK);
        refuse_from(k);
        st = th_sweep_run(c, &o, journal, NULL);
        enough = refuse_stop();
        assert_int_equal(st, enough ? TH_OK : TH_ENOMEM);
        assert_true(th_journal_count(journal) >= before); /* more memory, more points */
        before = th_journal_count(journal);
        assert_int_equal(th_sweep_run(c, &o, journal, NULL), TH_OK);
        assert_int_equal(th_journal_count(journal), 3);
        assert_int_equal(th_journal_close(journal, NULL), TH_OK);
        assert_int_equal(remove(path), 0);
    }
    assert_int_equal(before, 3);
    assert_int_equal(rmdir(folder), 0);
    th_case_destroy(c);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_blocks),        cmocka_unit_test(test_reuse),
        cmocka_unit_test(test_points),        cmocka_unit_test(test_refused),
        cmocka_unit_test(test_sweep_refused),
    };

    openblas_set_num_threads(1); /* small matrices: more threads only wait for each other */
    return cmocka_run_group_tests(tests, NULL, NULL);
}
