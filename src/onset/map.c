/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Switch-on map. In: a case with axes. Out: a list of lengths for each point of the grid, handed on
 * in order. The unit of work is a block of neighbouring points on a line of the last axis: with
 * open ends each is foreseen from the ones before it in its block. May call: parallel, onset, case,
 * status. Proved by tests/test_onset.c. */
#include <limits.h>
#include <stdlib.h>
#include <string.h>

#include "alloc.h"
#include "onset/inside.h"
#include "parallel.h"

/* Points of a block: starting afresh costs about two points' worth. */
enum { BLOCK = 25 };
/* Blocks between two deliveries: enough that threads do not wait for the last one for long, few
 * enough that the memory of a map is that of some thousand points. */
enum { BATCH = 128 };

typedef struct {
    int count;
    struct {
        th_onset_list list;
        th_status status;
        char message[sizeof((th_error *)NULL)->text];
    } point[BLOCK];
} block;

typedef struct {
    const th_case *c;
    th_onset_options options;
    int key;
    int axes;
    const th_axis **axis; /* [axes] without the length key's */
    double *value;        /* [axes] of the point that is handed on */
    long points, blocks;  /* in all; of a line */
    int line;             /* points of a line */
    long done;            /* blocks delivered */
    block *batch;         /* [BATCH] the next ones */
    th_onset_sink sink;
    void *ctx;
} map;

static bool fatal(th_status st)
{
    return st == TH_ENOMEM || st == TH_EBUG;
}

/* Values of point `number` along the axes. */
static void place(const map *m, long number, double *value)
{
    for (int a = m->axes - 1; a >= 0; a--) {
        value[a] = m->axis[a]->value[number % m->axis[a]->count];
        number /= m->axis[a]->count;
    }
}

static long first_of(const map *m, long task)
{
    return task / m->blocks * m->line + task % m->blocks * BLOCK;
}

static int length_of(const map *m, long task)
{
    const long left = m->line - task % m->blocks * BLOCK;

    return (int)(left < BLOCK ? left : BLOCK);
}

static void clear(block *b)
{
    for (int i = 0; i < b->count; i++)
        th_onset_clear(&b->point[i].list);
    *b = (block){0};
}

static th_status work(void *ctx, long item, th_error *err)
{
    const map *m = ctx;
    const long task = m->done + item;
    double value[TH_SHAPE_KEYS_MAX];
    th_trail trail = {0};
    th_status st = TH_OK;
    block *b = &m->batch[item];

    b->count = length_of(m, task);
    for (int i = 0; !fatal(st) && i < b->count; i++) {
        th_flow_setup setup = m->c->setup;
        th_error why = {0};

        place(m, first_of(m, task) + i, value);
        for (int a = 0; a < m->axes; a++)
            th_axis_set(m->axis[a]->key, value[a], &setup);
        if (setup.ends.kind == TH_ENDS_OPEN)
            st = th_onset_open(&setup, &m->options, m->axes > 0 ? value[m->axes - 1] : 0.0, &trail,
                               &b->point[i].list, &why);
        else
            st = th_onset_closed(&setup, &m->options, &b->point[i].list, &why);
        b->point[i].status = st;
        memcpy(b->point[i].message, why.text, sizeof why.text);
        if (fatal(st) && err != NULL)
            *err = why;
    }
    th_trail_clear(&trail);
    return fatal(st) ? st : TH_OK;
}

static th_status deliver(const map *m, long task, const block *b, th_error *err)
{
    th_status st = TH_OK;

    for (int i = 0; st == TH_OK && i < b->count; i++) {
        const bool good = b->point[i].status == TH_OK;
        const th_onset_point point = {.number = first_of(m, task) + i,
                                      .points = m->points,
                                      .axes = m->axes,
                                      .axis = m->axis,
                                      .value = m->value,
                                      .status = b->point[i].status,
                                      .message = good ? "" : b->point[i].message,
                                      .list = good ? &b->point[i].list : NULL};

        place(m, point.number, m->value);
        st = m->sink(m->ctx, &point, err);
    }
    return st;
}

th_status th_onset_points(const th_case *c, long *points, th_error *err)
{
    long long product = 1;
    int key;

    if (c == NULL || points == NULL)
        return th_fail(err, TH_EINVAL, "onset: want a case and a place for the result");
    key = th_shape_length(c->setup.shape);
    for (int a = 0; a < c->axes; a++) {
        product *= c->axis[a].key == key ? 1 : c->axis[a].count;
        if (product > INT_MAX)
            return th_fail(err, TH_EINVAL, "the switch-on map of %s has more than %d points",
                           c->path, INT_MAX);
    }
    *points = (long)product;
    return TH_OK;
}

th_status th_onset_map(const th_case *c, const th_onset_options *options, th_onset_sink sink,
                       void *ctx, th_error *err)
{
    map m = {.c = c, .sink = sink, .ctx = ctx};
    long tasks;
    int threads;
    th_status st = TH_EBUG;

    if (c == NULL || options == NULL || sink == NULL)
        return th_fail(err, TH_EINVAL, "onset: want a case, options and a sink");
    m.options = *options;
    m.key = th_shape_length(c->setup.shape);
    if (m.options.upto == 0 && m.key >= 0)
        m.options.upto = th_onset_upto(c);
    st = th_onset_check(c->setup.shape, &m.options, err);
    if (st == TH_OK)
        st = th_onset_points(c, &m.points, err);
    if (st != TH_OK)
        return st;
    m.axis = th_alloc((size_t)c->axes, sizeof *m.axis);
    m.value = th_alloc((size_t)c->axes, sizeof *m.value);
    m.batch = th_alloc(BATCH, sizeof *m.batch);
    if (m.axis == NULL || m.value == NULL || m.batch == NULL) {
        st = th_fail(err, TH_ENOMEM, "onset: %d axes and %d blocks", c->axes, (int)BATCH);
        goto done;
    }
    for (int a = 0; a < c->axes; a++)
        if (c->axis[a].key != m.key)
            m.axis[m.axes++] = &c->axis[a];
    m.line = m.axes > 0 ? m.axis[m.axes - 1]->count : 1;
    m.blocks = (m.line + BLOCK - 1) / BLOCK;
    tasks = m.points / m.line * m.blocks;
    threads = m.options.threads;
    if (tasks > 1) /* else the threads are for the samples of the one point */
        m.options.threads = 1;
    for (; st == TH_OK && m.done < tasks; m.done += BATCH) {
        const long now = tasks - m.done < BATCH ? tasks - m.done : BATCH;

        st = th_parallel(threads, now, work, &m, NULL, err);
        for (long i = 0; i < now; i++) {
            if (st == TH_OK)
                st = deliver(&m, m.done + i, &m.batch[i], err);
            clear(&m.batch[i]);
        }
    }
done:
    free(m.axis);
    free(m.value);
    free(m.batch);
    return st;
}
