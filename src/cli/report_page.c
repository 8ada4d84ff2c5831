/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The page of a report: HTML without scripts and without anything from elsewhere; figures are SVG
 * elements. Numbers that a table rounds stand in full, in SI units, in the cell's title. */
#include "report.h"

#include <gsl/gsl_math.h>
#include <stdlib.h>
#include <string.h>
#include <twinhorizon/version.h>

/* Rows of the table of lengths: a page of paper. */
enum { LENGTHS = 25 };

static const char *const style =
    "body{font:16px/1.5 system-ui,sans-serif;color:#1c2730;background:#fff;margin:0 auto;"
    "max-width:60rem;padding:1rem}"
    "h1{font-size:1.5rem;margin:.2rem 0}h2{font-size:1.15rem;margin:2.2rem 0 .5rem;"
    "border-bottom:2px solid #0060a8;padding-bottom:.15rem}"
    ".sub{color:#5a6772;margin:0 0 1rem}"
    "dl{display:grid;grid-template-columns:7rem 1fr;gap:.35rem 1rem;margin:0}"
    "dt{font-weight:600;color:#0060a8}dd{margin:0}"
    "figure{margin:1rem 0}figure svg{width:100%;height:auto;display:block}"
    "figcaption{color:#5a6772;font-size:.9rem}"
    ".wide{overflow-x:auto}table{border-collapse:collapse;font-size:.9rem;white-space:nowrap}"
    "th,td{padding:.25rem .7rem;text-align:right;border-bottom:1px solid #dde3e8}"
    "th{color:#5a6772;font-weight:600}td.w{text-align:left}td.long{white-space:normal}"
    "tr.bad td{background:#fbeee6}"
    "pre{font:12.5px/1.45 ui-monospace,monospace;background:#f5f7f9;padding:.8rem;overflow-x:auto;"
    "margin:.5rem 0}"
    "@media (max-width:40rem){dl{grid-template-columns:1fr}dt{margin-top:.5rem}}"
    "@media print{body{max-width:none;font-size:11px}pre{font-size:7.5px;white-space:pre}"
    "figure,table{break-inside:avoid}h2{break-after:avoid}.wide,pre{overflow:visible}}";

static void put(FILE *out, const char *text)
{
    for (; *text != '\0'; text++)
        switch (*text) {
        case '<':
            fputs("&lt;", out);
            break;
        case '>':
            fputs("&gt;", out);
            break;
        case '&':
            fputs("&amp;", out);
            break;
        case '"':
            fputs("&quot;", out);
            break;
        default:
            fputc((unsigned char)*text < 0x20 && *text != '\n' && *text != '\t' ? ' ' : *text, out);
        }
}

/* A cell: as shown, and in full with its unit. */
static void cell(FILE *out, const char *shown, double value, const char *unit)
{
    char full[64];

    th_number_write_exact(value, full, sizeof full);
    fprintf(out, "<td title=\"%s%s%s\">", full, unit != NULL ? " " : "", unit != NULL ? unit : "");
    put(out, shown);
    fputs("</td>", out);
}

static void rounded(FILE *out, double shown, double value, const char *unit)
{
    char text[64];

    (void)snprintf(text, sizeof text, "%.5g", shown);
    cell(out, text, value, unit);
}

static void words(FILE *out, const char *text)
{
    fputs("<td class=\"w\">", out);
    put(out, text);
    fputs("</td>", out);
}

static void heads(FILE *out, const char *const *head, int count)
{
    fputs("<div class=\"wide\"><table><tr>", out);
    for (int i = 0; i < count; i++) {
        fputs("<th>", out);
        put(out, head[i]);
        fputs("</th>", out);
    }
    fputs("</tr>\n", out);
}

static void figure(FILE *out, const char *svg, const char *caption)
{
    if (svg == NULL)
        return;
    fprintf(out, "<figure>%s<figcaption>", svg);
    put(out, caption);
    fputs("</figcaption></figure>\n", out);
}

/* Text made by a printer of the text view; freed by the caller, NULL when memory is short. */
static char *text_of(void (*print)(FILE *, const cli_findings *), const cli_findings *p)
{
    char *text = NULL;
    size_t length = 0;
    FILE *out = open_memstream(&text, &length);

    if (out == NULL)
        return NULL;
    print(out, p);
    if (fclose(out) != 0) {
        free(text);
        return NULL;
    }
    return text;
}

/* The answer's lines, "Label       sentence", as a list; lines without a label go on. */
static void put_answer(FILE *out, const cli_findings *p)
{
    enum { LABEL = 12 };
    char *text = text_of(cli_plan_print_answer, p), *line = text, *end;

    fputs("<dl>\n", out);
    for (; line != NULL && *line != '\0'; line = end + 1) {
        end = strchr(line, '\n');
        if (end == NULL)
            break;
        *end = '\0';
        if (strlen(line) <= LABEL)
            continue;
        if (*line != ' ') {
            const char keep = line[LABEL];

            line[LABEL] = '\0';
            fputs("<dt>", out);
            put(out, line);
            fputs("</dt>", out);
            line[LABEL] = keep;
        } else {
            fputs("<dt></dt>", out);
        }
        fputs("<dd>", out);
        put(out, line + LABEL);
        fputs("</dd>\n", out);
    }
    fputs("</dl>\n", out);
    free(text);
}

static void put_flow(FILE *out, const cli_report_parts *r, const cli_view *v)
{
    static const char *const kind[] = {"black-hole", "white-hole"};
    const char *const head[] = {"horizon", v->si ? "x (µm)" : "x",
                                v->si ? "surface gravity (1/s)" : "surface gravity",
                                v->si ? "Hawking temperature (nK)" : "Hawking temperature"};
    const th_scale *scale = &r->c->scale;
    int count;
    const th_horizon *horizon = th_flow_horizons(r->plan->flow, &count);

    heads(out, head, 4);
    for (int i = 0; i < count; i++) {
        fputs("<tr>", out);
        words(out, kind[horizon[i].kind == TH_HORIZON_WHITE]);
        rounded(out, horizon[i].x * v->length, horizon[i].x * th_scale_factor(scale, TH_DIM_LENGTH),
                cli_unit(r->c, TH_DIM_LENGTH));
        if (horizon[i].sharp) {
            words(out, "a jump: none");
            words(out, "none");
        } else {
            rounded(out, horizon[i].kappa * v->rate, horizon[i].kappa * v->rate,
                    cli_unit(r->c, TH_DIM_RATE));
            rounded(out, horizon[i].temperature * v->temperature,
                    horizon[i].temperature * th_scale_factor(scale, TH_DIM_TEMPERATURE),
                    cli_unit(r->c, TH_DIM_TEMPERATURE));
        }
        fputs("</tr>\n", out);
    }
    fputs("</table></div>\n", out);
}

static void put_modes(FILE *out, const cli_report_parts *r, const cli_view *v)
{
    const char *const head[] = {"mode",
                                "label",
                                v->si ? "frequency (Hz)" : "frequency",
                                v->si ? "growth rate (1/s)" : "growth rate",
                                v->si ? "± (1/s)" : "±",
                                "norm",
                                "in the pocket",
                                "nodes",
                                "confirmed by"};
    const th_solution *s = r->plan->solution;
    const char *unit = cli_unit(r->c, TH_DIM_RATE);

    fputs("<p>", out);
    if (s->verdict == TH_VERDICT_UNDECIDED) {
        fputs("<strong>Undecided:</strong> ", out);
        put(out, s->reason);
        fputs(".", out);
    } else {
        fprintf(out, "%d growing modes (both signs of the frequency counted)", s->unstable);
        if (s->census_known)
            fprintf(out, ", %d by the argument principle", s->census);
        if (s->index_known)
            fprintf(out, ", %d by the static index", s->index);
        fputs(".", out);
    }
    fputs(" Each row stands for its mirror image −ω* too.</p>\n", out);
    heads(out, head, 9);
    for (int i = 0; i < s->count; i++) {
        const th_mode *m = &s->mode[i];
        char shown[CLI_NUMBER], confirmed[TH_CONFIRMED_SIZE];

        th_confirmed_text(m->confirmed, confirmed);
        fprintf(out, "<tr><td>%d</td>", i + 1);
        words(out, th_label_text(m->label));
        cell(out, cli_number(m->omega_re * v->frequency, m->omega_error * v->frequency, shown),
             m->omega_re * v->rate, unit);
        cell(out, cli_number(m->omega_im * v->rate, m->omega_error * v->rate, shown),
             m->omega_im * v->rate, unit);
        (void)snprintf(shown, sizeof shown, "%.1e", m->omega_error * v->rate);
        cell(out, shown, m->omega_error * v->rate, unit);
        fprintf(out, "<td>%s</td><td>%.0f %%</td><td>%d</td>",
                m->norm < 0   ? "−"
                : m->norm > 0 ? "+"
                              : "0",
                100.0 * m->pocket_share, m->nodes);
        words(out, confirmed);
        fputs("</tr>\n", out);
    }
    fputs("</table></div>\n", out);
}

/* Lengths of the line, about evenly: the points next to an even grid. */
static void put_lengths(FILE *out, const cli_report_parts *r, const cli_view *v)
{
    const th_shape_key *key = &r->c->setup.shape->key[th_shape_length(r->c->setup.shape)];
    const bool length = key->dimension == TH_DIM_LENGTH;
    const double factor = th_scale_factor(&r->c->scale, key->dimension);
    char name[64];
    const char *const head[] = {name, "growing modes", v->si ? "growth rate (1/s)" : "growth rate",
                                v->si ? "frequency (Hz)" : "frequency", "status"};
    const th_track_point *point;
    int points, at = 0;

    point = th_track_points(r->plan->line, &points);
    (void)snprintf(name, sizeof name, "%s%s", key->key, v->si && length ? " (µm)" : "");
    heads(out, head, 5);
    for (int i = 0; i < LENGTHS; i++) {
        const double wanted =
            point[0].length + (point[points - 1].length - point[0].length) * i / (LENGTHS - 1);
        const th_track_point *p;

        while (at + 1 < points &&
               fabs(point[at + 1].length - wanted) <= fabs(point[at].length - wanted))
            at++;
        p = &point[at];
        fputs("<tr>", out);
        rounded(out, p->length * (length ? v->length : 1.0), p->length * factor,
                cli_unit(r->c, key->dimension));
        fprintf(out, "<td>%d</td>", p->unstable);
        rounded(out, p->count > 0 ? p->mode[0].omega_im * v->rate : 0.0,
                p->count > 0 ? p->mode[0].omega_im * v->rate : 0.0, cli_unit(r->c, TH_DIM_RATE));
        if (p->count > 0)
            rounded(out, p->mode[0].omega_re * v->frequency, p->mode[0].omega_re * v->rate,
                    cli_unit(r->c, TH_DIM_RATE));
        else
            fputs("<td></td>", out);
        words(out, th_point_state_text(p->state));
        fputs("</tr>\n", out);
    }
    fputs("</table></div>\n", out);
}

static void put_onsets(FILE *out, const cli_report_parts *r, const cli_view *v)
{
    const th_shape *shape = r->c->setup.shape;
    const th_shape_key *key;
    const char *head[] = {"order", "length", "±", "what", "growing beyond"};
    double shown, full;
    int modes;

    if (!r->onsets_known) {
        fputs("<p>Switch-on lengths: ", out);
        put(out, r->onsets_why);
        fputs(".</p>\n", out);
        return;
    }
    key = &shape->key[th_shape_length(shape)];
    full = th_scale_factor(&r->c->scale, key->dimension);
    shown = key->dimension == TH_DIM_LENGTH ? v->length : 1.0;
    if (v->si && key->dimension == TH_DIM_LENGTH)
        head[1] = "length (µm)";
    modes = r->onsets.before;
    fprintf(out, "<p>Switch-on lengths; %d modes grow below the first.</p>\n", modes);
    heads(out, head, 5);
    for (int i = 0; i < r->onsets.count; i++) {
        const th_onset *o = &r->onsets.onset[i];
        char text[CLI_NUMBER];

        modes += o->change;
        fprintf(out, "<tr><td>%d</td>", o->order);
        cell(out, cli_number(o->gap * shown, o->gap_error * shown, text), o->gap * full,
             cli_unit(r->c, key->dimension));
        (void)snprintf(text, sizeof text, "%.0e", o->gap_error * shown);
        cell(out, text, o->gap_error * full, cli_unit(r->c, key->dimension));
        words(out, o->kind == TH_ONSET_GROWING ? "a purely growing mode switches on"
                                               : "the slowest turns into a pair");
        fprintf(out, "<td>%d</td></tr>\n", modes);
    }
    fputs("</table></div>\n", out);
}

static void put_validity(FILE *out, const cli_findings *p)
{
    const char *const head[] = {"check", "number", "value", "limit", "", "beyond it"};

    heads(out, head, 6);
    for (int i = 0; i < TH_CHECKS; i++) {
        const th_check *k = &p->check[i];

        fprintf(out, "<tr%s>", k->known && !k->holds ? " class=\"bad\"" : "");
        words(out, k->name);
        words(out, k->title);
        if (k->known)
            rounded(out, k->value, k->value, NULL);
        else
            fputs("<td>not known</td>", out);
        fprintf(out, "<td>%s %g</td>", k->above ? "≥" : "≤", k->limit);
        words(out, !k->known ? "" : k->holds ? "holds" : "fails");
        fputs("<td class=\"w long\">", out);
        put(out, k->fails);
        fputs("</td></tr>\n", out);
    }
    fputs("</table></div>\n", out);
}

static void put_plan(FILE *out, const cli_findings *p)
{
    char *text = text_of(cli_plan_print, p);

    fputs("<pre>", out);
    if (text != NULL)
        put(out, text);
    fputs("</pre>\n", out);
    free(text);
}

static void heading(FILE *out, const char *text)
{
    fputs("<h2>", out);
    put(out, text);
    fputs("</h2>\n", out);
}

void cli_report_write(const cli_report_parts *r, FILE *out)
{
    const cli_view v = cli_view_of(r->c);
    const char *slash = strrchr(r->c->path, '/');
    const char *name = slash != NULL ? slash + 1 : r->c->path;

    fputs("<!DOCTYPE html>\n<html lang=\"en\"><head><meta charset=\"utf-8\">\n<meta "
          "name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n<title>",
          out);
    put(out, name);
    fprintf(out,
            " – twinhorizon</title>\n<link rel=\"icon\" "
            "href=\"data:,\">\n<style>%s</style></head><body>\n<h1>",
            style);
    put(out, name);
    fputs("</h1>\n<p class=\"sub\">Linear stability of a sonic horizon pair: ", out);
    put(out, r->c->setup.shape->name);
    fputs(", ", out);
    put(out, cli_ends_text(r->c->setup.ends.kind));
    fputs(v.si ? "" : "; reduced units, ħ = m = 1", out);
    fputs(". Numbers in full under the pointer.</p>\n", out);
    heading(out, "Verdict");
    put_answer(out, r->plan);
    heading(out, "Flow");
    figure(out, r->flow,
           "Shaded: supersonic. Solid vertical line: black-hole horizon; dotted: white-hole "
           "horizon.");
    put_flow(out, r, &v);
    heading(out, "Modes");
    put_modes(out, r, &v);
    figure(out, r->spectrum, "The complex plane; error bars are mostly smaller than the marks.");
    figure(out, r->modes, "Shapes of the first modes, each scaled to a largest |η| of 1.");
    heading(out, "Lengths of the pocket");
    if (r->plan->line != NULL) {
        figure(out, r->line, "Growing modes, one line a branch.");
        put_lengths(out, r, &v);
    } else {
        fputs("<p>", out);
        put(out, r->plan->best_part.why);
        fputs(".</p>\n", out);
    }
    put_onsets(out, r, &v);
    heading(out, "Limits of the model");
    put_validity(out, r->plan);
    heading(out, "Plan");
    put_plan(out, r->plan);
    heading(out, "Where this comes from");
    fprintf(out, "<p>twinhorizon %s; ", th_version());
    cli_print_libraries(out);
    fprintf(out, "; %.3g s.</p>\n<p>The case in force:</p>\n<pre>", r->seconds);
    put(out, r->c->text);
    fputs("</pre>\n</body></html>\n", out);
}
