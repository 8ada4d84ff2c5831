/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * points.csv, the growth-rate table, one row per configuration, and modes.csv, one row per mode of
 * each. A new column is one line of its list below and one put in put_point or put_modes. */
#include "tables.h"

#include <errno.h>
#include <gsl/gsl_math.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <twinhorizon/sweep.h>

#include "cli.h"

/* A mode may move this far between neighbouring points, relative to the top of the band, beside
 * its extrapolation; farther than that it is taken for a new branch. */
static const double branch_reach = 0.1;

typedef struct {
    const th_case *c;
    th_table *points, *modes;
    th_branches line;
    double reach;
    int *branch; /* [room] */
    int room;
} writer;

char *cli_join(const char *folder, const char *name)
{
    const size_t size = strlen(folder) + strlen(name) + 2;
    char *path = malloc(size);

    if (path != NULL)
        (void)snprintf(path, size, "%s/%s", folder, name);
    return path;
}

th_status cli_make_folder(const char *folder, th_error *err)
{
    struct stat is;

    if (mkdir(folder, 0777) == 0)
        return TH_OK;
    if (errno == EEXIST && stat(folder, &is) == 0 && S_ISDIR(is.st_mode))
        return TH_OK;
    return th_fail(err, TH_EIO, "%s: the folder cannot be made (%s)", folder, strerror(errno));
}

/* The axes' columns, the same in both tables. */
static int axis_columns(const th_case *c, th_column *column)
{
    for (int a = 0; a < c->axes; a++) {
        const th_shape_key *key = th_axis_key(c->setup.shape, c->axis[a].key);

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
    char *path = cli_join(folder, name);
    th_status st;

    if (path == NULL)
        return th_fail(err, TH_ENOMEM, "sweep: the name of %s", name);
    for (int i = 0; i < count; i++)
        column[axes + i] = own[i];
    st = th_table_create(path, NULL, column, axes + count, title, c->text, out, err);
    free(path);
    return st;
}

static th_status start_tables(writer *w, const char *folder, th_error *err)
{
    const char *rate = cli_unit(w->c, TH_DIM_RATE);
    const th_column points[] = {
        {.name = "horizon_distance",
         .title = "first black-hole to last white-hole horizon",
         .unit = cli_unit(w->c, TH_DIM_LENGTH),
         .datatype = "number"},
        {.name = "index",
         .title = "static index",
         .datatype = "integer",
         .description = "empty when it does not exist or cannot decide"},
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

static void put_axes(th_table *table, const th_case *c, long number)
{
    double value[TH_SHAPE_KEYS_MAX];

    th_sweep_values(c, number, value);
    for (int a = 0; a < c->axes; a++) {
        const th_shape_key *key = th_axis_key(c->setup.shape, c->axis[a].key);

        th_table_put_number(table, value[a] * th_scale_factor(&c->scale, key->dimension));
    }
}

/* At the start of a line: forget the branches and measure how far modes may move. */
static void new_line(writer *w, long number)
{
    const th_flow_setup setup = th_sweep_setup(w->c, number);
    th_flow *flow = NULL;

    th_branches_clear(&w->line);
    w->reach = HUGE_VAL;
    if (th_flow_build(&setup, &flow, NULL) == TH_OK)
        w->reach = branch_reach * th_flow_band_limit(flow);
    th_flow_destroy(flow);
}

static th_status number_branches(writer *w, const th_point *p, th_error *err)
{
    if (p->count > w->room) {
        int *grown = realloc(w->branch, (size_t)p->count * sizeof *grown);

        if (grown == NULL)
            return th_fail(err, TH_ENOMEM, "sweep: branches of %d modes", p->count);
        w->branch = grown;
        w->room = p->count;
    }
    return th_branches_next(&w->line, p, w->reach, w->branch, err);
}

static th_status put_modes(writer *w, const th_point *p, th_error *err)
{
    const double rate = th_scale_factor(&w->c->scale, TH_DIM_RATE);
    th_status st = number_branches(w, p, err);

    for (int i = 0; st == TH_OK && i < p->count; i++) {
        const th_point_mode *m = &p->mode[i];
        char confirmed[TH_CONFIRMED_SIZE];

        th_confirmed_text(m->confirmed, confirmed);
        put_axes(w->modes, w->c, p->number);
        th_table_put_integer(w->modes, i + 1);
        th_table_put_integer(w->modes, w->branch[i]);
        th_table_put_text(w->modes, th_label_text(m->label));
        th_table_put_exact(w->modes, m->omega_re * rate);
        th_table_put_exact(w->modes, m->omega_im * rate);
        th_table_put_number(w->modes, m->omega_error * rate);
        th_table_put_text(w->modes, confirmed);
        st = th_table_end_row(w->modes, err);
    }
    return st;
}

static void put_count(th_table *table, bool known, int count)
{
    if (known)
        th_table_put_integer(table, count);
    else
        th_table_put_nothing(table);
}

static th_status put_point(writer *w, const th_point *p, th_error *err)
{
    const double rate = th_scale_factor(&w->c->scale, TH_DIM_RATE);
    const bool answered = p->state != TH_POINT_FAILED, grows = answered && p->unstable > 0;

    put_axes(w->points, w->c, p->number);
    if (answered)
        th_table_put_number(w->points,
                            p->horizon_distance * th_scale_factor(&w->c->scale, TH_DIM_LENGTH));
    else
        th_table_put_nothing(w->points);
    put_count(w->points, answered && p->index_known, p->index);
    put_count(w->points, answered && p->census_known, p->census);
    put_count(w->points, answered, p->unstable);
    if (answered)
        th_table_put_exact(w->points, grows ? p->mode[0].omega_im * rate : 0.0);
    else
        th_table_put_nothing(w->points);
    if (grows)
        th_table_put_exact(w->points, p->mode[0].omega_re * rate);
    else
        th_table_put_nothing(w->points);
    th_table_put_text(w->points, th_point_state_text(p->state));
    return th_table_end_row(w->points, err);
}

static th_status put_all(writer *w, long points, const cli_source *source, cli_counts *counts,
                         th_error *err)
{
    const long line = w->c->axis[w->c->axes - 1].count;
    th_point p = {0};
    th_status st = TH_OK;

    for (long i = 0; st == TH_OK && i < points; i++) {
        if (i % line == 0)
            new_line(w, i);
        st = source->get(source->ctx, i, &p, err);
        if (st == TH_ENONE) { /* another part's point */
            st = TH_OK;
            continue;
        }
        if (st == TH_OK)
            st = put_modes(w, &p, err);
        if (st == TH_OK)
            st = put_point(w, &p, err);
        counts->points++;
        counts->unstable += p.unstable > 0;
        counts->undecided += p.state == TH_POINT_UNDECIDED;
        counts->failed += p.state == TH_POINT_FAILED;
    }
    th_point_clear(&p);
    return st;
}

th_status cli_write_tables(const th_case *c, long points, const cli_source *source,
                           const char *folder, cli_counts *counts, th_error *err)
{
    writer w = {.c = c};
    th_status st = start_tables(&w, folder, err);

    *counts = (cli_counts){0};
    if (st == TH_OK)
        st = put_all(&w, points, source, counts, err);
    if (st == TH_OK)
        st = th_table_finish(w.modes, err);
    if (st == TH_OK)
        st = th_table_finish(w.points, err);
    th_table_destroy(w.modes);
    th_table_destroy(w.points);
    th_branches_clear(&w.line);
    free(w.branch);
    return st;
}

int cli_report_tables(const cli_counts *counts, const char *folder)
{
    printf("%ld points: %ld unstable, %ld undecided, %ld failed; tables %s/points.csv and "
           "%s/modes.csv\n",
           counts->points, counts->unstable, counts->undecided, counts->failed, folder, folder);
    return counts->undecided + counts->failed > 0 ? CLI_UNDECIDED : CLI_DONE;
}
