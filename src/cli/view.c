/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The text view: units, digits, and the lines that describe a flow. */
#include <gsl/gsl_math.h>
#include <string.h>

#include "cli.h"

cli_view cli_view_of(const th_case *c)
{
    const bool si = c->scale.system == TH_SYSTEM_SI;
    const bool density = si && c->density_given;
    const double rate = th_scale_factor(&c->scale, TH_DIM_RATE);
    cli_view v = {
        .si = si,
        .frequency = si ? rate / (2.0 * M_PI) : 1.0,
        .rate = rate,
        .time = th_scale_factor(&c->scale, TH_DIM_TIME) * (si ? 1e3 : 1.0),
        .length = th_scale_factor(&c->scale, TH_DIM_LENGTH) * (si ? 1e6 : 1.0),
        .speed = th_scale_factor(&c->scale, TH_DIM_SPEED) * (si ? 1e3 : 1.0),
        .temperature = th_scale_factor(&c->scale, TH_DIM_TEMPERATURE) * (si ? 1e9 : 1.0),
        .density = density ? th_scale_factor(&c->scale, TH_DIM_LINE_DENSITY) * 1e-6 : 1.0,
        .hertz = si ? " Hz" : "",
        .per_second = si ? " /s" : "",
        .milliseconds = si ? " ms" : "",
        .micrometres = si ? " um" : "",
        .speeds = si ? " mm/s" : "",
        .kelvin = si ? " nK" : "",
        .densities = density ? " /um" : "",
    };

    return v;
}

const char *cli_number(double value, double error, char buffer[CLI_NUMBER])
{
    const int most = 10; /* significant digits: more cannot be read at a glance */
    int digits = most;

    if (value == 0.0)
        return strcpy(buffer, "0");
    if (error > 0.0) /* down to the digit that the error bar starts in */
        digits = (int)fmin(most, fmax(1.0, 1.0 + floor(log10(fabs(value))) - floor(log10(error))));
    if (fabs(value) >= 1e-4 && fabs(value) < 1e6) {
        const int decimals = digits - 1 - (int)floor(log10(fabs(value)));

        (void)snprintf(buffer, CLI_NUMBER, "%.*f", decimals > 0 ? decimals : 0, value);
    } else {
        (void)snprintf(buffer, CLI_NUMBER, "%.*e", digits - 1, value);
    }
    return buffer;
}

const char *cli_unit(const th_case *c, th_dimension dimension)
{
    return c->scale.system == TH_SYSTEM_SI ? th_dimension_unit(dimension) : NULL;
}

const char *cli_ends_text(th_ends_kind kind)
{
    switch (kind) {
    case TH_ENDS_OPEN:
        return "open ends";
    case TH_ENDS_RING:
        return "ring";
    case TH_ENDS_WALLS:
        return "walls";
    }
    return "";
}

static void print_state(FILE *out, const cli_view *v, const char *name, const th_flow_point *at)
{
    fprintf(
        out,
        "            %-11s density %.6g%s, speed %.6g%s, sound %.6g%s, Mach %.4g, healing length "
        "%.4g%s\n",
        name, at->n * v->density, v->densities, at->v * v->speed, v->speeds, at->c * v->speed,
        v->speeds, at->v / at->c, v->length / at->c, v->micrometres);
}

static void print_horizons(FILE *out, const cli_view *v, const th_flow *flow)
{
    const th_horizon *h;
    int count;

    h = th_flow_horizons(flow, &count);
    if (count == 0)
        fputs("Horizons    none\n", out);
    for (int i = 0; i < count; i++) {
        fprintf(out, "%s%s horizon at x = %.6g%s", i == 0 ? "Horizons    " : "            ",
                h[i].kind == TH_HORIZON_BLACK ? "black-hole" : "white-hole", h[i].x * v->length,
                v->micrometres);
        if (h[i].sharp)
            fputs(", a jump: no surface gravity\n", out);
        else
            fprintf(out, ", surface gravity %.6g%s, Hawking temperature %.6g%s\n",
                    h[i].kappa * v->rate, v->per_second, h[i].temperature * v->temperature,
                    v->kelvin);
    }
}

static void print_pockets(FILE *out, const cli_view *v, const th_flow *flow)
{
    const th_pocket *p;
    int count;

    p = th_flow_pockets(flow, &count);
    if (count == 0)
        fputs("Pocket      none: no supersonic stretch between two horizons\n", out);
    for (int i = 0; i < count; i++)
        fprintf(out,
                "%s%.6g%s long, Mach up to %.4g, negative-energy band up to %.6g%s, static "
                "undulation of wavelength %.4g%s\n",
                i == 0 ? "Pocket      " : "            ", (p[i].right - p[i].left) * v->length,
                v->micrometres, p[i].mach, p[i].omega_max * v->frequency, v->hertz,
                2.0 * M_PI / p[i].undulation * v->length, v->micrometres);
}

/* How the flow was found, a part a line. */
static void print_note(FILE *out, const char *note)
{
    const char *end;

    for (const char *label = "Found       "; *note != '\0'; label = "            ") {
        end = strstr(note, "; ");
        if (end == NULL)
            end = note + strlen(note);
        fprintf(out, "%s%.*s\n", label, (int)(end - note), note);
        note = *end == ';' ? end + 2 : end;
    }
}

static void print_edges(FILE *out, const cli_view *v, const double *edge, int edges)
{
    enum { MANY = 8 };

    if (edges > MANY)
        fprintf(out, "%d pieces between x = %.6g and %.6g%s\n", edges - 1, edge[0] * v->length,
                edge[edges - 1] * v->length, v->micrometres);
    else {
        fputs("pieces between x =", out);
        for (int i = 0; i < edges; i++)
            fprintf(out, " %.6g", edge[i] * v->length);
        fprintf(out, "%s\n", v->micrometres);
    }
}

/* The transverse frequency that the equation of state implies: c^2 = omega_perp 2 a n/r with
 * r = sqrt(1 + 4 a n). */
static void print_transverse(FILE *out, const cli_view *v, const th_flow *flow)
{
    const double a = th_flow_scattering(flow);
    th_flow_point at;
    int edges;
    double an;

    if (!(a > 0.0))
        return;
    th_flow_eval(flow, 0, th_flow_edges(flow, &edges)[0], &at);
    an = a * at.n;
    fprintf(out,
            "            transverse equation of state: a n = %.4g upstream, transverse frequency "
            "%.6g%s\n",
            an, at.c * at.c * sqrt(1.0 + 4.0 * an) / (2.0 * an) * v->frequency, v->hertz);
}

void cli_print_flow(FILE *out, const th_case *c, const th_flow *flow, bool details)
{
    const cli_view v = cli_view_of(c);
    const th_ends ends = th_flow_ends(flow);
    const double *edge;
    th_flow_point at;
    int edges;

    edge = th_flow_edges(flow, &edges);
    fprintf(out, "Flow        %s, %s%s\n", c->setup.shape->name, cli_ends_text(ends.kind),
            v.si ? "" : "; reduced units, hbar = m = 1");
    if (ends.kind == TH_ENDS_RING)
        fprintf(out, "            circumference %.6g%s, winding %d\n",
                ends.circumference * v.length, v.micrometres, ends.winding);
    th_flow_eval(flow, 0, edge[0], &at);
    if (ends.kind == TH_ENDS_OPEN)
        th_flow_eval(flow, -1, edge[0], &at);
    print_state(out, &v, "upstream", &at);
    if (details) {
        const th_pocket *p;
        int pockets;

        p = th_flow_pockets(flow, &pockets);
        for (int i = 0; i < pockets; i++) {
            th_flow_at(flow, 0.5 * (p[i].left + p[i].right), &at);
            print_state(out, &v, "mid-pocket", &at);
        }
        th_flow_eval(flow, edges - 2, edge[edges - 1], &at);
        if (ends.kind == TH_ENDS_OPEN)
            th_flow_eval(flow, edges - 1, edge[edges - 1], &at);
        print_state(out, &v, "downstream", &at);
        print_transverse(out, &v, flow);
        fprintf(out, "            flux n v = %.6g%s, ", th_flow_flux(flow) * v.speed * v.density,
                v.si ? (c->density_given ? " /ms" : " mm/s (density relative to upstream)") : "");
        print_edges(out, &v, edge, edges);
    }
    print_note(out, th_flow_note(flow));
    print_horizons(out, &v, flow);
    print_pockets(out, &v, flow);
}
