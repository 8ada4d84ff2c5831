/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The flow as a figure: speeds with their horizons, density, potential. */
#include <math.h>

#include "figure.h"

/* Points of each piece: curves are smooth to the eye at any size of paper. */
enum { POINTS = 150 };

static void data(const th_case *c, const th_flow *flow, double from, double to, FILE *out)
{
    const cli_view v = cli_view_of(c);
    const bool open = th_flow_ends(flow).kind == TH_ENDS_OPEN;
    const double energy = v.rate / 1e3; /* hbar per time: 1000/s */
    int edges;
    const double *edge = th_flow_edges(flow, &edges);

    fputs("$flow << EOD\n", out);
    for (int piece = open ? -1 : 0; piece < edges - (open ? 0 : 1); piece++) {
        const double a = fmax(from, piece < 0 ? from : edge[piece]);
        const double b = fmin(to, piece == edges - 1 ? to : edge[piece + 1]);

        if (!(a < b))
            continue;

        for (int i = 0; i <= POINTS; i++) {
            const double x = a + (b - a) * i / POINTS;
            th_flow_point p;

            th_flow_eval(flow, piece, x, &p);
            fprintf(out, "%.9g %.9g %.9g %.9g %.9g\n", x * v.length, p.v * v.speed, p.c * v.speed,
                    p.n * v.density, th_flow_potential(flow, &p) * (v.si ? energy : 1.0));
        }
    }
    fputs("EOD\n", out);
}

void cli_picture_window(const th_flow *flow, double *from, double *to)
{
    int pockets;
    const th_pocket *pocket = th_flow_pockets(flow, &pockets);
    double left, right, extent;

    cli_window(flow, from, to);
    if (pockets == 0)
        return;
    left = pocket[0].left;
    right = pocket[pockets - 1].right;
    extent = right - left;
    *from = fmax(*from, left - extent);
    *to = fmin(*to, right + extent);
}

void cli_draw_pockets(const th_flow *flow, double length, FILE *out)
{
    int pockets, horizons;
    const th_pocket *pocket = th_flow_pockets(flow, &pockets);
    const th_horizon *horizon = th_flow_horizons(flow, &horizons);

    fputs("unset object\nunset arrow\n", out);
    for (int i = 0; i < pockets; i++)
        fprintf(out,
                "set object %d rectangle from first %.9g, graph 0 to first %.9g, graph 1 behind fc "
                "rgb '#f3ead2' fs solid noborder\n",
                i + 1, pocket[i].left * length, pocket[i].right * length);
    /* colours differ by one: gnuplot 5.4 gives neighbours of one colour in an SVG one dash */
    for (int i = 0; i < horizons; i++)
        fprintf(out,
                "set arrow %d from first %.9g, graph 0 to first %.9g, graph 1 nohead lw 1.3 lc rgb "
                "%s\n",
                i + 1, horizon[i].x * length, horizon[i].x * length,
                horizon[i].kind == TH_HORIZON_BLACK ? "'#333333' dt 1" : "'#343434' dt '.'");
}

static void labels(const th_case *c, const th_flow *flow, FILE *out)
{
    const cli_view v = cli_view_of(c);
    int horizons;
    const th_horizon *horizon = th_flow_horizons(flow, &horizons);

    for (int i = 0; i < horizons; i++)
        fprintf(out, "set label %d '%s' at first %.9g, graph 1.06 %s\n", i + 1,
                horizon[i].kind == TH_HORIZON_BLACK ? "black-hole horizon" : "white-hole horizon",
                horizon[i].x * v.length,
                horizon[i].kind == TH_HORIZON_BLACK ? "right offset character 2,0"
                                                    : "left offset character -2,0");
}

th_status cli_draw_flow(const th_case *c, const th_flow *flow, cli_figure *figure, th_error *err)
{
    const cli_view v = cli_view_of(c);
    double from, to;
    FILE *out;
    th_status st = cli_figure_open(figure, 900, 900, err);

    if (st != TH_OK)
        return st;
    out = figure->out;
    cli_picture_window(flow, &from, &to);
    data(c, flow, from, to, out);
    fprintf(out, "set xrange [%.9g:%.9g]\n", from * v.length, to * v.length);
    cli_draw_pockets(flow, v.length, out);
    fputs("set multiplot layout 3,1 margins 0.13,0.97,0.075,0.955 spacing 0,0.085\n"
          "set key at graph 0.99, graph 0.97 right top horizontal\n",
          out);
    labels(c, flow, out);
    fprintf(out, "set ylabel 'speed%s'\nset yrange [0:*]\nset offsets 0,0,graph 0.25,0\n",
            v.si ? " (mm/s)" : " (reduced)");
    fputs("plot $flow using 1:2 with lines lt 1 title 'flow speed v', $flow using 1:3 with lines "
          "lt 2 title 'sound speed c'\nunset label\nunset key\n",
          out);
    fprintf(out, "set ylabel 'density%s'\n", v.si && c->density_given ? " (1/µm)" : " / upstream");
    fputs("plot $flow using 1:4 with lines lt 3\nset yrange [*:*]\nset offsets 0,0,graph 0.1,graph "
          "0.1\n",
          out);
    fprintf(out, "set ylabel 'potential%s'\nset xlabel 'x%s'\n",
            v.si ? " / ħ (1000/s)" : " (reduced)", v.si ? " (µm)" : " (reduced)");
    fputs("plot $flow using 1:5 with lines lt 4\nunset multiplot\n", out);
    return cli_figure_close(figure, err);
}
