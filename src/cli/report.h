/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A report: a plan, switch-on lengths and figures, as one page. */
#ifndef CLI_REPORT_H
#define CLI_REPORT_H

#include <twinhorizon/onset.h>

#include "plan.h"

/* What the page shows. */
typedef struct {
    const th_case *c;
    const cli_findings *plan;
    th_onset_list onsets;
    bool onsets_known;
    char onsets_why[512];
    char *flow, *spectrum, *modes, *line; /* SVG elements; NULL: none */
    double seconds;                       /* that it took */
} cli_report_parts;

/* Write the page. */
void cli_report_write(const cli_report_parts *parts, FILE *out);

#endif
