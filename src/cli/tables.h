/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The tables of a sweep, from finished points in any order. */
#ifndef CLI_TABLES_H
#define CLI_TABLES_H

#include <twinhorizon/case.h>
#include <twinhorizon/point.h>
#include <twinhorizon/status.h>

/* Where points come from: TH_ENONE for one that is not finished. */
typedef struct {
    th_status (*get)(void *ctx, long number, th_point *point, th_error *err);
    void *ctx;
} cli_source;

typedef struct {
    long points, unstable, undecided, failed;
} cli_counts;

/* Write points.csv, modes.csv and events.csv of FOLDER from the finished points, in the order of
 * the grid. */
th_status cli_write_tables(const th_case *c, long points, const cli_source *source,
                           const char *folder, cli_counts *counts, th_error *err) TH_MUST_USE;

/* One line about tables that were written; returns the exit code that goes with the counts. */
int cli_report_tables(const cli_counts *counts, const char *folder);

/* FOLDER/NAME; NULL when memory is short. Release with free. */
char *cli_join(const char *folder, const char *name);

/* TH_EINVAL when the case file is one of those that a sweep writes into the folder. */
th_status cli_spare_case(const th_case *c, const char *folder, th_error *err) TH_MUST_USE;

/* Copy the table that a case names into a folder, under its own name; nothing without a table. */
th_status cli_keep_table(const th_case *c, const char *folder, th_error *err) TH_MUST_USE;

/* Make a folder unless it is there. */
th_status cli_make_folder(const char *folder, th_error *err) TH_MUST_USE;

#endif
