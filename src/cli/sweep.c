/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * twinhorizon sweep CASE --out DIR: points.csv, the growth-rate table, one row per configuration,
 * and modes.csv, one row per mode of each. Rows reach the disk point by point, modes first, so
 * that a run that is killed leaves every finished point in DIR/points.csv.part. */
#include <errno.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <twinhorizon/sweep.h>
#include <unistd.h>

#include "cli.h"

typedef struct {
    const th_case *c;
    th_table *points, *modes;
    long total, undecided, failed, unstable;
    bool show; /* progress on standard error */
} state;

/* The axes' columns, the same in both tables. */
static int axis_columns(const th_case *c, th_column *column)
{
    for (int a = 0; a < c->axes; a++) {
        const th_shape_key *key = &c->setup.shape->key[c->axis[a].key];

        column[a] = (th_column){.name = key->key,
                                .title = key->doc,
                                .unit = cli_unit(c, key->dimension),
                                .datatype = "number"};
    }
    return c->axes;
}

static th_status start(const char *folder, const char *name, const th_column *own, int count,
                       const char *title, const th_case *c, th_table **out, th_error *err)
{
    th_column column[TH_SHAPE_KEYS_MAX + 16];
    const int axes = axis_columns(c, column);
    const size_t size = strlen(folder) + strlen(name) + 2;
    char *path = malloc(size);
    th_status st;

    if (path == NULL)
        return th_fail(err, TH_ENOMEM, "sweep: a name of %zu bytes", size);
    (void)snprintf(path, size, "%s/%s", folder, name);
    for (int i = 0; i < count; i++)
        column[axes + i] = own[i];
    st = th_table_create(path, NULL, column, axes + count, title, c->text, out, err);
    if (st == TH_OK)
        th_table_keep(*out); /* what is finished stays, whatever ends the run */
    free(path);
    return st;
}

static th_status start_tables(state *w, const char *folder, th_error *err)
{
    const char *rate = cli_unit(w->c, TH_DIM_RATE);
    const th_column points[] = {
        {.name = "horizon_distance",
         .title = "first black-hole to last white-hole horizon",
         .unit = cli_unit(w->c, TH_DIM_LENGTH),
         .datatype = "number"},
        {.name = "index", .title = "static index", .datatype = "integer"},
        {.name = "census",
         .title = "growing modes counted by the argument principle",
         .datatype = "integer",
         .description = "empty when it could not decide"},
        {.name = "unstable",
         .title = "growing modes found, both signs of the frequency",
         .datatype = "integer"},
        {.name = "growth_max",
         .title = "largest growth rate, 0 when nothing grows",
         .unit = rate,
         .datatype = "number"},
        {.name = "omega_re_fastest",
         .title = "angular frequency of the fastest growing mode",
         .unit = rate,
         .datatype = "number",
         .description = "empty when nothing grows"},
        {.name = "status",
         .title = "state of the point",
         .datatype = "string",
         .format = "ok|undecided|failed"},
    };
    const th_column modes[] = {
        {.name = "mode", .title = "number at this point, by growth rate", .datatype = "integer"},
        {.name = "branch", .title = "identity along the last axis", .datatype = "integer"},
        {.name = "label",
         .title = "kind of mode",
         .datatype = "string",
         .format = "unstable|trapped|stable|undecided"},
        {.name = "omega_re", .title = "angular frequency", .unit = rate, .datatype = "number"},
        {.name = "omega_im", .title = "growth rate", .unit = rate, .datatype = "number"},
        {.name = "omega_error",
         .title = "error bar of the complex frequency",
         .unit = rate,
         .datatype = "number"},
        {.name = "confirmed",
         .title = "computations that agree",
         .datatype = "string",
         .description = "names joined by +"},
    };
    th_status st = start(folder, "points.csv", points, sizeof points / sizeof points[0],
                         "growth-rate table, one row per configuration", w->c, &w->points, err);

    if (st == TH_OK)
        st = start(folder, "modes.csv", modes, sizeof modes / sizeof modes[0],
                   "modes of each configuration", w->c, &w->modes, err);
    return st;
}

static void put_axes(th_table *table, const th_case *c, const double *value)
{
    for (int a = 0; a < c->axes; a++)
        th_table_put_number(
            table,
            value[a] * th_scale_factor(&c->scale, c->setup.shape->key[c->axis[a].key].dimension));
}

static th_status put_modes(state *w, const th_sweep_point *point, th_error *err)
{
    const double rate = th_scale_factor(&w->c->scale, TH_DIM_RATE);
    th_status st = TH_OK;

    for (int i = 0; st == TH_OK && point->answer != NULL && i < point->answer->count; i++) {
        const th_mode *m = &point->answer->mode[i];
        char confirmed[TH_CONFIRMED_SIZE];

        th_confirmed_text(m->confirmed, confirmed);
        put_axes(w->modes, w->c, point->value);
        th_table_put_integer(w->modes, i + 1);
        th_table_put_integer(w->modes, point->branch[i]);
        th_table_put_text(w->modes, th_label_text(m->label));
        th_table_put_number(w->modes, m->omega_re * rate);
        th_table_put_number(w->modes, m->omega_im * rate);
        th_table_put_number(w->modes, m->omega_error * rate);
        th_table_put_text(w->modes, confirmed);
        st = th_table_end_row(w->modes, err);
    }
    if (st == TH_OK)
        st = th_table_flush(w->modes, err);
    return st;
}

static th_status put_point(state *w, const th_sweep_point *point, th_error *err)
{
    const double rate = th_scale_factor(&w->c->scale, TH_DIM_RATE);
    const th_solution *s = point->answer;
    th_status st;

    put_axes(w->points, w->c, point->value);
    if (s == NULL) {
        for (int i = 0; i < 6; i++)
            th_table_put_nothing(w->points);
        th_table_put_text(w->points, "failed");
    } else {
        const bool grows = s->unstable > 0;

        th_table_put_number(w->points,
                            point->horizon_distance * th_scale_factor(&w->c->scale, TH_DIM_LENGTH));
        if (s->index_known)
            th_table_put_integer(w->points, s->index);
        else
            th_table_put_nothing(w->points);
        if (s->census_known)
            th_table_put_integer(w->points, s->census);
        else
            th_table_put_nothing(w->points);
        th_table_put_integer(w->points, s->unstable);
        th_table_put_number(w->points, grows ? s->mode[0].omega_im * rate : 0.0);
        if (grows)
            th_table_put_number(w->points, s->mode[0].omega_re * rate);
        else
            th_table_put_nothing(w->points);
        th_table_put_text(w->points, s->verdict == TH_VERDICT_UNDECIDED ? "undecided" : "ok");
    }
    st = th_table_end_row(w->points, err);
    return st == TH_OK ? th_table_flush(w->points, err) : st;
}

static th_status take(void *ctx, const th_sweep_point *point, th_error *err)
{
    state *w = ctx;
    th_status st = put_modes(w, point, err);

    if (st == TH_OK)
        st = put_point(w, point, err);
    w->failed += point->answer == NULL;
    w->undecided += point->answer != NULL && point->answer->verdict == TH_VERDICT_UNDECIDED;
    w->unstable += point->answer != NULL && point->answer->unstable > 0;
    if (w->show)
        fprintf(stderr, "\r%ld of %ld points, %ld unstable", point->number + 1, w->total,
                w->unstable);
    if (point->answer == NULL)
        fprintf(stderr, "%stwinhorizon: point %ld of %ld has no answer: %s\n", w->show ? "\n" : "",
                point->number + 1, w->total, point->message);
    return st;
}

static th_status make_folder(const char *folder, th_error *err)
{
    struct stat is;

    if (mkdir(folder, 0777) == 0)
        return TH_OK;
    if (errno == EEXIST && stat(folder, &is) == 0 && S_ISDIR(is.st_mode))
        return TH_OK;
    return th_fail(err, TH_EIO, "%s: the folder cannot be made (%s)", folder, strerror(errno));
}

static th_status run(state *w, const char *folder, th_error *err)
{
    th_status st = th_sweep_size(w->c, &w->total, err);

    if (st == TH_OK)
        st = make_folder(folder, err);
    if (st == TH_OK)
        st = start_tables(w, folder, err);
    if (st == TH_OK)
        st = th_sweep_run(w->c, take, w, err);
    if (w->show)
        fputc('\n', stderr);
    if (st == TH_OK)
        st = th_table_finish(w->modes, err);
    if (st == TH_OK)
        st = th_table_finish(w->points, err);
    return st;
}

int cli_sweep(int argc, char **argv)
{
    const char *folder = NULL;
    const cli_option option[] = {
        {"--out", "DIR", "folder for points.csv and modes.csv; made when missing", &folder},
    };
    cli_arguments arguments;
    state w = {.show = isatty(STDERR_FILENO) != 0};
    th_case *c = NULL;
    th_error err = {0};
    th_status st;
    int code = cli_read("sweep", "Solve every point of the [sweep] axes and write the tables.",
                        argc, argv, option, 1, &arguments);

    if (code != CLI_DONE)
        return code < 0 ? CLI_DONE : code;
    if (folder == NULL)
        return cli_usage("sweep: --out DIR is wanted");
    st = th_case_read(arguments.case_path, arguments.set, arguments.sets, &c, &err);
    w.c = c;
    if (st == TH_OK)
        st = run(&w, folder, &err);
    if (st != TH_OK)
        code = cli_failed(&err);
    else
        printf("%ld points: %ld unstable, %ld undecided, %ld failed; tables %s/points.csv and "
               "%s/modes.csv\n",
               w.total, w.unstable, w.undecided, w.failed, folder, folder);
    if (st == TH_OK && w.undecided + w.failed > 0)
        code = CLI_UNDECIDED;
    th_table_destroy(w.modes);
    th_table_destroy(w.points);
    th_case_destroy(c);
    return code;
}
