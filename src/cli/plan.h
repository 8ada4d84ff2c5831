/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A plan: everything that `plan` finds out about a case, before it is shown in any form. */
#ifndef CLI_PLAN_H
#define CLI_PLAN_H

#include <twinhorizon/pattern.h>
#include <twinhorizon/seed.h>
#include <twinhorizon/semiclassics.h>
#include <twinhorizon/tolerance.h>
#include <twinhorizon/track.h>
#include <twinhorizon/validity.h>

#include "cli.h"

/* One part of a plan: it has an answer, or `why` says what is missing. */
typedef struct {
    bool known;
    char why[512];
} cli_part;

/* A growing mode and what is known of its ripple. */
typedef struct {
    const th_mode *mode;
    cli_part part;
    th_pattern pattern;
    th_pattern_tell tell; /* all false without a hold */
} cli_plan_mode;

/* Times after which the contrast is shown: this many, up to the hold or what stands for it. */
enum { CLI_PLAN_TIMES = 6 };

/* Growth from one initial state. */
typedef struct {
    cli_part part;
    double temperature; /* 0: vacuum */
    th_seed *seed;
    int unknown;                      /* growing modes too slow to be projected */
    double contrast[CLI_PLAN_TIMES];  /* negative: beyond the range of numbers */
    bool visible, saturates;          /* the times below exist */
    double visible_time, linear_time; /* contrast = visibility; = 1 */
} cli_plan_seed;

/* One pocket in the semiclassical picture. */
typedef struct {
    cli_part part;
    th_semiclassics answer;
    const th_mode **exact; /* [answer.count] the growing mode next to each level; NULL: none */
} cli_plan_pocket;

typedef struct {
    const th_case *c;
    th_flow *flow;
    th_solution *solution;
    int growing;                 /* modes listed as unstable */
    cli_plan_mode *mode;         /* [growing] */
    double time[CLI_PLAN_TIMES]; /* ascending from 0 */
    cli_plan_seed vacuum, thermal;
    cli_part ramp_part;
    th_ramp ramp;
    cli_part best_part;
    double range_from, range_to;
    th_track *line; /* along the range; NULL without an answer */
    th_track_best best;
    cli_part tolerance_part;
    th_tolerance tolerance;
    int pockets;
    cli_plan_pocket *pocket; /* [pockets] */
    th_check check[TH_CHECKS];
} cli_findings;

/* Find everything; parts that have no answer say why. Only a flow that cannot be solved, memory and
 * bugs are failures. cli_plan_clear in any case. */
th_status cli_plan_find(const th_case *c, int threads, cli_findings *plan,
                        th_error *err) TH_MUST_USE;
void cli_plan_clear(cli_findings *plan);

/* The seed that counts: thermal where a temperature was given, else vacuum. */
const cli_plan_seed *cli_plan_main_seed(const cli_findings *plan);

/* The better of the two frequencies of a level. */
double cli_plan_level(const th_semiclassical_mode *level);

/* The first lines, in sentences. */
void cli_plan_print_answer(FILE *out, const cli_findings *plan);

void cli_plan_print(FILE *out, const cli_findings *plan);
th_status cli_plan_write(const cli_findings *plan, const char *path, th_error *err) TH_MUST_USE;

#endif
