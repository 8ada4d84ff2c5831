/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * twinhorizon sweep CASE --out DIR: every finished point goes to DIR/journal at once; at the end
 * the tables are written from it. Ctrl-C finishes the points in flight; --resume goes on. */
#include <errno.h>
#include <signal.h>
#include <stdatomic.h>
#include <stdlib.h>
#include <string.h>
#include <twinhorizon/sweep.h>
#include <unistd.h>

#include "figure.h"
#include "progress.h"
#include "ranks.h"
#include "tables.h"

static atomic_int stop; /* set by the signal handler */

static void on_signal(int number)
{
    (void)number;
    atomic_store(&stop, 1);
}

/* The second signal ends the program at once. */
static void catch_signals(void)
{
    struct sigaction action;

    memset(&action, 0, sizeof action);
    action.sa_handler = on_signal;
    action.sa_flags = (int)SA_RESETHAND;
    (void)sigemptyset(&action.sa_mask);
    (void)sigaction(SIGINT, &action, NULL);
    (void)sigaction(SIGTERM, &action, NULL);
    (void)sigaction(SIGALRM, &action, NULL); /* --time-limit */
}

/* "K/N" */
static bool read_part(const char *text, int *part, int *parts)
{
    char *end;

    errno = 0;
    *part = (int)strtol(text, &end, 10);
    if (errno != 0 || end == text || *end != '/')
        return false;
    text = end + 1;
    *parts = (int)strtol(text, &end, 10);
    return errno == 0 && end != text && *end == '\0' && *part >= 1 && *part <= *parts &&
           *parts <= 1000000;
}

static void done(void *ctx, const th_point *point)
{
    cli_progress *progress = ctx;

    if (point->state == TH_POINT_FAILED)
        fprintf(stderr, "%stwinhorizon: point %ld has no answer: %s\n", progress->show ? "\n" : "",
                point->number + 1, point->message);
    cli_progress_step(progress, point->unstable > 0);
}

static th_status get(void *ctx, long number, th_point *point, th_error *err)
{
    return th_journal_get(ctx, number, point, err);
}

/* Points of this part of the sweep. */
static long share(const th_case *c, const th_sweep_options *o)
{
    long sum = 0, first;
    int count;

    for (long b = o->part - 1; b < th_sweep_blocks(c); b += o->parts) {
        th_sweep_block(c, b, &first, &count);
        sum += count;
    }
    return sum;
}

/* What a run is told beside the sweep itself. */
typedef struct {
    const char *folder, *journal; /* paths */
    const char *picture, *script; /* NULL: none */
    cli_arguments *arguments;
    bool resume;
} request;

static th_status draw(const th_case *c, const request *ask, int threads, th_error *err)
{
    cli_figure figure = {0};
    th_status st = cli_draw_sweep(c, ask->folder, threads, &figure, err);

    if (st == TH_OK)
        st = cli_figure_save(&figure, ask->picture, ask->script, err);
    cli_figure_clear(&figure);
    return st;
}

static th_status run(const th_case *c, th_sweep_options o, const request *ask, int *code,
                     th_error *err)
{
    const char *folder = ask->folder;
    th_journal *journal = NULL;
    cli_source source = {get, NULL};
    cli_progress progress;
    cli_counts counts;
    long points = 0, wanted;
    th_status st = th_sweep_size(c, &points, err), closed;

    if (st == TH_OK)
        st = cli_make_folder(folder, err);
    if (st == TH_OK)
        st = cli_check_outputs("sweep", ask->arguments, true, err);
    if (st == TH_OK)
        st = cli_spare_case(c, folder, err);
    if (st == TH_OK)
        st = th_journal_open(ask->journal, c, points, ask->resume, &journal, err);
    if (st == TH_OK) {
        st = cli_keep_table(c, folder, err);
        if (st != TH_OK)
            closed = th_journal_close(journal, NULL);
    }
    if (st != TH_OK) {
        cli_ranks_dismiss();
        return st;
    }
    wanted = share(c, &o);
    cli_progress_begin(&progress, wanted, th_journal_count(journal));
    o.done = done;
    o.ctx = &progress;
    catch_signals();
    st = cli_ranks_sweep(c, &o, journal, err);
    cli_progress_end(&progress);
    source.ctx = journal;
    if (st == TH_OK && th_journal_count(journal) < wanted) {
        printf("%ld of %ld points finished; the same command with --resume goes on\n",
               th_journal_count(journal), wanted);
        *code = CLI_UNDECIDED;
    } else if (st == TH_OK) {
        st = cli_write_tables(c, points, &source, folder, &counts, err);
        if (st == TH_OK)
            *code = cli_report_tables(&counts, folder);
        if (st == TH_OK && ask->picture != NULL)
            st = draw(c, ask, o.threads, err);
    }
    closed = th_journal_close(journal, st == TH_OK ? err : NULL);
    return st == TH_OK ? closed : st;
}

int cli_sweep(int argc, char **argv)
{
    const char *folder = NULL, *threads = NULL, *resume = NULL, *part = NULL;
    const char *picture = NULL, *script = NULL;
    request ask;
    const cli_option option[] = {
        {"--out", "DIR", "folder for the journal and the tables; made when missing", &folder,
         CLI_NEEDED},
        {"--threads", "N", "threads; default: one for each processor", &threads, CLI_PLAIN},
        {"--resume", NULL, "go on with an interrupted sweep", &resume, CLI_PLAIN},
        CLI_FIGURE_OPTIONS(picture, script, CLI_LATE),
        {"--part", "K/N", "only the K-th of N shares of the points, for batch systems", &part,
         CLI_PLAIN},
    };
    th_sweep_options o = {.part = 1, .parts = 1, .stop = &stop};
    cli_arguments arguments;
    th_case *c = NULL;
    char *path = NULL;
    th_error err = {0};
    th_status st;
    int code = cli_read("sweep", "Solve every point of the [sweep] axes and write the tables.",
                        argc, argv, option, sizeof option / sizeof option[0], &arguments);

    if (code != CLI_DONE)
        return code < 0 ? CLI_DONE : code;
    if (cli_threads("sweep", threads, &o.threads, &err) != TH_OK)
        return cli_failed(&err);
    if (part != NULL && !read_part(part, &o.part, &o.parts))
        return cli_usage("sweep: --part %s: want K/N with 1 <= K <= N", part);
    if (part != NULL && picture != NULL)
        return cli_usage("sweep: --figure is for all points, and --part is some of them");
    if (cli_figure_check("sweep", "--figure", picture, &err) != TH_OK ||
        cli_script_check("sweep", script, picture != NULL, &err) != TH_OK)
        return cli_failed(&err);
    path = cli_join(folder, "journal");
    ask = (request){folder, path, picture, script, &arguments, resume != NULL};
    st = path != NULL ? cli_read_case(&arguments, &c, &err)
                      : th_fail(&err, TH_ENOMEM, "sweep: the name of the journal");
    if (st == TH_OK && cli_rank() > 0)
        st = cli_ranks_sweep(c, &o, NULL, &err);
    else if (st == TH_OK)
        st = run(c, o, &ask, &code, &err);
    if (st != TH_OK)
        code = cli_rank() > 0 ? CLI_INTERNAL : cli_failed(&err);
    th_case_destroy(c);
    free(path);
    return code;
}
