/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * twinhorizon onset CASE: the lengths of the pocket at which the number of growing modes changes,
 * for one configuration or, with a [sweep] over other keys, at every point of its grid; as text or
 * as a table. A new column of the table is one entry in start_table and one put in put_rows. */
#include <gsl/gsl_math.h>
#include <limits.h>
#include <string.h>
#include <twinhorizon/onset.h>

#include "cli.h"

/* Own columns of the table, after the axes: as many as start_table lists. */
enum { OWN_COLUMNS = 6 };

typedef struct {
    const th_case *c;
    cli_view view;
    const th_shape_key *key; /* the length */
    double shown;            /* the text shows reduced lengths times this ... */
    const char *word;        /* ... and this unit; a stretch is a bare number */
    double upto;
    th_table *table; /* NULL: text */
    bool text, map;
    long failed, rows, points;
} state;

static bool open_ends(const state *w)
{
    return w->c->setup.ends.kind == TH_ENDS_OPEN;
}

/* ---- table ----------------------------------------------------------------------------------- */

static th_status start_table(state *w, const char *path, th_error *err)
{
    const th_case *c = w->c;
    const char *length = cli_unit(c, w->key->dimension);
    const bool open = open_ends(w);
    const th_column own[OWN_COLUMNS] = {
        {.name = "order",
         .title = open ? "growing modes just below" : "number of the change, from 0",
         .datatype = "integer"},
        {.name = "gap",
         .title = w->key->doc,
         .unit = length,
         .datatype = "number",
         .description = "value of the key at which the number of growing modes changes"},
        {.name = "gap_error", .title = "error bar of gap", .unit = length, .datatype = "number"},
        {.name = "kind",
         .title = "what appears or disappears",
         .datatype = "string",
         .description = open ? "growing: one more purely growing mode; pair: the slowest growing "
                               "mode turns into an oscillating pair"
                             : "growing: a purely growing mode; pair: an oscillating one with its "
                               "mirror image",
         .format = "growing|pair"},
        {.name = "change",
         .title = "change of the number of growing modes",
         .datatype = "integer",
         .description = "both signs of the frequency counted; < 0: stability is regained"},
        {.name = "omega_re",
         .title = "angular frequency at the change",
         .unit = cli_unit(c, TH_DIM_RATE),
         .datatype = "number"},
    };
    th_column column[TH_SHAPE_KEYS_MAX + OWN_COLUMNS];
    int columns = 0;

    for (int a = 0; a < c->axes; a++) {
        const th_shape_key *key = th_axis_key(c->setup.shape, c->axis[a].key);

        if (key != w->key)
            column[columns++] = (th_column){.name = key->key,
                                            .title = key->doc,
                                            .unit = cli_unit(c, key->dimension),
                                            .datatype = "number"};
    }
    for (int i = 0; i < OWN_COLUMNS; i++)
        column[columns++] = own[i];
    return cli_table(path, column, columns, "switch-on lengths", c, &w->table, err);
}

static th_status put_rows(state *w, const th_onset_point *point, th_error *err)
{
    const th_scale *scale = &w->c->scale;
    const double length = th_scale_factor(scale, w->key->dimension);
    th_status st = TH_OK;

    for (int i = 0; st == TH_OK && i < point->list->count; i++) {
        const th_onset *o = &point->list->onset[i];

        for (int a = 0; a < point->axes; a++) {
            const th_shape_key *key = th_axis_key(w->c->setup.shape, point->axis[a]->key);

            th_table_put_number(w->table, point->value[a] * th_scale_factor(scale, key->dimension));
        }
        th_table_put_integer(w->table, o->order);
        th_table_put_number(w->table, o->gap * length);
        th_table_put_number(w->table, o->gap_error * length);
        th_table_put_text(w->table, th_onset_kind_text(o->kind));
        th_table_put_integer(w->table, o->change);
        th_table_put_number(w->table, o->omega_re * th_scale_factor(scale, TH_DIM_RATE));
        st = th_table_end_row(w->table, err);
    }
    return st;
}

/* ---- text ------------------------------------------------------------------------------------ */

static void print_value(const state *w, const th_shape_key *key, double value)
{
    const cli_view *v = &w->view;

    switch (key->dimension) {
    case TH_DIM_LENGTH:
        printf("%s = %.9g%s", key->key, value * v->length, v->micrometres);
        break;
    case TH_DIM_SPEED:
        printf("%s = %.9g%s", key->key, value * v->speed, v->speeds);
        break;
    default: {
        const char *unit = cli_unit(w->c, key->dimension);
        const bool named = unit != NULL && key->dimension != TH_DIM_NUMBER;

        printf("%s = %.9g%s%s", key->key, value * th_scale_factor(&w->c->scale, key->dimension),
               named ? " " : "", named ? unit : "");
    }
    }
}

/* The answer in a sentence. */
static void print_sentence(const state *w, const th_onset_list *list)
{
    int after = list->before;

    for (int i = 0; i < list->count; i++)
        after += list->onset[i].change;
    if (list->count == 0) {
        printf("No change: %d growing %s at every %s up to %.9g%s.\n", list->before,
               list->before == 1 ? "mode" : "modes", w->key->key, list->to * w->shown, w->word);
        return;
    }
    if (list->complete)
        printf("%d switch-on %s up to %s = %.9g%s: ", list->count,
               list->count == 1 ? "length" : "lengths", w->key->key, list->to * w->shown, w->word);
    else
        printf("The first %d switch-on %s of %s: ", list->count,
               list->count == 1 ? "length" : "lengths", w->key->key);
    printf("from %d to %d growing %s.\n", list->before, after, after == 1 ? "mode" : "modes");
}

static void print_rows(const state *w, const th_onset_list *list)
{
    const cli_view *v = &w->view;
    const bool open = open_ends(w);
    char length[64], frequency[64];
    int modes = list->before;

    if (list->count == 0)
        return;
    (void)snprintf(length, sizeof length, "%s%s", w->key->key, v->si ? "/um" : "");
    (void)snprintf(frequency, sizeof frequency, "frequency%s", v->si ? "/Hz" : "");
    printf("\n%5s %16s %8s  %-8s %6s %6s%s%s\n", "order", length, v->si ? "+-/um" : "+-", "kind",
           "change", "beyond", open ? "" : "  ", open ? "" : frequency);
    for (int i = 0; i < list->count; i++) {
        const th_onset *o = &list->onset[i];
        const double error = o->gap_error * w->shown;
        char gap[CLI_NUMBER], omega[CLI_NUMBER];

        modes += o->change;
        printf("%5d %16s %8.1e  %-8s %+6d %6d%s%s\n", o->order,
               cli_number(o->gap * w->shown, error, gap), error, th_onset_kind_text(o->kind),
               o->change, modes, open ? "" : "  ",
               open ? "" : cli_number(o->omega_re * v->frequency, 0.0, omega));
    }
}

static void print_notes(const state *w, const th_onset_list *list)
{

    if (open_ends(w))
        printf(
            "\nBetween     two rows the number of growing modes is constant: %d below the first, "
            "then as `beyond` says\n",
            list->before);
    else
        printf("\nBeyond      says how many modes grow above a row; below the first: %d\n",
               list->before);
    printf("Searched    %s from %.3g to %.9g%s%s\n", w->key->key, list->from * w->shown,
           list->to * w->shown, w->word,
           list->to < w->upto ? ", the longest sample for which the flow exists" : "");
}

/* What the words of the rows mean. */
static void print_words(const state *w)
{
    puts("Counted     both signs of the frequency; kind `growing`: a purely growing mode, `pair`: "
         "an "
         "oscillating one");
    if (w->c->setup.ends.kind == TH_ENDS_WALLS)
        puts("Note        walls reflect sound: these are lengths of the box, not of open ends");
}

static void print_single(const state *w, const th_onset_list *list)
{
    print_sentence(w, list);
    printf("Shape       %s, %s%s\n", w->c->setup.shape->name, cli_ends_text(w->c->setup.ends.kind),
           w->view.si ? "" : "; reduced units, hbar = m = 1");
    print_rows(w, list);
    print_notes(w, list);
    print_words(w);
}

static void print_point(const state *w, const th_onset_point *point)
{
    for (int a = 0; a < point->axes; a++) {
        fputs(a == 0 ? "At " : ", ", stdout);
        print_value(w, th_axis_key(w->c->setup.shape, point->axis[a]->key), point->value[a]);
    }
    fputs(": ", stdout);
    print_sentence(w, point->list);
    print_rows(w, point->list);
    putchar('\n');
}

/* ---- command --------------------------------------------------------------------------------- */

static th_status take(void *ctx, const th_onset_point *point, th_error *err)
{
    state *w = ctx;

    if (point->list == NULL && point->axes == 0)
        return th_fail(err, point->status, "%s", point->message);
    w->points++;
    if (point->list == NULL) {
        w->failed++;
        fprintf(stderr, "twinhorizon: point %ld of %ld has no answer: %s\n", point->number + 1,
                point->points, point->message);
        return TH_OK;
    }
    w->rows += point->list->count;
    if (w->text && point->axes == 0)
        print_single(w, point->list);
    else if (w->text && w->table == NULL)
        print_point(w, point);
    w->map = point->axes > 0;
    return w->table != NULL ? put_rows(w, point, err) : TH_OK;
}

static th_status read_upto(const th_case *c, const char *text, double *out, th_error *err)
{
    const int key = th_shape_length(c->setup.shape);
    const th_dimension dimension = key >= 0 ? c->setup.shape->key[key].dimension : TH_DIM_LENGTH;
    const bool bare = c->scale.system == TH_SYSTEM_REDUCED || dimension == TH_DIM_NUMBER;
    th_error why = {0};
    th_status st;

    *out = th_onset_upto(c);
    if (text == NULL)
        return TH_OK;
    st = bare ? th_number_read(text, out, &why) : th_quantity_read(text, dimension, out, &why);
    if (st != TH_OK)
        return th_fail(err, st, "onset: --upto %.64s: %.400s", text, why.text);
    *out /= th_scale_factor(&c->scale, dimension);
    if (!(*out > 0.0))
        return th_fail(err, TH_EINVAL, "onset: --upto %.64s, want a length > 0", text);
    return TH_OK;
}

static th_status run(state *w, const th_onset_options *options, const char *csv, th_error *err)
{
    const int key = th_shape_length(w->c->setup.shape);
    th_status st;

    if (key < 0)
        return th_fail(err, TH_EINVAL, "onset: shape %s has no key that is a pocket's length",
                       w->c->setup.shape->name);
    if (!(options->upto > 0.0))
        return th_fail(err, TH_EINVAL,
                       "onset: this flow has no pocket of a length: %s is not given, neither is "
                       "--upto",
                       w->c->setup.shape->key[key].key);
    w->key = &w->c->setup.shape->key[key];
    w->upto = options->upto;
    w->view = cli_view_of(w->c);
    w->shown = w->key->dimension == TH_DIM_LENGTH ? w->view.length : 1.0;
    w->word = w->key->dimension == TH_DIM_LENGTH ? w->view.micrometres : "";
    w->text = csv == NULL || strcmp(csv, "-") != 0;
    st = csv != NULL ? start_table(w, csv, err) : TH_OK;
    if (st == TH_OK)
        st = th_onset_map(w->c, options, take, w, err);
    if (st == TH_OK && w->table != NULL)
        st = th_table_finish(w->table, err);
    if (st == TH_OK && w->text && w->map) {
        printf("%ld points: %ld switch-on lengths, %ld failed%s%s\n", w->points, w->rows, w->failed,
               csv != NULL ? "; table " : "", csv != NULL ? csv : "");
        print_words(w);
    }
    return st;
}

int cli_onset(int argc, char **argv)
{
    const char *upto = NULL, *csv = NULL, *orders = NULL, *samples = NULL, *threads = NULL;
    const cli_option option[] = {
        {"--upto", "GAP",
         "search up to this length, with its unit in an SI case (default: the largest value of the "
         "axis of [sweep] over it, else 4 times the base value)",
         &upto, CLI_PLAIN},
        {"--orders", "N", "stop after the first N changes", &orders, CLI_PLAIN},
        {"--samples", "N", "rings, walls: lengths looked at first (default 100)", &samples,
         CLI_PLAIN},
        {"--threads", "N", "threads (default: one for each processor)", &threads, CLI_PLAIN},
        {"--csv", "FILE",
         "table order,gap,gap_error,kind,change,omega_re, the axes of other keys "
         "before it; - for standard output",
         &csv, CLI_TABLE},
    };
    th_onset_options options = {0};
    cli_arguments arguments;
    state w = {0};
    th_case *c = NULL;
    th_error err = {0};
    th_status st;
    int code = cli_read("onset",
                        "Find the lengths of the pocket (key gap, or width) at which the number of "
                        "growing modes changes.\nWith a [sweep] over other keys: at every point of "
                        "its grid, the switch-on map.",
                        argc, argv, option, sizeof option / sizeof option[0], &arguments);

    if (code != CLI_DONE)
        return code < 0 ? CLI_DONE : code;
    st = cli_read_case(&arguments, &c, &err);
    w.c = c;
    if (st == TH_OK)
        st = cli_whole("onset", "--orders", orders, 1, INT_MAX, 0, &options.orders, &err);
    if (st == TH_OK)
        st = cli_whole("onset", "--samples", samples, 2, INT_MAX, TH_ONSET_SAMPLES,
                       &options.samples, &err);
    if (st == TH_OK)
        st = cli_threads("onset", threads, &options.threads, &err);
    if (st == TH_OK)
        st = read_upto(c, upto, &options.upto, &err);
    if (st == TH_OK)
        st = run(&w, &options, csv, &err);
    if (st != TH_OK)
        code = cli_failed(&err);
    else if (w.failed > 0)
        code = CLI_UNDECIDED;
    th_table_destroy(w.table);
    th_case_destroy(c);
    return code;
}
