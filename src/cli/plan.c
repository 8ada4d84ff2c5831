/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * twinhorizon plan CASE: whether a run would show growth and whether one could tell, as text and as
 * a table. */
#include <string.h>

#include "plan.h"

int cli_plan(int argc, char **argv)
{
    const char *csv = NULL, *threads = NULL;
    const cli_option option[] = {
        {"--csv", "FILE", "table of all numbers, one a row; - for standard output", &csv,
         CLI_TABLE},
        {"--threads", "N", "threads (default: one for each processor)", &threads, CLI_PLAIN},
    };
    cli_arguments arguments;
    cli_findings plan = {0};
    th_case *c = NULL;
    th_error err = {0};
    int count = 1;
    th_status st;
    int code = cli_read("plan",
                        "Plan a run: growth within the hold, seeds, ramps, tolerances, best "
                        "length, limits of the model.\nSection [plan] of the case says what is "
                        "planned.",
                        argc, argv, option, sizeof option / sizeof option[0], &arguments);

    if (code != CLI_DONE)
        return code < 0 ? CLI_DONE : code;
    st = cli_read_case(&arguments, &c, &err);
    if (st == TH_OK)
        st = cli_threads("plan", threads, &count, &err);
    if (st == TH_OK)
        st = cli_plan_find(c, count, &plan, &err);
    if (st == TH_OK && csv != NULL)
        st = cli_plan_write(&plan, csv, &err);
    if (st == TH_OK && (csv == NULL || strcmp(csv, "-") != 0))
        cli_plan_print(stdout, &plan);
    if (st != TH_OK)
        code = cli_failed(&err);
    else if (plan.solution->verdict == TH_VERDICT_UNDECIDED)
        code = CLI_UNDECIDED;
    cli_plan_clear(&plan);
    th_case_destroy(c);
    return code;
}
