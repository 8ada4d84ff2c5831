/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The program: hands the command line to a command. A new command is one file with its function,
 * one line in cli.h and one line in the table below. */
#include <errno.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_version.h>
#include <string.h>
#include <twinhorizon/version.h>

#include "cli.h"
#include "ranks.h"

static const struct {
    const char *name;
    const char *doc;
    int (*run)(int argc, char **argv);
} command[] = {
    {"solve", "modes, growth rates and verdict of one configuration", cli_solve},
    {"sweep", "growth-rate table over the axes of a case", cli_sweep},
    {"merge", "tables of a sweep that was run in parts", cli_merge},
    {"onset", "pocket lengths at which modes switch on, alone or over the axes of a case",
     cli_onset},
    {"plan", "an experiment: growth within the hold, seeds, ramps, tolerances, limits", cli_plan},
    {"report", "all of it for one case, on one page with figures", cli_report},
    {"flow", "the stationary flow: horizons, pockets, the potential it needs", cli_flow},
};
enum { COMMANDS = sizeof command / sizeof command[0] };

static void help(FILE *stream)
{
    fprintf(stream,
            "twinhorizon %s: linear stability of sonic horizon pairs in Bose-Einstein "
            "condensates\n\n",
            th_version());
    for (int i = 0; i < COMMANDS; i++)
        fprintf(stream, "  twinhorizon %-6s ...        %s\n", command[i].name, command[i].doc);
    fprintf(stream, "\n  twinhorizon COMMAND --help    options of a command\n"
                    "  twinhorizon --version         version, libraries\n"
                    "  twinhorizon --case-manual     manual page of the case file, for man -l -\n\n"
                    "Exit: 0 done; 1 finished, but something is undecided or failed; 2 command "
                    "line, case file or output file; 3 internal error.\n");
}

void cli_print_libraries(FILE *out)
{
    extern char *openblas_get_config(void);
    const char *blas = openblas_get_config(); /* "OpenBLAS 0.3.21 NO_AFFINITY ..." */
    unsigned hdf5[3];

    cli_modes_library(hdf5);
    fprintf(out, "GSL %s, %.*s, HDF5 %u.%u.%u", gsl_version,
            (int)(strcspn(blas, " ") + 1 + strcspn(blas + strcspn(blas, " ") + 1, " ")), blas,
            hdf5[0], hdf5[1], hdf5[2]);
}

/* Numbers must not depend on how many threads a library happens to use. */
static void one_blas_thread(void)
{
    extern void openblas_set_num_threads(int threads);

    openblas_set_num_threads(1);
}

static int run(int argc, char **argv)
{
    if (argc < 2) {
        help(stderr);
        return CLI_USAGE;
    }
    if (strcmp(argv[1], "--help") == 0) {
        help(stdout);
        return CLI_DONE;
    }
    if (strcmp(argv[1], "--version") == 0) {
        printf("twinhorizon %s\n", th_version());
        cli_print_libraries(stdout);
        putchar('\n');
        return CLI_DONE;
    }
    if (strcmp(argv[1], "--case-manual") == 0) {
        cli_print_case_manual();
        return CLI_DONE;
    }
    for (int i = 0; i < COMMANDS; i++)
        if (strcmp(argv[1], command[i].name) == 0)
            return command[i].run(argc - 2, argv + 2);
    return cli_usage("there is no command '%s'; twinhorizon --help lists them", argv[1]);
}

/* Ranks beside the first help with sweeps and keep quiet. */
static int run_helper(int argc, char **argv)
{
    if (argc < 2 || strcmp(argv[1], "sweep") != 0 || freopen("/dev/null", "w", stdout) == NULL ||
        freopen("/dev/null", "w", stderr) == NULL)
        return CLI_DONE;
    return run(argc, argv);
}

int main(int argc, char **argv)
{
    int code;

    cli_ranks_begin(&argc, &argv);
    gsl_set_error_handler_off();
    one_blas_thread();
    code = cli_rank() == 0 ? run(argc, argv) : run_helper(argc, argv);
    /* a command that failed has said why */
    if ((fflush(stdout) != 0 || ferror(stdout)) && code < CLI_USAGE)
        code = cli_usage("standard output cannot be written (%s)", strerror(errno));
    return cli_ranks_end(code);
}
