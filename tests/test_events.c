/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Events between two points: lists by hand, and that they add up whatever modes come and go.
 * Expected values follow from the words of sweep.h. Events of whole sweeps against switch-on
 * lengths: check_sweep.py. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>
#include <cmocka.h>

#include "flows.h"
#include "twinhorizon/sweep.h"

enum { MOST = 6 };

/* Modes at a point, from text: "I3" a purely growing one of branch 3, "O3" a pair, "-3" one that
 * does not grow. */
typedef struct {
    th_point point;
    th_point_mode mode[MOST];
    int branch[MOST];
} some;

static void put(some *s, char kind, int branch)
{
    const int i = s->point.count++;

    s->point.mode = s->mode;
    s->mode[i] = (th_point_mode){.omega_re = kind == 'I' ? 0 : 0.1,
                                 .omega_im = kind == '-' ? -0.1 : 0.1,
                                 .label = kind == '-' ? TH_LABEL_STABLE : TH_LABEL_UNSTABLE};
    s->branch[i] = branch;
    s->point.unstable += kind == 'I' ? 1 : kind == 'O' ? 2 : 0;
}

static void read_modes(const char *text, some *s)
{
    *s = (some){0};
    for (; text[0] != '\0'; text += text[2] == ' ' ? 3 : 2)
        put(s, text[0], text[1] - '0');
}

static int find(const some *before, const some *now, bool open, th_event *event)
{
    return th_events_find(&before->point, before->branch, &now->point, now->branch, open, event);
}

/* As text: "birth 3 +1, merger 4 +0". */
static void check(const char *before, const char *now, bool open, const char *want)
{
    th_event event[4 * MOST];
    char got[256] = "";
    some old, new;
    int n;

    read_modes(before, &old);
    read_modes(now, &new);
    n = find(&old, &new, open, event);
    for (int i = 0; i < n; i++) {
        char one[64];

        (void)snprintf(one, sizeof one, "%s%s %d %+d", i > 0 ? ", " : "",
                       th_event_kind_text(event[i].kind), event[i].branch, event[i].change);
        strcat(got, one);
    }
    if (strcmp(got, want) != 0)
        fail_msg("%s -> %s (%s ends): %s, want %s", before, now, open ? "open" : "closed", got,
                 want);
}

/* Each pair is read in both directions: births are deaths, mergers are splits. */
static void test_by_hand(void **state)
{
    static const struct {
        const char *a, *b;
        const char *open, *open_back; /* open ends: from a to b and from b to a */
        const char *closed, *closed_back;
    } list[] = {
        {"", "", "", "", "", ""},
        {"I1 O2", "I1 O2", "", "", "", ""},
        {"O2", "I1 O2", "birth 1 +1", "death 1 -1", "birth 1 +1", "death 1 -1"},
        /* an odd switch-on: the slowest turns into a pair */
        {"I1 O2", "O1 O2", "merger 1 +1", "split 1 -1", "merger 1 +1", "split 1 -1"},
        /* the same between points too far apart to follow it */
        {"I1 O2", "O3 O2", "merger 3 +1", "split 3 -1", "merger 3 +1", "split 3 -1"},
        /* two purely growing modes meet */
        {"I1 I2", "O1", "merger 1 +0", "split 1 +0", "merger 1 +0", "split 1 +0"},
        {"I1 I2 O3", "O3 O2", "merger 2 +0", "split 2 +0", "merger 2 +0", "split 2 +0"},
        /* a pair: born at zero of two, or in whole of two neutral modes */
        {"-1 I2", "O1 I2", "birth 1 +1, merger 1 +1", "split 1 -1, death 1 -1", "birth 1 +2",
         "death 1 -2"},
        /* several at once */
        {"I1", "O1 I2", "birth 2 +1, merger 1 +1", "split 1 -1, death 2 -1", "birth 1 +2",
         "death 1 -2"},
        {"I1 I2 I3", "O1 O4", "merger 1 +1, merger 4 +0", "split 1 -1, split 4 +0",
         "merger 1 +1, merger 4 +0", "split 1 -1, split 4 +0"},
        {"I1", "O1 O2", "birth 2 +1, merger 1 +1, merger 2 +1",
         "split 1 -1, split 2 -1, death 2 -1", "birth 2 +2, merger 1 +1", "split 1 -1, death 2 -2"},
        /* which one of two goes is told by the branches */
        {"I1 I2", "I2", "death 1 -1", "birth 1 +1", "death 1 -1", "birth 1 +1"},
        {"O1 O2", "O2", "split 1 -1, death 1 -1", "birth 1 +1, merger 1 +1", "death 1 -2",
         "birth 1 +2"},
    };

    (void)state;
    for (size_t i = 0; i < sizeof list / sizeof *list; i++) {
        check(list[i].a, list[i].b, true, list[i].open);
        check(list[i].b, list[i].a, true, list[i].open_back);
        check(list[i].a, list[i].b, false, list[i].closed);
        check(list[i].b, list[i].a, false, list[i].closed_back);
    }
}

static void draw_modes(uint64_t *seed, some *s)
{
    const int count = (int)draw(seed, 0, MOST + 1);

    *s = (some){0};
    for (int i = 0; i < count; i++) {
        const char kind = "IO-"[(int)draw(seed, 0, 3)];
        int branch;
        bool taken;

        do {
            branch = (int)draw(seed, 1, 2 * MOST);
            taken = false;
            for (int j = 0; j < i; j++)
                taken = taken || s->branch[j] == branch;
        } while (taken);
        put(s, kind, branch);
    }
}

static int growing(const some *s, bool pure)
{
    int sum = 0;

    for (int i = 0; i < s->point.count; i++)
        sum += s->mode[i].label == TH_LABEL_UNSTABLE && (s->mode[i].omega_re == 0) == pure;
    return sum;
}

/* Is the branch that of a growing mode of the point? */
static bool grows(const some *s, int branch)
{
    for (int i = 0; i < s->point.count; i++)
        if (s->branch[i] == branch)
            return s->mode[i].label == TH_LABEL_UNSTABLE;
    return false;
}

/* Modes and branches at random: the changes add up to that of the count, the numbers of purely
 * growing modes and pairs follow from the events, a branch is where its event needs it, and the way
 * back is the way there reversed. */
static void test_sums(void **state)
{
    uint64_t seed = 20261201;

    (void)state;
    for (int trial = 0; trial < 20000; trial++) {
        const bool open = trial % 2 == 0;
        th_event event[4 * MOST], back[4 * MOST];
        int pure, pairs, change = 0, n;
        some old, new;

        draw_modes(&seed, &old);
        draw_modes(&seed, &new);
        pure = growing(&old, true);
        pairs = growing(&old, false);
        n = find(&old, &new, open, event);
        assert_true(n <= 2 * (old.point.count + new.point.count));
        for (int i = 0; i < n; i++) {
            const th_event *e = &event[i];
            const bool comes = e->kind == TH_EVENT_BIRTH || e->kind == TH_EVENT_MERGER;

            change += e->change;
            assert_true(grows(comes ? &new : &old, e->branch));
            assert_true(i == 0 || event[i - 1].kind <= e->kind);
            switch (e->kind) {
            case TH_EVENT_BIRTH:
                assert_true(e->change == 1 || (!open && e->change == 2));
                pure += e->change == 1;
                pairs += e->change == 2;
                break;
            case TH_EVENT_DEATH:
                assert_true(e->change == -1 || (!open && e->change == -2));
                pure -= e->change == -1;
                pairs -= e->change == -2;
                break;
            case TH_EVENT_MERGER:
                assert_true(e->change == 0 || e->change == 1);
                pure -= e->change == 0 ? 2 : 1;
                pairs++;
                break;
            case TH_EVENT_SPLIT:
                assert_true(e->change == 0 || e->change == -1);
                pure += e->change == 0 ? 2 : 1;
                pairs--;
                break;
            }
        }
        assert_int_equal(change, new.point.unstable - old.point.unstable);
        assert_int_equal(pure, growing(&new, true));
        assert_int_equal(pairs, growing(&new, false));
        assert_int_equal(find(&new, &old, open, back), n);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_by_hand),
        cmocka_unit_test(test_sums),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
