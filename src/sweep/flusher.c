/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Brings a file to the disk a moment after it was written to. In: a file and marks. Out: fsync
 * calls, and the reason of the first that failed; after one the system may have thrown away what
 * it could not write, so the trouble never goes away again. Calls status, POSIX threads.
 * Proof: tests/test_journal.c (time of the fsync, failure of one). */
#include "flusher.h"

#include <errno.h>
#include <signal.h>
#include <time.h>
#include <unistd.h>

/* Half of the half second within which an fsync must have begun: many points share one, and a busy
 * machine has as long again. ns. */
static const long pause_ns = 250000000;
static const long second_ns = 1000000000;

static int bring_to_disk(int fd)
{
    int result;

    do
        result = fsync(fd);
    while (result != 0 && errno == EINTR);
    return result == 0 ? 0 : errno;
}

/* Wait, mutex held, so that more points share an fsync; not when asked to end. */
static void pause_a_little(th_flusher *f)
{
    struct timespec until;

    (void)clock_gettime(CLOCK_MONOTONIC, &until);
    until.tv_nsec += pause_ns;
    if (until.tv_nsec >= second_ns) {
        until.tv_nsec -= second_ns;
        until.tv_sec++;
    }
    while (!f->stop && pthread_cond_timedwait(&f->wake, &f->mutex, &until) != ETIMEDOUT)
        continue;
}

static void *run(void *ctx)
{
    th_flusher *f = ctx;

    (void)pthread_mutex_lock(&f->mutex);
    for (;;) {
        int number;

        while (!f->dirty && !f->stop)
            (void)pthread_cond_wait(&f->wake, &f->mutex);
        if (!f->dirty)
            break;
        pause_a_little(f);
        f->dirty = false;
        (void)pthread_mutex_unlock(&f->mutex);
        number = bring_to_disk(f->fd);
        (void)pthread_mutex_lock(&f->mutex);
        if (f->trouble == 0)
            f->trouble = number;
    }
    (void)pthread_mutex_unlock(&f->mutex);
    return NULL;
}

/* A condition that times out by the clock that nobody sets. */
static int make_condition(pthread_cond_t *wake)
{
    pthread_condattr_t attribute;
    int number = pthread_condattr_init(&attribute);

    if (number != 0)
        return number;
    number = pthread_condattr_setclock(&attribute, CLOCK_MONOTONIC);
    if (number == 0)
        number = pthread_cond_init(wake, &attribute);
    (void)pthread_condattr_destroy(&attribute);
    return number;
}

/* Signals are for the caller's threads: this one blocks all. */
static int make_thread(th_flusher *f)
{
    sigset_t all, before;
    int number;

    (void)sigfillset(&all);
    (void)pthread_sigmask(SIG_SETMASK, &all, &before);
    number = pthread_create(&f->thread, NULL, run, f);
    (void)pthread_sigmask(SIG_SETMASK, &before, NULL);
    return number;
}

th_status th_flusher_start(th_flusher *flusher, int fd, th_error *err)
{
    int number;

    flusher->fd = fd;
    flusher->dirty = flusher->stop = false;
    flusher->trouble = 0;
    number = pthread_mutex_init(&flusher->mutex, NULL);
    if (number != 0)
        goto no_mutex;
    number = make_condition(&flusher->wake);
    if (number != 0)
        goto no_condition;
    number = make_thread(flusher);
    if (number == 0)
        return TH_OK;
    (void)pthread_cond_destroy(&flusher->wake);
no_condition:
    (void)pthread_mutex_destroy(&flusher->mutex);
no_mutex:
    return th_fail(err, TH_ENOMEM, "no thread to bring the journal to the disk (error %d)", number);
}

void th_flusher_mark(th_flusher *flusher)
{
    (void)pthread_mutex_lock(&flusher->mutex);
    if (!flusher->dirty) {
        flusher->dirty = true;
        (void)pthread_cond_signal(&flusher->wake);
    }
    (void)pthread_mutex_unlock(&flusher->mutex);
}

int th_flusher_trouble(th_flusher *flusher)
{
    int number;

    (void)pthread_mutex_lock(&flusher->mutex);
    number = flusher->trouble;
    (void)pthread_mutex_unlock(&flusher->mutex);
    return number;
}

int th_flusher_stop(th_flusher *flusher)
{
    (void)pthread_mutex_lock(&flusher->mutex);
    flusher->stop = true;
    (void)pthread_cond_signal(&flusher->wake);
    (void)pthread_mutex_unlock(&flusher->mutex);
    (void)pthread_join(flusher->thread, NULL);
    (void)pthread_cond_destroy(&flusher->wake);
    (void)pthread_mutex_destroy(&flusher->mutex);
    return flusher->trouble;
}
