/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Several processes under MPI (make MPI=1): rank 0 reads, writes and deals out blocks of points,
 * the others compute. Without MPI there is one process, rank 0 of 1. */
#ifndef CLI_RANKS_H
#define CLI_RANKS_H

#include <twinhorizon/sweep.h>

/* Join the others; call first in main. */
void cli_ranks_begin(int *argc, char ***argv);

/* Leave; call last in main, with the exit code, which it returns. */
int cli_ranks_end(int code);

int cli_rank(void);
int cli_ranks(void);

/* As th_sweep_run, by all ranks together; every rank calls it with the same case. journal and
 * options count on rank 0 only. */
th_status cli_ranks_sweep(const th_case *c, const th_sweep_options *options, th_journal *journal,
                          th_error *err) TH_MUST_USE;

/* Tell the other ranks that rank 0 could not start (so that they end too). */
void cli_ranks_dismiss(void);

#endif
