/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A sweep as a figure, from its tables: branches over one axis, or a map of the largest growth rate
 * over the last two axes, with switch-on lengths from the static index. */
#include <math.h>
#include <stdlib.h>
#include <string.h>
#include <twinhorizon/onset.h>
#include <twinhorizon/units.h>

#include "figure.h"
#include "tables.h"

/* Switch-ons drawn: more are a grey patch. */
enum { ORDERS = 40 };
/* Looks of lines in the common style: later branches repeat them and have no title. */
enum { TITLES = 6 };

/* An axis of the figure. */
typedef struct {
    const th_axis *axis;
    const th_shape_key *key;
    double factor; /* shown = reduced x factor */
    char label[96];
} shown_axis;

static shown_axis shown(const th_case *c, const th_shape_key *key)
{
    const cli_view v = cli_view_of(c);
    const char *unit = cli_unit(c, key->dimension);
    shown_axis s = {.key = key, .factor = th_scale_factor(&c->scale, key->dimension)};

    if (v.si && key->dimension == TH_DIM_LENGTH) {
        s.factor = v.length;
        unit = "µm";
    } else if (v.si && key->dimension == TH_DIM_SPEED) {
        s.factor = v.speed;
        unit = "mm/s";
    }
    if (unit == NULL || strcmp(unit, "1") == 0)
        (void)snprintf(s.label, sizeof s.label, "%s%s", key->key,
                       v.si || key->dimension == TH_DIM_NUMBER ? "" : " (reduced)");
    else
        (void)snprintf(s.label, sizeof s.label, "%s (%s)", key->key, unit);
    return s;
}

static shown_axis axis_of(const th_case *c, int a)
{
    shown_axis s = shown(c, th_axis_key(c->setup.shape, c->axis[a].key));

    s.axis = &c->axis[a];
    return s;
}

/* ---- tables read back ----------------------------------------------------------------------- */

typedef struct {
    const th_case *c;
    FILE *out;
    int axes;
    long points;    /* taken: a map shows the first slice of slower axes */
    double *growth; /* [points] in 1/s or reduced; of points.csv */
    char *state;    /* [points] o, u, f */
    int *unstable;  /* [points] */
    bool bad;
} reader;

static double number_of(const char *cell)
{
    double value = 0.0;

    return th_number_read(cell, &value, NULL) == TH_OK ? value : 0.0;
}

static bool take_point(void *ctx, long row, int count, const char *const *cell)
{
    reader *r = ctx;
    const long i = row - 1;

    if (row == 0 || i >= r->points)
        return row == 0;
    if (count != r->axes + 7) {
        r->bad = true;
        return false;
    }
    r->unstable[i] = (int)number_of(cell[r->axes + 3]);
    r->growth[i] = number_of(cell[r->axes + 4]);
    r->state[i] = cell[r->axes + 6][0];
    return true;
}

/* A mode of a line: branch, x, frequency, growth rate; the rows are sorted by branch later. */
typedef struct {
    int branch;
    long row;
    bool grows;
    double x, frequency, growth;
} spot;

typedef struct {
    reader *r;
    spot *spot;
    long count, room;
} spots;

static bool take_mode(void *ctx, long row, int count, const char *const *cell)
{
    spots *s = ctx;
    const int axes = s->r->axes;

    if (row == 0)
        return true;
    if (count != axes + 7) {
        s->r->bad = true;
        return false;
    }
    if (s->count == s->room) {
        const long room = s->room > 0 ? 2 * s->room : 256;
        spot *more = realloc(s->spot, (size_t)room * sizeof *more);

        if (more == NULL) {
            s->r->bad = true;
            return false;
        }
        s->spot = more;
        s->room = room;
    }
    s->spot[s->count++] = (spot){(int)number_of(cell[axes + 1]),
                                 row,
                                 strcmp(cell[axes + 2], "unstable") == 0,
                                 number_of(cell[axes - 1]),
                                 number_of(cell[axes + 3]),
                                 number_of(cell[axes + 4])};
    return true;
}

static int by_branch(const void *a, const void *b)
{
    const spot *x = a, *y = b;

    if (x->branch != y->branch)
        return x->branch < y->branch ? -1 : 1;
    return (x->row > y->row) - (x->row < y->row);
}

static th_status read_table(const char *folder, const char *name, th_row_reader take, void *ctx,
                            const reader *r, th_error *err)
{
    char *path = cli_join(folder, name);
    th_status st = path != NULL ? th_table_read(path, take, ctx, err)
                                : th_fail(err, TH_ENOMEM, "figure: the name of %s", name);

    if (st == TH_OK && r->bad)
        st = th_fail(err, TH_EINVAL, "%s: no table of this sweep", path);
    free(path);
    return st;
}

/* ---- switch-on lengths ---------------------------------------------------------------------- */

/* The rows of a map of lengths: other axis, order, length. */
typedef struct {
    FILE *out;
    double other, length; /* factors */
    int orders;           /* highest seen + 1 */
    double *row;          /* [count, 3] */
    long count, room;
    bool lines; /* one axis: arrows at once */
} curves;

/* A vertical line. */
static void put_onset(const th_onset *o, double length, FILE *out)
{
    fprintf(
        out, "set arrow from first %.12g, graph 0 to first %.12g, graph 1 nohead lw 1 lc rgb %s\n",
        o->gap * length, o->gap * length,
        /* colours differ by one: gnuplot 5.4 gives neighbours of one colour in an SVG one dash */
        o->kind == TH_ONSET_GROWING ? "'#777777' dt '-'" : "'#787878' dt '.'");
}

static th_status take_onset(void *ctx, const th_onset_point *point, th_error *err)
{
    curves *w = ctx;

    for (int i = 0; point->list != NULL && i < point->list->count && i < ORDERS; i++) {
        const th_onset *o = &point->list->onset[i];

        if (w->lines) {
            put_onset(o, w->length, w->out);
            w->count++;
            continue;
        }
        if (w->count == w->room) {
            const long room = w->room > 0 ? 2 * w->room : 64;
            double *more = realloc(w->row, (size_t)room * 3 * sizeof *more);

            if (more == NULL)
                return th_fail(err, TH_ENOMEM, "figure: %ld switch-on lengths", room);
            w->row = more;
            w->room = room;
        }
        w->row[3 * w->count] = point->value[point->axes - 1] * w->other;
        w->row[3 * w->count + 1] = i;
        w->row[3 * w->count + 2] = o->gap * w->length;
        w->count++;
        w->orders = i + 1 > w->orders ? i + 1 : w->orders;
    }
    return TH_OK;
}

/* Lengths for this figure's axes: of the case with the last axes only. Where there is no static
 * index, or the length is not an axis, there are none. */
static th_status find_onsets(const th_case *c, int axes, int threads, curves *w, th_error *err)
{
    const int key = th_shape_length(c->setup.shape);
    const th_axis *last = &c->axis[c->axes - axes];
    th_case part = *c;
    const th_onset_options options = {.orders = ORDERS, .threads = threads};
    bool has = false;
    th_error why;
    th_status st;

    for (int a = 0; a < axes; a++)
        has = has || last[a].key == key;
    if (!has || c->setup.ends.kind != TH_ENDS_OPEN)
        return TH_OK;
    part.axis = c->axis + (c->axes - axes);
    part.axes = axes;
    for (int a = 0; a + axes < c->axes; a++) /* the first slice */
        th_axis_set(c->axis[a].key, c->axis[a].value[0], &part.setup);
    st = th_onset_map(&part, &options, take_onset, w, &why);
    if (st == TH_ENOMEM || st == TH_EBUG)
        return th_fail(err, st, "%s", why.text);
    return TH_OK; /* a figure without the lengths is a figure */
}

/* ---- one axis ------------------------------------------------------------------------------- */

/* Frame of growth and frequency over a length: two panels, one under the other. */
static void two_panels(const cli_view *v, const char *label, double from, double to, int branches,
                       FILE *out)
{
    fprintf(out,
            "set xrange [%.9g:%.9g]\nset multiplot layout 2,1 margins 0.12,0.97,0.14,0.945 spacing "
            "0,0.06\nunset key\nset yrange [0:*]\nset offsets 0,0,graph 0.06,0\nset format x ''\n",
            from, to);
    for (int panel = 0; panel < 2; panel++) {
        if (panel == 1)
            fprintf(out,
                    "unset label\nset format x '%%g'\nset xlabel '%s'\nset key at screen 0.5, "
                    "screen 0.015 "
                    "center bottom horizontal maxrows 1 samplen 2.5\n",
                    label);
        fprintf(out, "set ylabel '%s%s'\nplot ", panel == 0 ? "growth rate" : "frequency",
                panel == 0 ? v->si ? " (1/s)" : " (reduced)"
                : v->si    ? " (Hz)"
                           : " (reduced, angular)");
        for (int b = 1; b <= branches; b++) {
            fprintf(out, "%s$b%d using 1:%d with lines lt %d ", b > 1 ? ", " : "", b,
                    panel == 0 ? 3 : 2, (b - 1) % TITLES + 1);
            if (b <= TITLES)
                fprintf(out, "title 'branch %d'", b);
            else
                fputs("notitle", out);
        }
        if (branches == 0)
            fputs("NaN notitle", out);
        fputs("\n", out);
    }
    fputs("unset multiplot\n", out);
}

static void explain_lines(FILE *out)
{
    fputs("set label 1 'vertical lines: a mode switches on (dashed), the slowest turns into a pair "
          "(dotted)' at graph 1, graph 1.04 right tc rgb '#777777'\n",
          out);
}

static th_status draw_line(const th_case *c, const char *folder, int threads, cli_figure *figure,
                           th_error *err)
{
    const cli_view v = cli_view_of(c);
    const shown_axis x = axis_of(c, 0);
    const double rate = th_scale_factor(&c->scale, TH_DIM_RATE);
    const double table = x.factor / th_scale_factor(&c->scale, x.key->dimension);
    double from = HUGE_VAL, to = -HUGE_VAL;
    reader r = {.c = c, .axes = 1};
    spots s = {.r = &r};
    curves w = {.length = x.factor, .lines = true};
    bool open = false; /* a block is being written */
    int branches = 0;
    th_status st = read_table(folder, "modes.csv", take_mode, &s, &r, err);

    if (st == TH_OK)
        st = cli_figure_open(figure, 900, 760, err);
    if (st != TH_OK)
        goto done;
    if (s.count > 0)
        qsort(s.spot, (size_t)s.count, sizeof *s.spot, by_branch);
    for (long i = 0; i < s.count; i++) {
        const bool next = i == 0 || s.spot[i].branch != s.spot[i - 1].branch;

        if (next && open)
            fputs("EOD\n", figure->out);
        open = open && !next;
        if (!s.spot[i].grows) { /* a branch that does not grow here: its line breaks */
            fputs(open ? "\n" : "", figure->out);
            continue;
        }
        if (!open)
            fprintf(figure->out, "$b%d << EOD\n", ++branches);
        open = true;
        fprintf(figure->out, "%.12g %.9g %.9g\n", s.spot[i].x * table,
                s.spot[i].frequency * v.frequency / rate, s.spot[i].growth);
    }
    if (open)
        fputs("EOD\n", figure->out);
    for (int i = 0; i < x.axis->count; i++) {
        from = fmin(from, x.axis->value[i] * x.factor);
        to = fmax(to, x.axis->value[i] * x.factor);
    }
    w.out = figure->out;
    st = find_onsets(c, 1, threads, &w, err);
    if (st == TH_OK) {
        if (w.count > 0)
            explain_lines(figure->out);
        two_panels(&v, x.label, from, to, branches, figure->out);
        st = cli_figure_close(figure, err);
    }
done:
    free(s.spot);
    return st;
}

th_status cli_draw_track(const th_case *c, const th_track *track, const th_onset *onset, int onsets,
                         cli_figure *figure, th_error *err)
{
    const cli_view v = cli_view_of(c);
    const shown_axis x = shown(c, &c->setup.shape->key[th_shape_length(c->setup.shape)]);
    const int branches = th_track_branches(track);
    const th_track_point *point;
    int points;
    th_status st = cli_figure_open(figure, 900, 760, err);

    if (st != TH_OK)
        return st;
    point = th_track_points(track, &points);
    for (int b = 0; b < branches; b++) {
        fprintf(figure->out, "$b%d << EOD\n", b + 1);
        for (int i = 0; i < points; i++)
            for (int k = 0; k < point[i].count; k++)
                if (point[i].mode[k].branch == b)
                    fprintf(figure->out, "%.12g %.9g %.9g\n", point[i].length * x.factor,
                            point[i].mode[k].omega_re * v.frequency,
                            point[i].mode[k].omega_im * v.rate);
        fputs("EOD\n", figure->out);
    }
    for (int i = 0; i < onsets && i < ORDERS; i++)
        put_onset(&onset[i], x.factor, figure->out);
    if (onsets > 0)
        explain_lines(figure->out);
    two_panels(&v, x.label, point[0].length * x.factor, point[points - 1].length * x.factor,
               branches, figure->out);
    return cli_figure_close(figure, err);
}

/* ---- two axes ------------------------------------------------------------------------------- */

/* Middle between a value and its neighbour; beyond the ends as far out as in. */
static double border(const th_axis *axis, int i, int side)
{
    const double here = axis->value[i];

    if (axis->count == 1)
        return here * (1.0 + 0.5 * side);
    if (i + side < 0 || i + side >= axis->count)
        return here + (here - axis->value[i - side]) / 2.0;
    return (here + axis->value[i + side]) / 2.0;
}

/* The cells of one kind: x, y, borders, growth, text under the pointer. */
static long put_cells(const reader *r, const shown_axis *x, const shown_axis *y, char kind,
                      FILE *out)
{
    long count = 0;

    fprintf(out, "$%s << EOD\n", kind == 'g' ? "growing" : kind == 's' ? "quiet" : "unanswered");
    for (long n = 0; n < r->points; n++) {
        const int i = (int)(n % x->axis->count), j = (int)(n / x->axis->count);
        const char is = r->state[n] != 'o' ? 'f' : r->unstable[n] > 0 ? 'g' : 's';

        if (is != kind)
            continue;
        count++;
        fprintf(out, "%.9g %.9g %.9g %.9g %.9g %.9g %.9g\n", x->axis->value[i] * x->factor,
                y->axis->value[j] * y->factor, border(x->axis, i, -1) * x->factor,
                border(x->axis, i, 1) * x->factor, border(y->axis, j, -1) * y->factor,
                border(y->axis, j, 1) * y->factor, r->growth[n]);
    }
    fputs("EOD\n", out);
    return count;
}

/* One block for each order, by the other axis. */
static void put_curves(const curves *w, bool along_x, FILE *out)
{
    for (int order = 0; order < w->orders; order++) {
        fprintf(out, "$order%d << EOD\n", order);
        for (long i = 0; i < w->count; i++)
            if ((int)w->row[3 * i + 1] == order)
                fprintf(out, "%.9g %.9g\n", w->row[3 * i + (along_x ? 2 : 0)],
                        w->row[3 * i + (along_x ? 0 : 2)]);
        fputs("EOD\n", out);
    }
}

static void range_of(const shown_axis *s, const char *name, FILE *out)
{
    double from = HUGE_VAL, to = -HUGE_VAL;

    for (int i = 0; i < s->axis->count; i++)
        for (int side = -1; side <= 1; side += 2) {
            from = fmin(from, border(s->axis, i, side) * s->factor);
            to = fmax(to, border(s->axis, i, side) * s->factor);
        }
    fprintf(out, "set %srange [%.9g:%.9g]\n", name, from, to);
}

static void plot_map(const cli_view *v, const shown_axis *x, const shown_axis *y, long growing,
                     long quiet, long unanswered, int orders, FILE *out)
{
    range_of(x, "x", out);
    range_of(y, "y", out);
    fprintf(out,
            "set xlabel '%s'\nset ylabel '%s'\nset cblabel 'largest growth rate%s'\n"
            "set palette defined (0 '#d3e6f3', 0.35 '#7db4d8', 0.7 '#2f75ac', 1 '#0b2c52')\n"
            "set cbrange [0:*]\nset bmargin 6\nset key at screen 0.45, screen 0.015 center bottom "
            "horizontal maxrows 1 samplen 2\nset style fill solid 1.0 noborder\n"
            "set grid front\nunset grid\nset rmargin 14\nplot ",
            x->label, y->label, v->si ? " (1/s)" : " (reduced)");
    if (growing > 0)
        fputs("$growing using 1:2:3:4:5:6:7 with boxxyerror lc palette notitle, ", out);
    if (quiet > 0)
        fputs("$quiet using 1:2:3:4:5:6 with boxxyerror lc rgb '#eeeeee' title 'stable', ", out);
    if (unanswered > 0)
        fputs("$unanswered using 1:2:3:4:5:6 with boxxyerror lc rgb '#555555' title 'no answer', ",
              out);
    for (int order = 0; order < orders; order++)
        fprintf(out, "$order%d using 1:2 with lines lw 2 dt %s lc rgb '#d55e00' %s, ", order,
                order % 2 == 0 ? "1" : "'-'",
                order == 0   ? "title 'a mode switches on'"
                : order == 1 ? "title 'turns into a pair'"
                             : "notitle");
    fputs("NaN notitle\n", out);
}

static th_status draw_map(const th_case *c, const char *folder, int threads, cli_figure *figure,
                          th_error *err)
{
    const cli_view v = cli_view_of(c);
    const shown_axis x = axis_of(c, c->axes - 1), y = axis_of(c, c->axes - 2);
    const bool along_x = c->axis[c->axes - 1].key == th_shape_length(c->setup.shape);
    reader r = {.c = c, .axes = c->axes, .points = (long)x.axis->count * y.axis->count};
    curves w = {.length = along_x ? x.factor : y.factor, .other = along_x ? y.factor : x.factor};
    th_status st;

    r.growth = calloc((size_t)r.points, sizeof *r.growth);
    r.state = calloc((size_t)r.points, sizeof *r.state);
    r.unstable = calloc((size_t)r.points, sizeof *r.unstable);
    st = r.growth != NULL && r.state != NULL && r.unstable != NULL
             ? read_table(folder, "points.csv", take_point, &r, &r, err)
             : th_fail(err, TH_ENOMEM, "figure: %ld points", r.points);
    if (st == TH_OK)
        st = cli_figure_open(figure, 900, 700, err);
    if (st == TH_OK)
        st = find_onsets(c, 2, threads, &w, err);
    if (st == TH_OK) {
        FILE *out = figure->out;
        const long growing = put_cells(&r, &x, &y, 'g', out);
        const long quiet = put_cells(&r, &x, &y, 's', out);
        const long unanswered = put_cells(&r, &x, &y, 'f', out);

        put_curves(&w, along_x, out);
        plot_map(&v, &x, &y, growing, quiet, unanswered, w.orders, out);
        st = cli_figure_close(figure, err);
    }
    free(r.growth);
    free(r.state);
    free(r.unstable);
    free(w.row);
    return st;
}

th_status cli_draw_sweep(const th_case *c, const char *folder, int threads, cli_figure *figure,
                         th_error *err)
{
    return c->axes == 1 ? draw_line(c, folder, threads, figure, err)
                        : draw_map(c, folder, threads, figure, err);
}
