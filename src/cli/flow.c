/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * twinhorizon flow CASE: the stationary flow, as text or as a table. */
#include <stdlib.h>
#include <string.h>

#include "figure.h"

/* A row of the table: a place and the piece from whose side it is seen. */
typedef struct {
    double x;
    int piece;
} place;

static int by_place(const void *a, const void *b)
{
    const place *p = a, *q = b;

    if (p->x != q->x)
        return p->x < q->x ? -1 : 1;
    return (p->piece > q->piece) - (p->piece < q->piece);
}

/* An even grid over each piece and denser points around features; both sides of every edge. */
enum { EVEN = 400, AROUND = 40 };

static void put_row(th_table *table, const th_case *c, const th_flow *flow, const place *at)
{
    const double density = c->density_given ? th_scale_factor(&c->scale, TH_DIM_LINE_DENSITY) : 1.0;
    const double speed = th_scale_factor(&c->scale, TH_DIM_SPEED);
    th_flow_point p;

    th_flow_eval(flow, at->piece, at->x, &p);
    th_table_put_number(table, at->x * th_scale_factor(&c->scale, TH_DIM_LENGTH));
    th_table_put_number(table, p.n * density);
    th_table_put_number(table, p.v * speed);
    th_table_put_number(table, p.c * speed);
    th_table_put_number(table,
                        th_flow_potential(flow, &p) * th_scale_factor(&c->scale, TH_DIM_ENERGY));
}

void cli_window(const th_flow *flow, double *from, double *to)
{
    int edges;
    const double *edge = th_flow_edges(flow, &edges);
    const bool open = th_flow_ends(flow).kind == TH_ENDS_OPEN;
    const double margin = open ? 0.25 * (edge[edges - 1] - edge[0]) : 0.0;

    *from = edge[0] - margin;
    *to = edge[edges - 1] + margin;
}

/* Places in ascending order; [count] to be freed by the caller. */
static place *choose_places(const th_flow *flow, int *count)
{
    const th_feature *feature;
    const double *edge;
    const bool open = th_flow_ends(flow).kind == TH_ENDS_OPEN;
    int edges, features, used = 0;
    double first, last;
    place *list;

    edge = th_flow_edges(flow, &edges);
    feature = th_flow_features(flow, &features);
    cli_window(flow, &first, &last);
    list = malloc(((size_t)(edges + 1) * (EVEN + 1) + (size_t)(edges + features) * (AROUND + 1)) *
                  sizeof *list);
    if (list == NULL)
        return NULL;
    for (int piece = open ? -1 : 0; piece < edges - (open ? 0 : 1); piece++) {
        const double from = piece < 0 ? first : edge[piece];
        const double to = piece == edges - 1 ? last : edge[piece + 1];
        const bool outside = piece < 0 || piece == edges - 1;
        const int parts = outside || th_flow_piece_uniform(flow, piece) ? AROUND : EVEN;

        for (int i = 0; i <= parts; i++)
            list[used++] = (place){i == parts ? to : from + (to - from) * i / parts, piece};
        for (int f = 0; !outside && f < features; f++)
            for (int i = 0; i <= AROUND; i++) {
                const double x = feature[f].x + feature[f].width * 6.0 * (2.0 * i / AROUND - 1.0);

                if (x > from && x < to)
                    list[used++] = (place){x, piece};
            }
    }
    qsort(list, (size_t)used, sizeof *list, by_place);
    *count = used;
    return list;
}

static th_status write_table(const th_case *c, const th_flow *flow, const char *path, th_error *err)
{
    const bool relative = c->scale.system == TH_SYSTEM_SI && !c->density_given;
    const th_column column[] = {
        {.name = "x",
         .title = "position along the flow",
         .datatype = "number",
         .unit = cli_unit(c, TH_DIM_LENGTH)},
        {.name = "density",
         .title = relative ? "line density over upstream density" : "line density",
         .datatype = "number",
         .unit = cli_unit(c, relative ? TH_DIM_NUMBER : TH_DIM_LINE_DENSITY)},
        {.name = "speed",
         .title = "flow speed",
         .datatype = "number",
         .unit = cli_unit(c, TH_DIM_SPEED)},
        {.name = "sound",
         .title = "local sound speed",
         .datatype = "number",
         .unit = cli_unit(c, TH_DIM_SPEED)},
        {.name = "potential",
         .title = "external potential that makes the flow stationary",
         .datatype = "number",
         .unit = cli_unit(c, TH_DIM_ENERGY),
         .description = "zero far upstream; a jump of the flow is two rows "
                        "with the same x"},
    };
    enum { columns = sizeof column / sizeof column[0] };
    th_table *table = NULL;
    int count = 0;
    place *list = choose_places(flow, &count);
    th_status st = list != NULL
                       ? cli_table(path, column, columns, "stationary flow", c, &table, err)
                       : th_fail(err, TH_ENOMEM, "flow: a table of places");

    for (int i = 0; st == TH_OK && i < count; i++) {
        if (i > 0 && list[i].x == list[i - 1].x && list[i].piece == list[i - 1].piece)
            continue;
        put_row(table, c, flow, &list[i]);
        st = th_table_end_row(table, err);
    }
    if (st == TH_OK)
        st = th_table_finish(table, err);
    th_table_destroy(table);
    free(list);
    return st;
}

int cli_flow(int argc, char **argv)
{
    const char *csv = NULL, *picture = NULL, *script = NULL;
    const cli_option option[] = {
        {"--csv", "FILE", "table x,density,speed,sound,potential; - for standard output", &csv,
         CLI_TABLE},
        CLI_FIGURE_OPTIONS(picture, script, CLI_FILE),
    };
    cli_figure figure = {0};
    cli_arguments arguments;
    th_case *c = NULL;
    th_flow *flow = NULL;
    th_error err = {0};
    th_status st;
    int code = cli_read("flow", "Show the stationary flow: ends, horizons, pockets.", argc, argv,
                        option, sizeof option / sizeof option[0], &arguments);

    if (code != CLI_DONE)
        return code < 0 ? CLI_DONE : code;
    st = cli_figure_check("flow", "--figure", picture, &err);
    if (st == TH_OK)
        st = cli_script_check("flow", script, picture != NULL, &err);
    if (st == TH_OK)
        st = cli_read_case(&arguments, &c, &err);
    if (st == TH_OK)
        st = th_flow_build(&c->setup, &flow, &err);
    if (st == TH_OK && picture != NULL)
        st = cli_draw_flow(c, flow, &figure, &err);
    if (st == TH_OK && picture != NULL)
        st = cli_figure_save(&figure, picture, script, &err);
    if (st == TH_OK && csv != NULL)
        st = write_table(c, flow, csv, &err);
    if (st != TH_OK)
        code = cli_failed(&err);
    else if (csv == NULL || strcmp(csv, "-") != 0)
        cli_print_flow(stdout, c, flow, true);
    cli_figure_clear(&figure);
    th_flow_destroy(flow);
    th_case_destroy(c);
    return code;
}
