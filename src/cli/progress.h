/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Progress on standard error, when it is a terminal. */
#ifndef CLI_PROGRESS_H
#define CLI_PROGRESS_H

#include <stdbool.h>
#include <time.h>

typedef struct {
    bool show;
    long total, start, done, unstable; /* start: finished before this run */
    struct timespec began, shown;
} cli_progress;

void cli_progress_begin(cli_progress *p, long total, long done);
void cli_progress_step(cli_progress *p, bool unstable);
void cli_progress_end(cli_progress *p);

#endif
