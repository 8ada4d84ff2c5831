/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Sweeps: the grid, its blocks, and the threads that run them. In: a case with axes. Out: points
 * in a journal. Calls point, journal, parallel, case's types. Proof: tests/test_sweep.c. */
#include "twinhorizon/sweep.h"

#include <limits.h>
#include <pthread.h>
#include <stdlib.h>
#include <string.h>

#include "alloc.h"
#include "parallel.h"

th_status th_sweep_size(const th_case *c, long *points, th_error *err)
{
    long long product = 1;

    if (c == NULL || points == NULL)
        return th_fail(err, TH_EINVAL, "sweep: want a case and a place for the result");
    if (c->axes < 1)
        return th_fail(err, TH_EINVAL, "%s has no [sweep] section with an axis", c->path);
    for (int a = 0; a < c->axes; a++) {
        product *= c->axis[a].count;
        if (product > INT_MAX)
            return th_fail(err, TH_EINVAL, "the sweep of %s has more than %d points", c->path,
                           INT_MAX);
    }
    *points = (long)product;
    return TH_OK;
}

static long line_length(const th_case *c)
{
    return c->axis[c->axes - 1].count;
}

static long blocks_a_line(const th_case *c)
{
    return (line_length(c) + TH_SWEEP_BLOCK - 1) / TH_SWEEP_BLOCK;
}

long th_sweep_blocks(const th_case *c)
{
    long lines = 1;

    for (int a = 0; a + 1 < c->axes; a++)
        lines *= c->axis[a].count;
    return lines * blocks_a_line(c);
}

void th_sweep_block(const th_case *c, long block, long *first, int *count)
{
    const long line = block / blocks_a_line(c);
    const long start = block % blocks_a_line(c) * TH_SWEEP_BLOCK;
    const long rest = line_length(c) - start;

    *first = line * line_length(c) + start;
    *count = rest < TH_SWEEP_BLOCK ? (int)rest : TH_SWEEP_BLOCK;
}

void th_sweep_values(const th_case *c, long number, double *value)
{
    for (int a = c->axes - 1; a >= 0; a--) {
        value[a] = c->axis[a].value[number % c->axis[a].count];
        number /= c->axis[a].count;
    }
}

th_flow_setup th_sweep_setup(const th_case *c, long number)
{
    th_flow_setup setup = c->setup;

    for (int a = c->axes - 1; a >= 0; a--) {
        th_axis_set(c->axis[a].key, c->axis[a].value[number % c->axis[a].count], &setup);
        number /= c->axis[a].count;
    }
    return setup;
}

/* The last two points of a block, and room for the next: indices go round. */
typedef struct {
    th_point point[3];
    int done; /* points so far in this block */
} memory;

static th_point *slot(memory *m, int back)
{
    return &m->point[(m->done + 3 - back) % 3];
}

/* The points before the next one, where they have modes to start from. */
static void look_back(memory *m, const th_point *previous[2])
{
    for (int i = 0; i < 2; i++) {
        const th_point *p = m->done > i ? slot(m, i + 1) : NULL;

        previous[i] = p != NULL && p->state != TH_POINT_FAILED ? p : NULL;
    }
    if (previous[0] == NULL)
        previous[1] = NULL;
}

th_status th_sweep_run_block(const th_case *c, long block, const th_point *known, int knowns,
                             th_workspace *workspace,
                             th_status (*sink)(void *ctx, const th_point *point, th_error *err),
                             void *ctx, const atomic_int *stop, th_error *err)
{
    memory m = {
        .point = {{.workspace = workspace}, {.workspace = workspace}, {.workspace = workspace}}};
    long first;
    int count;
    th_status st = TH_OK;

    th_sweep_block(c, block, &first, &count);
    for (int i = 0; st == TH_OK && i < count; i++) {
        th_point *next = slot(&m, 0);

        if (stop != NULL && atomic_load(stop) != 0)
            break;
        if (i < knowns) {
            st = th_point_copy(&known[i], next, err);
        } else {
            th_flow_setup setup = th_sweep_setup(c, first + i);
            const th_point *previous[2];

            setup.workspace = workspace;
            look_back(&m, previous);
            next->number = first + i;
            st = th_point_answer(&setup, c->accuracy, previous, next, err);
            if (st == TH_OK)
                st = sink(ctx, next, err);
        }
        m.done++;
    }
    for (int i = 0; i < 3; i++)
        th_point_clear(&m.point[i]);
    return st;
}

typedef struct {
    const th_case *c;
    const th_sweep_options *options;
    th_journal *journal;
    pthread_mutex_t lock; /* of the journal, of options->done and of what follows */
    th_workspace **idle;  /* [threads] the first idles are free */
    int idles;
} sweep;

/* A workspace for each thread: so many blocks are in hand at most. */
static th_status furnish(sweep *s, th_error *err)
{
    th_status st = TH_OK;

    s->idle = th_alloc((size_t)s->options->threads, sizeof *s->idle);
    if (s->idle == NULL)
        return th_fail(err, TH_ENOMEM, "sweep: workspaces of %d threads", s->options->threads);
    while (st == TH_OK && s->idles < s->options->threads) {
        st = th_workspace_create(&s->idle[s->idles], err);
        s->idles += st == TH_OK;
    }
    return st;
}

static void clear_out(sweep *s)
{
    while (s->idles > 0)
        th_workspace_destroy(s->idle[--s->idles]);
    free(s->idle);
}

static th_workspace *borrow(sweep *s)
{
    th_workspace *workspace;

    (void)pthread_mutex_lock(&s->lock);
    workspace = s->idle[--s->idles];
    (void)pthread_mutex_unlock(&s->lock);
    return workspace;
}

static void bring_back(sweep *s, th_workspace *workspace)
{
    (void)pthread_mutex_lock(&s->lock);
    s->idle[s->idles++] = workspace;
    (void)pthread_mutex_unlock(&s->lock);
}

static th_status record(void *ctx, const th_point *point, th_error *err)
{
    sweep *s = ctx;
    th_status st;

    (void)pthread_mutex_lock(&s->lock);
    st = th_journal_append(s->journal, point, err);
    if (st == TH_OK && s->options->done != NULL)
        s->options->done(s->options->ctx, point);
    (void)pthread_mutex_unlock(&s->lock);
    return st;
}

/* The finished points at the head of a block; a block is always worked on from its head. */
static th_status recall(sweep *s, long first, int count, th_point *known, int *knowns,
                        th_error *err)
{
    th_status st = TH_OK;

    (void)pthread_mutex_lock(&s->lock);
    while (st == TH_OK && *knowns < count && th_journal_has(s->journal, first + *knowns)) {
        st = th_journal_get(s->journal, first + *knowns, &known[*knowns], err);
        *knowns += 1;
    }
    (void)pthread_mutex_unlock(&s->lock);
    return st;
}

static th_status work(void *ctx, long item, th_error *err)
{
    sweep *s = ctx;
    const long block = s->options->part - 1 + item * s->options->parts;
    th_workspace *workspace = borrow(s);
    th_point known[TH_SWEEP_BLOCK];
    long first;
    int count, knowns = 0;
    th_status st;

    for (int i = 0; i < TH_SWEEP_BLOCK; i++)
        known[i] = (th_point){.workspace = workspace};
    th_sweep_block(s->c, block, &first, &count);
    st = recall(s, first, count, known, &knowns, err);
    if (st == TH_OK && knowns < count)
        st = th_sweep_run_block(s->c, block, known, knowns, workspace, record, s, s->options->stop,
                                err);
    for (int i = 0; i < TH_SWEEP_BLOCK; i++)
        th_point_clear(&known[i]);
    bring_back(s, workspace);
    return st;
}

th_status th_sweep_run(const th_case *c, const th_sweep_options *options, th_journal *journal,
                       th_error *err)
{
    sweep s = {.c = c, .options = options, .journal = journal};
    long points, blocks;
    th_status st = th_sweep_size(c, &points, err);

    if (st != TH_OK)
        return st;
    if (options == NULL || journal == NULL || options->threads < 1 || options->part < 1 ||
        options->part > options->parts)
        return th_fail(err, TH_EINVAL,
                       "sweep: want a journal, threads >= 1 and 1 <= part <= parts");
    blocks = th_sweep_blocks(c);
    if (pthread_mutex_init(&s.lock, NULL) != 0)
        return th_fail(err, TH_ENOMEM, "sweep: one lock");
    st = furnish(&s, err);
    if (st == TH_OK)
        st = th_parallel(options->threads,
                         (blocks - options->part + options->parts) / options->parts, work, &s,
                         options->stop, err);
    clear_out(&s);
    (void)pthread_mutex_destroy(&s.lock);
    return st;
}
