/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * twinhorizon merge DIR... --out DIR: the tables of a sweep that was run in parts. */
#include <stdlib.h>
#include <string.h>
#include <twinhorizon/journal.h>

#include "cli.h"
#include "tables.h"

typedef struct {
    th_journal **journal; /* [count] */
    int count;
    char *first; /* the first journal's path: the case's table lies beside it */
    long points;
    const char *text; /* the case, from the first journal */
} parts;

static th_status get(void *ctx, long number, th_point *point, th_error *err)
{
    const parts *p = ctx;

    for (int i = 0; i < p->count; i++)
        if (th_journal_has(p->journal[i], number))
            return th_journal_get(p->journal[i], number, point, err);
    return th_fail(err, TH_ENONE, "merge: point %ld is missing", number + 1);
}

/* One part twice is a slip of the hand: what was meant is missing or counted for nothing. */
static th_status open_one(parts *p, const char *folder, char *const *before, int count,
                          th_error *err)
{
    char *path = cli_join(folder, "journal");
    const char *text = NULL;
    long points = 0;
    th_status st;

    if (path == NULL)
        return th_fail(err, TH_ENOMEM, "merge: the name of a journal");
    for (int i = 0; i < count; i++)
        if ((i == 0 || strcmp(before[i - 1], "--out") != 0) && cli_same_folder(before[i], folder)) {
            free(path);
            return th_fail(err, TH_EINVAL, "merge: %s and %s are one folder", before[i], folder);
        }
    st = th_journal_read_only(path, &p->journal[p->count], &points, &text, err);
    if (st == TH_OK && p->count == 0)
        p->first = path;
    else
        free(path);
    if (st != TH_OK)
        return st;
    p->count++;
    if (p->count == 1) {
        p->points = points;
        p->text = text;
    } else if (points != p->points || strcmp(text, p->text) != 0) {
        return th_fail(err, TH_EINVAL, "%s holds a sweep of another case than the first folder",
                       folder);
    }
    return TH_OK;
}

/* All points must be there. */
static th_status check_complete(const parts *p, th_error *err)
{
    long missing = 0, first = 0;

    for (long i = p->points - 1; i >= 0; i--) {
        bool there = false;

        for (int j = 0; j < p->count && !there; j++)
            there = th_journal_has(p->journal[j], i);
        missing += !there;
        first = there ? first : i;
    }
    if (missing == 0)
        return TH_OK;
    return th_fail(err, TH_EINVAL, "merge: %ld of %ld points are missing, the first is number %ld",
                   missing, p->points, first + 1);
}

static int merge(parts *p, const char *folder)
{
    const cli_source source = {get, p};
    th_case *c = NULL;
    cli_counts counts;
    th_error err = {0};
    int code = CLI_DONE;
    th_status st = check_complete(p, &err);

    if (st == TH_OK)
        st = th_case_read_text(p->first, p->text, NULL, 0, &c, &err);
    if (st == TH_OK && strcmp(c->text, p->text) != 0)
        st = th_fail(&err, TH_EINVAL, "merge: the table beside %s is not the one that was swept",
                     p->first);
    if (st == TH_OK)
        st = cli_make_folder(folder, &err);
    if (st == TH_OK)
        st = cli_keep_table(c, folder, &err);
    if (st == TH_OK)
        st = cli_write_tables(c, p->points, &source, folder, &counts, &err);
    code = st == TH_OK ? cli_report_tables(&counts, folder) : cli_failed(&err);
    th_case_destroy(c);
    return code;
}

static void help(void)
{
    puts("twinhorizon merge DIR... --out DIR\n\n"
         "Write the tables of a sweep that was run in parts (sweep --part K/N) into a folder.\n\n"
         "  DIR...     the folders of all parts\n"
         "  --out DIR  folder for points.csv, modes.csv and events.csv; made when missing");
}

int cli_merge(int argc, char **argv)
{
    const char *folder = NULL;
    parts p = {0};
    th_error err = {0};
    th_status st = TH_OK;
    int code = CLI_DONE;

    for (int i = 0; i < argc; i++)
        if (strcmp(argv[i], "--help") == 0) {
            help();
            return CLI_DONE;
        }
    p.journal = calloc((size_t)argc + 1, sizeof(*p.journal));
    if (p.journal == NULL)
        st = th_fail(&err, TH_ENOMEM, "merge: %d folders", argc);
    for (int i = 0; st == TH_OK && code == CLI_DONE && i < argc; i++) {
        if (strcmp(argv[i], "--out") == 0) {
            if (i + 1 == argc || folder != NULL)
                code = cli_usage("merge: --out wants one folder");
            else
                folder = argv[++i];
        } else if (argv[i][0] == '-') {
            code = cli_usage("merge: there is no option %s; twinhorizon merge --help lists them",
                             argv[i]);
        } else {
            st = open_one(&p, argv[i], argv, i, &err);
        }
    }
    if (st != TH_OK)
        code = cli_failed(&err);
    else if (code == CLI_DONE && (folder == NULL || p.count == 0))
        code = cli_usage("merge: folders of parts and --out DIR are wanted");
    else if (code == CLI_DONE)
        code = merge(&p, folder);
    for (int i = 0; i < p.count; i++)
        if (th_journal_close(p.journal[i], &err) != TH_OK && code == CLI_DONE)
            code = cli_failed(&err);
    free(p.journal);
    free(p.first);
    return code;
}
