/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Threads that take the next item of work as they become free. In: a function and a number of
 * items. Out: the first failure. Calls POSIX threads. Proof: tests/test_sweep.c. */
#include "parallel.h"

#include <pthread.h>
#include <stdlib.h>

#include "alloc.h"

typedef struct {
    pthread_mutex_t lock;
    long next, items;
    th_work work;
    void *ctx;
    const atomic_int *stop;
    long failed_item; /* lowest so far; items when none */
    th_status failed;
    th_error error;
} pool;

/* The next item, or -1. */
static long take(pool *p)
{
    long item = -1;

    (void)pthread_mutex_lock(&p->lock);
    if (p->next < p->items && p->failed == TH_OK && (p->stop == NULL || atomic_load(p->stop) == 0))
        item = p->next++;
    (void)pthread_mutex_unlock(&p->lock);
    return item;
}

static void *run(void *argument)
{
    pool *p = argument;
    long item;

    while ((item = take(p)) >= 0) {
        th_error err = {0};
        const th_status st = p->work(p->ctx, item, &err);

        if (st == TH_OK)
            continue;
        (void)pthread_mutex_lock(&p->lock);
        if (item < p->failed_item) {
            p->failed_item = item;
            p->failed = st;
            p->error = err;
        }
        (void)pthread_mutex_unlock(&p->lock);
    }
    return NULL;
}

th_status th_parallel(int threads, long items, th_work work, void *ctx, const atomic_int *stop,
                      th_error *err)
{
    pool p = {.items = items, .work = work, .ctx = ctx, .stop = stop, .failed_item = items};
    pthread_t *thread = NULL;
    int started = 0;

    if (threads < 1 || items < 0)
        return th_fail(err, TH_EINVAL, "threads = %d and items = %ld, want >= 1 and >= 0", threads,
                       items);
    thread = th_alloc((size_t)threads, sizeof *thread);
    if (thread == NULL || pthread_mutex_init(&p.lock, NULL) != 0) {
        free(thread);
        return th_fail(err, TH_ENOMEM, "%d threads", threads);
    }
    while (started + 1 < threads && pthread_create(&thread[started], NULL, run, &p) == 0)
        started++;
    (void)run(&p); /* the caller's thread is one of them */
    for (int i = 0; i < started; i++)
        (void)pthread_join(thread[i], NULL);
    (void)pthread_mutex_destroy(&p.lock);
    free(thread);
    if (p.failed != TH_OK && err != NULL)
        *err = p.error;
    return p.failed;
}
