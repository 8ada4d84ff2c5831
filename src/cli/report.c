/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * twinhorizon report CASE --out FILE.html: everything about one case on one page that needs no
 * other file. */
#include "report.h"

#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "figure.h"

/* Draw one figure into an SVG element. */
static th_status element(th_status drawn, cli_figure *figure, char **svg, th_error *err)
{
    th_status st = drawn;

    if (st == TH_OK)
        st = cli_figure_svg(figure, svg, err);
    cli_figure_clear(figure);
    return st;
}

static th_status draw(cli_report_parts *r, th_error *err)
{
    const cli_findings *p = r->plan;
    cli_figure figure = {0};
    th_status st = element(cli_draw_flow(r->c, p->flow, &figure, err), &figure, &r->flow, err);

    if (st == TH_OK)
        st =
            element(cli_draw_spectrum(r->c, p->solution, &figure, err), &figure, &r->spectrum, err);
    if (st == TH_OK && p->solution->count > 0)
        st = element(cli_draw_modes(r->c, p->flow, p->solution, &figure, err), &figure, &r->modes,
                     err);
    if (st == TH_OK && p->line != NULL)
        st = element(cli_draw_track(r->c, p->line, r->onsets.onset, r->onsets.count, &figure, err),
                     &figure, &r->line, err);
    return st;
}

/* Open ends: switch-on lengths up to the end of the range. */
static th_status find_onsets(cli_report_parts *r, int threads, th_error *err)
{
    const th_onset_options options = {.upto = r->plan->range_to, .threads = threads};
    th_error why = {0};
    th_status st;

    if (r->plan->line == NULL || r->c->setup.ends.kind != TH_ENDS_OPEN) {
        (void)snprintf(r->onsets_why, sizeof r->onsets_why, "%s",
                       r->plan->line == NULL
                           ? "there is no range of lengths"
                           : "not searched on rings and between walls: see onset");
        return TH_OK;
    }
    st = th_onset_find(&r->c->setup, &options, &r->onsets, &why);
    r->onsets_known = st == TH_OK;
    if (st == TH_ENOMEM || st == TH_EBUG)
        return th_fail(err, st, "%s", why.text);
    if (st != TH_OK)
        (void)snprintf(r->onsets_why, sizeof r->onsets_why, "%.*s", (int)sizeof r->onsets_why - 1,
                       why.text);
    return TH_OK;
}

static double now(void)
{
    struct timespec t = {0};

    (void)clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

static th_status write_page(cli_report_parts *r, const char *path, th_error *err)
{
    cli_file file = {0};
    th_status st = cli_file_open(path, &file, err);

    if (st == TH_OK)
        cli_report_write(r, file.stream);
    if (st == TH_OK)
        st = cli_file_finish(&file, err);
    cli_file_abandon(&file);
    return st;
}

int cli_report(int argc, char **argv)
{
    const char *path = NULL, *threads = NULL;
    const cli_option option[] = {
        {"--out", "FILE.html", "the page", &path, CLI_FILE},
        {"--threads", "N", "threads (default: one for each processor)", &threads, CLI_PLAIN},
    };
    const double start = now();
    cli_arguments arguments;
    cli_findings plan = {0};
    cli_report_parts parts = {.plan = &plan};
    th_case *c = NULL;
    th_error err = {0};
    int count = 1;
    th_status st;
    int code = cli_read("report",
                        "Everything about one case on one page: verdict, flow, spectrum, lengths, "
                        "plan, limits.",
                        argc, argv, option, sizeof option / sizeof option[0], &arguments);

    if (code != CLI_DONE)
        return code < 0 ? CLI_DONE : code;
    if (path == NULL)
        return cli_usage("report: --out FILE.html is wanted");
    st = cli_read_case(&arguments, &c, &err);
    parts.c = c;
    if (st == TH_OK)
        st = cli_threads("report", threads, &count, &err);
    if (st == TH_OK)
        st = cli_plan_find(c, count, &plan, &err);
    if (st == TH_OK)
        st = find_onsets(&parts, count, &err);
    if (st == TH_OK)
        st = draw(&parts, &err);
    parts.seconds = now() - start;
    if (st == TH_OK)
        st = write_page(&parts, path, &err);
    if (st == TH_OK) {
        cli_plan_print_answer(stdout, &plan);
        printf("Report      %s\n", path);
    }
    if (st != TH_OK)
        code = cli_failed(&err);
    else if (plan.solution->verdict == TH_VERDICT_UNDECIDED)
        code = CLI_UNDECIDED;
    free(parts.flow);
    free(parts.spectrum);
    free(parts.modes);
    free(parts.line);
    th_onset_clear(&parts.onsets);
    cli_plan_clear(&plan);
    th_case_destroy(c);
    return code;
}
