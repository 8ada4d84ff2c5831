/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Brings a file to the disk a moment after it was written to, in a thread of its own, so that the
 * writer never waits for the disk. Private to sweep. Depends on status. */
#ifndef TH_SWEEP_FLUSHER_H
#define TH_SWEEP_FLUSHER_H

#include <pthread.h>
#include <stdbool.h>
#include <twinhorizon/status.h>

/* It must not move while it runs. */
typedef struct {
    int fd;
    pthread_t thread;
    pthread_mutex_t mutex; /* guards what follows */
    pthread_cond_t wake;
    bool dirty;  /* written to since the last fsync began */
    bool stop;   /* asked to end, once clean */
    int trouble; /* errno of the first fsync that failed; 0: none */
} th_flusher;

/** Start; fd stays the caller's and must stay open. TH_ENOMEM: the system has no thread left. */
TH_MUST_USE th_status th_flusher_start(th_flusher *flusher, int fd, th_error *err);

/** The file was written to: an fsync follows soon. */
void th_flusher_mark(th_flusher *flusher);

/** errno of the first fsync that failed, 0 when none did. */
int th_flusher_trouble(th_flusher *flusher);

/** End, with a last fsync when one is due; returns as th_flusher_trouble. */
int th_flusher_stop(th_flusher *flusher);

#endif
