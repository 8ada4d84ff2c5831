/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What the commands share: options, exit codes, errors, output files, numbers in the units of the
 * text view. The program sees the public headers only. */
#ifndef CLI_H
#define CLI_H

#include <stdbool.h>
#include <stdio.h>
#include <twinhorizon/case.h>
#include <twinhorizon/modes.h>
#include <twinhorizon/status.h>
#include <twinhorizon/table.h>
#include <twinhorizon/uncertainty.h>

/* Exit codes: a contract with scripts. */
enum { CLI_DONE = 0, CLI_UNDECIDED = 1, CLI_USAGE = 2, CLI_INTERNAL = 3 };

/* ---- options.c ------------------------------------------------------------------------------ */

/* What the value of an option is for. */
typedef enum {
    CLI_PLAIN,
    CLI_NEEDED, /* the command is wrong without it */
    CLI_FILE,   /* a file that the command writes */
    CLI_LATE,   /* the same, and its folder may be one that the command makes first */
    CLI_TABLE   /* the same with its metadata beside it; - is standard output */
} cli_use;

/* An option of a command: "--name VALUE", or "--name" alone when value is NULL. */
typedef struct {
    const char *name;  /* with its dashes */
    const char *value; /* word for the value in the help */
    const char *doc;
    const char **place; /* where the value, or the name alone, goes */
    cli_use use;
} cli_option;

enum { CLI_SET_MAX = 64, CLI_OUTPUTS_MAX = 8, CLI_PATH_MAX = 4096 };

/* What stands on the command line of a command that takes one case. */
typedef struct {
    const char *case_path;
    const char *set[CLI_SET_MAX]; /* --set section.key=value, in order */
    int sets;
    const cli_option *output[CLI_OUTPUTS_MAX]; /* options that name files to be written */
    int outputs;
    char target[CLI_OUTPUTS_MAX][CLI_PATH_MAX]; /* where links lead */
} cli_arguments;

/* Read "CASE [--set ...] [--time-limit S] [options]". Prints one sentence and returns CLI_USAGE
 * when it is wrong; prints the help and returns -1 (exit 0) for --help. */
int cli_read(const char *command, const char *summary, int argc, char **argv,
             const cli_option *option, int options, cli_arguments *out);

/* A whole number from low to high, `fallback` when the option is absent (text NULL). */
th_status cli_whole(const char *command, const char *name, const char *text, int low, int high,
                    int fallback, int *out, th_error *err) TH_MUST_USE;

/* The same of --threads: one for each processor when it is absent. */
th_status cli_threads(const char *command, const char *text, int *out, th_error *err) TH_MUST_USE;

/* Read the case. Files that would be written over it or over its table are refused. */
th_status cli_read_case(const cli_arguments *arguments, th_case **out, th_error *err) TH_MUST_USE;

/* Print a failure as one line on standard error; returns the exit code that goes with it. */
int cli_failed(const th_error *err);

/* Print "twinhorizon: ..." as one line on standard error; returns CLI_USAGE. */
int cli_usage(const char *format, ...) TH_PRINTF(1, 2);

/* ---- limit.c -------------------------------------------------------------------------------- */

/* Start the clock of --time-limit; nothing when text is NULL. */
th_status cli_limit_start(const char *command, const char *text, const cli_arguments *arguments,
                          th_error *err) TH_MUST_USE;

/* ---- output.c ------------------------------------------------------------------------------- */

/* Before any work: every output has a folder that can be written, is not a folder itself, and no
 * two of them, nor their metadata, are one file. Links are followed: *place of the option becomes
 * what the link leads to. `folder_there`: the folder that the command makes for CLI_LATE is made.
 */
th_status cli_check_outputs(const char *command, cli_arguments *arguments, bool folder_there,
                            th_error *err) TH_MUST_USE;

/* TH_EINVAL when one of the files that a command puts into a folder is this one. */
th_status cli_check_folder(const char *folder, const char *const *name, int names, const char *path,
                           th_error *err) TH_MUST_USE;

/* TH_EINVAL when an output of the command is this file. */
th_status cli_check_input(const cli_arguments *arguments, const char *path,
                          th_error *err) TH_MUST_USE;

/* Whether two paths lead to one folder. */
bool cli_same_folder(const char *a, const char *b);

/* Start a table in a file, or on standard output when path is "-". */
th_status cli_table(const char *path, const th_column *column, int columns, const char *title,
                    const th_case *c, th_table **out, th_error *err) TH_MUST_USE;

/* A file that appears under its name only when it is complete; a device or pipe is written as it
 * stands. */
typedef struct {
    const char *path;
    char *part; /* its name until then; NULL: a device or pipe */
    FILE *stream;
} cli_file;

th_status cli_file_open(const char *path, cli_file *file, th_error *err) TH_MUST_USE;
th_status cli_file_finish(cli_file *file, th_error *err) TH_MUST_USE;
void cli_file_abandon(cli_file *file); /* after either, or after a failure in between */

/* ---- view.c --------------------------------------------------------------------------------- */

/* Factors and words of the text view: SI cases show Hz, /s, ms, um, mm/s, nK; reduced cases bare
 * numbers. shown = reduced * factor. */
typedef struct {
    bool si;
    double frequency, rate, time, length, speed, temperature, density;
    const char *hertz, *per_second, *milliseconds, *micrometres, *speeds, *kelvin, *densities;
} cli_view;

cli_view cli_view_of(const th_case *c);

enum { CLI_NUMBER = 40 };

/* "0.0371345867": as many digits as the error leaves standing, at most ten. Returns buffer. */
const char *cli_number(double value, double error, char buffer[CLI_NUMBER]);

/* The unit of a CSV column: the SI unit in an SI case, NULL in a reduced one. */
const char *cli_unit(const th_case *c, th_dimension dimension);

/* "open ends", "ring", "walls". */
const char *cli_ends_text(th_ends_kind kind);

/* Flow, horizons and pockets in a few lines. */
void cli_print_flow(FILE *out, const th_case *c, const th_flow *flow, bool details);

/* ---- flow.c --------------------------------------------------------------------------------- */

/* The stretch that tables and pictures show: from edge to edge, beyond open ends a quarter of that
 * length more on each side. */
void cli_window(const th_flow *flow, double *from, double *to);

/* ---- modes_file.c --------------------------------------------------------------------------- */

/* Write the shapes of all modes of a solution as an HDF5 file. */
th_status cli_modes_write(const th_case *c, const th_flow *flow, const th_solution *s,
                          const char *path, th_error *err) TH_MUST_USE;

/* Version of the HDF5 library: major, minor, release. */
void cli_modes_library(unsigned version[3]);

/* ---- sensitivity.c -------------------------------------------------------------------------- */

/* Print d omega / d key of every growing mode. */
th_status cli_print_sensitivity(const th_case *c, const th_solution *s, th_error *err) TH_MUST_USE;

/* ---- data_errors.c -------------------------------------------------------------------------- */

/* What the errors of a table do to the growing modes; nothing is known of other flows. */
typedef struct {
    bool known;       /* the flow has errors at all */
    int count;        /* growing modes listed */
    th_omega *sigma;  /* [count] standard deviations */
    th_omega *taper;  /* [count] shifts with half the taper ... */
    bool sigma_known; /* false: why not */
    char why[512];
    bool taper_known; /* ... where that makes a flow */
    double distance; /* of the nearest change of their number, in standard deviations; 0: unknown */
} cli_data_errors;

th_status cli_data_errors_find(const th_case *c, const th_flow *flow, const th_solution *s,
                               cli_data_errors *out, th_error *err) TH_MUST_USE;
void cli_data_errors_clear(cli_data_errors *errors);
void cli_data_errors_print(const th_case *c, const th_solution *s, const cli_data_errors *errors);

/* ---- remarks.c ------------------------------------------------------------------------------ */

/* What stands beside an answer: how far a box is from open ends, and for how long a flow that loses
 * atoms is the flow that was solved. Computes, then prints. */
th_status cli_print_remarks(const th_case *c, const th_flow *flow, const th_solution *s,
                            th_error *err) TH_MUST_USE;

/* ---- main.c --------------------------------------------------------------------------------- */

/* "GSL 2.7, OpenBLAS 0.3.21, HDF5 1.10.8" */
void cli_print_libraries(FILE *out);

/* ---- manual.c ------------------------------------------------------------------------------- */

/* The source of twinhorizon-case(5). */
void cli_print_case_manual(void);

/* ---- commands, one file each ---------------------------------------------------------------- */

int cli_solve(int argc, char **argv);
int cli_flow(int argc, char **argv);
int cli_sweep(int argc, char **argv);
int cli_onset(int argc, char **argv);
int cli_merge(int argc, char **argv);
int cli_plan(int argc, char **argv);
int cli_report(int argc, char **argv);

#endif
