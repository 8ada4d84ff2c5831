/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Events between two points of a line. In: the points and the branches of their modes. Out: births,
 * mergers, splits, deaths. Calls nobody.
 * Let i purely growing modes (Re omega = 0, counted once) and o oscillating ones (counted twice,
 * with their mirror images) come to i + di and o + do. A merger takes one from i to o, or two; a
 * birth or death changes i. So there are |do| mergers or splits, and what is left over of di + do
 * are births or deaths, but for those that a merger or split of two absorbs. Numbers alone say what
 * happens; branches say to which mode, first of all to one that has them changed. To add a kind of
 * event: its count in th_events_find, its modes in a row of rank. Proof: tests/test_events.c,
 * tests/check_sweep.py. */
#include "twinhorizon/sweep.h"

/* What a growing mode is at the other point, by its branch. */
typedef enum { NOWHERE, PURE, PAIR } fate;

/* One point against the other. */
typedef struct {
    const th_point *point, *other;
    const int *branch, *other_branch;
} side;

const char *th_event_kind_text(th_event_kind kind)
{
    static const char *const text[] = {[TH_EVENT_BIRTH] = "birth",
                                       [TH_EVENT_MERGER] = "merger",
                                       [TH_EVENT_SPLIT] = "split",
                                       [TH_EVENT_DEATH] = "death"};

    return text[kind];
}

/* Of mode i of a point. */
static fate what(const th_point *p, int i)
{
    if (p->mode[i].label != TH_LABEL_UNSTABLE)
        return NOWHERE;
    return p->mode[i].omega_re == 0.0 ? PURE : PAIR;
}

static int number_of(const th_point *p, fate kind)
{
    int sum = 0;

    for (int i = 0; i < p->count; i++)
        sum += what(p, i) == kind;
    return sum;
}

/* What mode i is at the other point. */
static fate elsewhere(const side *s, int i)
{
    for (int j = 0; j < s->other->count; j++)
        if (s->other_branch[j] == s->branch[i] && what(s->other, j) != NOWHERE)
            return what(s->other, j);
    return NOWHERE;
}

/* Which modes an event happens to: first those that are [0][0] here and [0][1] at the other point,
 * then those of the next row. There are always enough: of n more modes here n at least are nowhere
 * there, of n more pairs n at least are no pairs there. */
typedef fate rank[2][2];
static const rank comes = {{PURE, NOWHERE}, {PAIR, NOWHERE}};
static const rank turns = {{PAIR, PURE}, {PAIR, NOWHERE}};
static const rank comes_as_pair = {{PAIR, NOWHERE}, {PAIR, PURE}};

/* Add `count` events; backwards: from the last mode on, so that pairs that come are others than
 * those that turn. */
static int add(const side *s, const rank r, bool backwards, th_event like, int count,
               th_event *event)
{
    const int modes = s->point->count;
    int n = 0;

    for (int k = 0; k < 2; k++)
        for (int j = 0; j < modes && n < count; j++) {
            const int i = backwards ? modes - 1 - j : j;

            if (what(s->point, i) != r[k][0] || elsewhere(s, i) != r[k][1])
                continue;
            event[n] = like;
            event[n++].branch = s->branch[i];
        }
    return n;
}

static int at_least_zero(int x)
{
    return x > 0 ? x : 0;
}

/* Pairs that appear in whole between conservative ends: those for which no purely growing mode is
 * lost; negative: that vanish. */
static int whole_pairs(int pure, int pairs)
{
    return pairs > 0 ? at_least_zero(pairs - at_least_zero(-pure))
                     : -at_least_zero(-pairs - at_least_zero(pure));
}

int th_events_find(const th_point *before, const int *branch_before, const th_point *now,
                   const int *branch_now, bool open, th_event *event)
{
    const side old = {before, now, branch_before, branch_now};
    const side new = {now, before, branch_now, branch_before};
    const int pure = number_of(now, PURE) - number_of(before, PURE);
    const int pairs = number_of(now, PAIR) - number_of(before, PAIR);
    const int whole = open ? 0 : whole_pairs(pure, pairs);
    const int turned = pairs - whole; /* mergers, or splits when negative */
    const int left = pure + turned;   /* births, or deaths when negative, before absorption */
    const int mergers = at_least_zero(turned), splits = at_least_zero(-turned);
    const int come = at_least_zero(left), gone = at_least_zero(-left);
    const int met = mergers < gone ? mergers : gone;  /* mergers of two growing modes */
    const int parted = splits < come ? splits : come; /* splits into two */
    int n = 0;

    n += add(&new, comes, false, (th_event){.kind = TH_EVENT_BIRTH, .change = 1}, come - parted,
             event);
    n += add(&new, comes_as_pair, true, (th_event){.kind = TH_EVENT_BIRTH, .change = 2},
             at_least_zero(whole), event + n);
    n += add(&new, turns, false, (th_event){.kind = TH_EVENT_MERGER, .change = 1}, mergers,
             event + n);
    for (int k = 0; k < met; k++)
        event[n - 1 - k].change = 0;
    n += add(&old, turns, false, (th_event){.kind = TH_EVENT_SPLIT, .change = -1}, splits,
             event + n);
    for (int k = 0; k < parted; k++)
        event[n - 1 - k].change = 0;
    n += add(&old, comes_as_pair, true, (th_event){.kind = TH_EVENT_DEATH, .change = -2},
             at_least_zero(-whole), event + n);
    n += add(&old, comes, false, (th_event){.kind = TH_EVENT_DEATH, .change = -1}, gone - met,
             event + n);
    return n;
}
