/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * points.csv, the growth-rate table, one row per configuration, modes.csv, one row per mode of
 * each, and events.csv, one row per event between two neighbours along the last axis. A new column
 * is one line of its list below and one put in put_point, put_modes or put_events. */
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
/* Flows of a line that are looked at for the band: its ends and between. */
enum { LOOKS = 4 };

/* A point and the branches of its modes. */
typedef struct {
    th_point point;
    int *branch; /* [room] */
    int room;
} numbered;

typedef struct {
    const th_case *c;
    th_table *points, *modes, *events;
    th_workspace *workspace;
    th_branches line;
    double reach;
    numbered at[2];  /* in turn the point in hand and the one before */
    th_event *event; /* [room] */
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
    if (errno == EEXIST && stat(folder, &is) == 0) {
        if (S_ISDIR(is.st_mode))
            return TH_OK;
        return th_fail(err, TH_EIO, "%s: a file, want a folder", folder);
    }
    return th_fail(err, TH_EIO, "%s: the folder cannot be made (%s)", folder, strerror(errno));
}

static const th_shape_key *axis_key(const th_case *c, int axis)
{
    return th_axis_key(c->setup.shape, c->axis[axis].key);
}

/* A table: the columns of the first axes, the same in all tables, then its own. */
static th_status start(const char *folder, const char *name, int axes, const th_column *own,
                       int count, const char *title, const th_case *c, th_table **out,
                       th_error *err)
{
    th_column column[TH_SHAPE_KEYS_MAX + 16];
    char *path = cli_join(folder, name);
    th_status st;

    if (path == NULL)
        return th_fail(err, TH_ENOMEM, "sweep: the name of %s", name);
    for (int a = 0; a < axes; a++) {
        const th_shape_key *key = axis_key(c, a);

        column[a] = (th_column){.name = key->key,
                                .title = key->doc,
                                .unit = cli_unit(c, key->dimension),
                                .datatype = "number"};
    }
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
    const int axes = w->c->axes;
    const char *unit = cli_unit(w->c, axis_key(w->c, axes - 1)->dimension);
    const th_column events[] = {
        {.name = "from",
         .title = "value of the last axis before the event",
         .unit = unit,
         .datatype = "number"},
        {.name = "to",
         .title = "value of the last axis after the event",
         .unit = unit,
         .datatype = "number"},
        {.name = "event",
         .title = "what happens to a growing mode",
         .datatype = "string",
         .format = "birth|merger|split|death",
         .description = "merger: a purely growing mode becomes an oscillating pair; split: the "
                        "reverse"},
        {.name = "branch",
         .title = "identity along the last axis, as in modes.csv",
         .datatype = "integer",
         .description = "of a merger or a split the oscillating one"},
        {.name = "count_change",
         .title = "change of the number of growing modes, both signs of the frequency",
         .datatype = "integer"},
    };
    th_status st = start(folder, "points.csv", axes, points, sizeof points / sizeof points[0],
                         "growth-rate table, one row per configuration", w->c, &w->points, err);

    if (st == TH_OK)
        st = start(folder, "modes.csv", axes, modes, sizeof modes / sizeof modes[0],
                   "modes of each configuration", w->c, &w->modes, err);
    if (st == TH_OK)
        st = start(folder, "events.csv", axes - 1, events, sizeof events / sizeof events[0],
                   "births, mergers, splits and deaths of growing modes along the last axis", w->c,
                   &w->events, err);
    return st;
}

/* The point's values of the axes first .. last - 1. */
static void put_axes(th_table *table, const th_case *c, int first, int last, long number)
{
    double value[TH_SHAPE_KEYS_MAX];

    th_sweep_values(c, number, value);
    for (int a = first; a < last; a++)
        th_table_put_number(table,
                            value[a] * th_scale_factor(&c->scale, axis_key(c, a)->dimension));
}

/* At the start of a line: forget the branches and measure how far modes may move. */
static void new_line(writer *w, long number)
{
    const int last = w->c->axis[w->c->axes - 1].count - 1;
    double widest = 0.0;

    th_branches_clear(&w->line);
    for (int i = 0; i <= LOOKS;
         i++) { /* the widest band of the line; a short pocket has hardly any */
        th_flow_setup setup = th_sweep_setup(w->c, number + (long)last * i / LOOKS);
        th_flow *flow = NULL;

        setup.workspace = w->workspace;
        if (th_flow_build(&setup, &flow, NULL) == TH_OK)
            widest = fmax(widest, th_flow_band_limit(flow));
        th_flow_destroy(flow);
    }
    w->reach = widest > 0.0 ? branch_reach * widest : HUGE_VAL;
}

static th_status number_branches(writer *w, numbered *at, th_error *err)
{
    const int count = at->point.count;

    if (count > at->room) {
        int *grown = realloc(at->branch, (size_t)count * sizeof *grown);

        if (grown == NULL)
            return th_fail(err, TH_ENOMEM, "sweep: branches of %d modes", count);
        at->branch = grown;
        at->room = count;
    }
    return th_branches_next(&w->line, &at->point, w->reach, at->branch, err);
}

static th_status put_modes(writer *w, const numbered *at, th_error *err)
{
    const double rate = th_scale_factor(&w->c->scale, TH_DIM_RATE);
    const th_point *p = &at->point;
    th_status st = TH_OK;

    for (int i = 0; st == TH_OK && i < p->count; i++) {
        const th_point_mode *m = &p->mode[i];
        char confirmed[TH_CONFIRMED_SIZE];

        th_confirmed_text(m->confirmed, confirmed);
        put_axes(w->modes, w->c, 0, w->c->axes, p->number);
        th_table_put_integer(w->modes, i + 1);
        th_table_put_integer(w->modes, at->branch[i]);
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

    put_axes(w->points, w->c, 0, w->c->axes, p->number);
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

/* The events between two neighbours of a line. */
static th_status put_events(writer *w, const numbered *before, const numbered *now, th_error *err)
{
    const bool open = w->c->setup.ends.kind == TH_ENDS_OPEN;
    const int last = w->c->axes - 1, room = 2 * (before->point.count + now->point.count);
    th_status st = TH_OK;
    int count;

    if (room > w->room) {
        th_event *grown = realloc(w->event, (size_t)room * sizeof *grown);

        if (grown == NULL)
            return th_fail(err, TH_ENOMEM, "sweep: %d events", room);
        w->event = grown;
        w->room = room;
    }
    count =
        th_events_find(&before->point, before->branch, &now->point, now->branch, open, w->event);
    for (int i = 0; st == TH_OK && i < count; i++) {
        put_axes(w->events, w->c, 0, last, now->point.number);
        put_axes(w->events, w->c, last, last + 1, before->point.number);
        put_axes(w->events, w->c, last, last + 1, now->point.number);
        th_table_put_text(w->events, th_event_kind_text(w->event[i].kind));
        th_table_put_integer(w->events, w->event[i].branch);
        th_table_put_integer(w->events, w->event[i].change);
        st = th_table_end_row(w->events, err);
    }
    return st;
}

static th_status put_all(writer *w, long points, const cli_source *source, cli_counts *counts,
                         th_error *err)
{
    const long line = w->c->axis[w->c->axes - 1].count;
    numbered *now = &w->at[0], *before = &w->at[1];
    bool follows = false; /* the point before is certified too */
    th_status st = TH_OK;

    for (long i = 0; st == TH_OK && i < points; i++) {
        const th_point *p = &now->point;
        numbered *swap;

        if (i % line == 0) {
            new_line(w, i);
            follows = false;
        }
        st = source->get(source->ctx, i, &now->point, err);
        if (st == TH_ENONE) { /* another part's point */
            st = TH_OK;
            follows = false;
            continue;
        }
        if (st == TH_OK)
            st = number_branches(w, now, err);
        if (st == TH_OK)
            st = put_modes(w, now, err);
        if (st == TH_OK && follows && p->state == TH_POINT_OK)
            st = put_events(w, before, now, err);
        if (st == TH_OK)
            st = put_point(w, p, err);
        counts->points++;
        counts->unstable += p->unstable > 0;
        counts->undecided += p->state == TH_POINT_UNDECIDED;
        counts->failed += p->state == TH_POINT_FAILED;
        follows = p->state == TH_POINT_OK;
        swap = before;
        before = now;
        now = swap;
    }
    return st;
}

th_status cli_write_tables(const th_case *c, long points, const cli_source *source,
                           const char *folder, cli_counts *counts, th_error *err)
{
    writer w = {.c = c};
    th_status st = th_workspace_create(&w.workspace, err);

    *counts = (cli_counts){0};
    w.line.workspace = w.workspace;
    if (st == TH_OK)
        st = start_tables(&w, folder, err);
    if (st == TH_OK)
        st = put_all(&w, points, source, counts, err);
    if (st == TH_OK)
        st = th_table_finish(w.events, err);
    if (st == TH_OK)
        st = th_table_finish(w.modes, err);
    if (st == TH_OK)
        st = th_table_finish(w.points, err);
    th_table_destroy(w.events);
    th_table_destroy(w.modes);
    th_table_destroy(w.points);
    th_branches_clear(&w.line);
    for (int i = 0; i < 2; i++) {
        th_point_clear(&w.at[i].point);
        free(w.at[i].branch);
    }
    free(w.event);
    th_workspace_destroy(w.workspace);
    return st;
}

int cli_report_tables(const cli_counts *counts, const char *folder)
{
    printf("%ld points: %ld unstable, %ld undecided, %ld failed; tables points.csv, modes.csv and "
           "events.csv in %s\n",
           counts->points, counts->unstable, counts->undecided, counts->failed, folder);
    return counts->undecided + counts->failed > 0 ? CLI_UNDECIDED : CLI_DONE;
}
