/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Progress: a bar, points per second, time left, unstable points so far. Silent when standard
 * error is not a terminal. */
#include "progress.h"

#include <stdio.h>
#include <unistd.h>

enum { BAR = 30 };

static double seconds_since(const struct timespec *then)
{
    struct timespec now;

    if (clock_gettime(CLOCK_MONOTONIC, &now) != 0)
        return 0.0;
    return (double)(now.tv_sec - then->tv_sec) + 1e-9 * (double)(now.tv_nsec - then->tv_nsec);
}

void cli_progress_begin(cli_progress *p, long total, long done)
{
    *p = (cli_progress){
        .show = isatty(STDERR_FILENO) != 0, .total = total, .start = done, .done = done};
    (void)clock_gettime(CLOCK_MONOTONIC, &p->began);
    p->shown = p->began;
}

static void draw(const cli_progress *p)
{
    const double elapsed = seconds_since(&p->began);
    const double rate = elapsed > 0.0 ? (double)(p->done - p->start) / elapsed : 0.0;
    const int filled = p->total > 0 ? (int)((double)BAR * (double)p->done / (double)p->total) : BAR;
    char bar[BAR + 1];

    for (int i = 0; i < BAR; i++)
        bar[i] = i < filled ? '=' : '.';
    bar[BAR] = '\0';
    fprintf(stderr, "\r%s %ld of %ld points, %.3g a second, %.0f s left, %ld unstable ", bar,
            p->done, p->total, rate, rate > 0.0 ? (double)(p->total - p->done) / rate : 0.0,
            p->unstable);
}

void cli_progress_step(cli_progress *p, bool unstable)
{
    p->done++;
    p->unstable += unstable;
    if (!p->show || seconds_since(&p->shown) < 0.2)
        return;
    (void)clock_gettime(CLOCK_MONOTONIC, &p->shown);
    draw(p);
}

void cli_progress_end(cli_progress *p)
{
    if (!p->show)
        return;
    draw(p);
    fputc('\n', stderr);
}
