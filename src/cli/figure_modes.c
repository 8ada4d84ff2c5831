/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Modes as figures: the complex plane, and shapes along the flow. */
#include <math.h>
#include <stdlib.h>
#include <twinhorizon/profile.h>

#include "figure.h"

static const char *const name[] = {"unstable", "trapped", "stable", "undecided"};
enum { LABELS = 4 };

/* A block for each label: frequency, growth rate, error bars, text under the pointer. */
static void spectrum_data(const cli_view *v, const th_solution *s, int *count, FILE *out)
{
    for (int label = 0; label < LABELS; label++) {
        count[label] = 0;
        fprintf(out, "$%s << EOD\n", name[label]);
        for (int i = 0; i < s->count; i++) {
            const th_mode *m = &s->mode[i];

            if ((int)m->label != label)
                continue;
            count[label]++;
            fprintf(out,
                    "%.12g %.12g %.3g %.3g \"mode %d: frequency %.8g%s, growth rate %.8g%s, +- "
                    "%.1g%s\"\n",
                    m->omega_re * v->frequency, m->omega_im * v->rate,
                    m->omega_error * v->frequency, m->omega_error * v->rate, i + 1,
                    m->omega_re * v->frequency, v->hertz, m->omega_im * v->rate, v->per_second,
                    m->omega_error * v->rate, v->per_second);
        }
        fputs("EOD\n", out);
    }
}

th_status cli_draw_spectrum(const th_case *c, const th_solution *s, cli_figure *figure,
                            th_error *err)
{
    static const char *const look[LABELS] = {"lt 2 dt 1 pt 7 ps 1.1", "lt 4 dt 1 pt 12 ps 1.2",
                                             "lt 1 dt 1 pt 6 ps 0.9", "lt 5 dt 1 pt 4 ps 1.1"};
    const cli_view v = cli_view_of(c);
    double most = 0.0, least = 0.0, right = s->omega_top;
    int count[LABELS];
    bool first = true;
    FILE *out;
    th_status st = cli_figure_open(figure, 900, 620, err);

    if (st != TH_OK)
        return st;
    out = figure->out;
    for (int i = 0; i < s->count; i++) {
        most = fmax(most, s->mode[i].omega_im);
        least = fmin(least, s->mode[i].omega_im);
        right = fmax(right, s->mode[i].omega_re);
    }
    most = most > 0.0 ? 1.25 * most : 0.25 * fmax(-least, 0.2 * s->omega_top);
    least = fmin(1.15 * least, -0.3 * most);
    spectrum_data(&v, s, count, out);
    fprintf(out, "set xrange [%.9g:%.9g]\nset yrange [%.9g:%.9g]\n", -0.04 * right * v.frequency,
            1.12 * right * v.frequency, least * v.rate, most * v.rate);
    if (s->census_known)
        fprintf(out,
                "set object 1 rectangle from graph 0, first 0 to first %.9g, first %.9g behind fc "
                "rgb '#e3f0e6' fs solid noborder\n"
                "set label 1 'certified: every growing mode here is counted' at graph 0.015, graph "
                "0.965 left tc rgb '#2f6b40'\n",
                fmin(s->census_re_max, 2.0 * right) * v.frequency,
                fmin(s->census_im_max, 2.0 * most) * v.rate);
    fprintf(out,
            "set arrow 1 from first %.9g, graph 0 to first %.9g, graph 1 nohead lw 1.3 lc rgb "
            "'#777777' dt '-'\n"
            "set label 2 'top of the negative-energy band' at first %.9g, graph 0.03 rotate by 90 "
            "left offset character -1.2,0 tc rgb '#777777'\n"
            "set xzeroaxis lw 1.4 lc rgb '#333333'\n",
            s->omega_top * v.frequency, s->omega_top * v.frequency, s->omega_top * v.frequency);
    fprintf(out, "set xlabel 'frequency%s'\nset ylabel 'growth rate%s'\n",
            v.si ? " (Hz)" : " (reduced, angular)", v.si ? " (1/s)" : " (reduced)");
    fputs("set key above center horizontal\nset lmargin 11\nplot ", out);
    for (int label = 0; label < LABELS; label++) {
        if (count[label] == 0)
            continue;
        fprintf(out,
                "%s$%s using 1:2:3:4 with xyerrorbars %s lw 1.2 title '%s', $%s using 1:2:5 with "
                "labels hypertext point %s notitle",
                first ? "" : ", ", name[label], look[label], name[label], name[label], look[label]);
        first = false;
    }
    fputs(first ? "NaN notitle\n" : "\n", out);
    return cli_figure_close(figure, err);
}

/* ---- shapes --------------------------------------------------------------------------------- */

/* Modes shown, and positions: a curve is smooth at 20 points a wave, and a flow that fits on paper
 * has not more than a hundred. */
enum { SHOWN = 3, POSITIONS = 2000 };

typedef struct {
    double *x, *eta_re, *eta_im, *phi_re, *phi_im; /* [POSITIONS] */
} shape;

/* A block for one mode: x, |u|, |v|, Re eta, scaled to a largest |eta| of 1. */
static void shape_data(const cli_view *v, const th_flow *flow, const shape *f, int number,
                       FILE *out)
{
    fprintf(out, "$mode%d << EOD\n", number);
    for (int i = 0; i < POSITIONS; i++) {
        th_flow_point p;
        double root;

        th_flow_at(flow, f->x[i], &p);
        root = sqrt(p.n);
        /* u, v = sqrt(n) (eta/2 +- i phi) */
        fprintf(out, "%.9g %.6g %.6g %.6g\n", f->x[i] * v->length,
                root * hypot(f->eta_re[i] / 2.0 - f->phi_im[i], f->eta_im[i] / 2.0 + f->phi_re[i]),
                root * hypot(f->eta_re[i] / 2.0 + f->phi_im[i], f->eta_im[i] / 2.0 - f->phi_re[i]),
                f->eta_re[i]);
    }
    fputs("EOD\n", out);
}

static void plot_shape(const cli_view *v, const th_mode *m, int number, bool last, FILE *out)
{
    char frequency[CLI_NUMBER], growth[CLI_NUMBER];

    (void)cli_number(m->omega_re * v->frequency, fabs(m->omega_re) * v->frequency * 1e-4,
                     frequency);
    (void)cli_number(m->omega_im * v->rate, fabs(m->omega_im) * v->rate * 1e-4, growth);
    fprintf(out,
            "set label 1 'mode %d, %s: frequency %s%s, growth rate %s%s' at graph 0.005, graph "
            "1.06 left\n",
            number, th_label_text(m->label), frequency, v->si ? " Hz" : "", growth,
            v->si ? " /s" : "");
    if (last)
        fprintf(out, "set xlabel 'x%s'\n", v->si ? " (µm)" : " (reduced)");
    fprintf(out,
            "plot $mode%d using 1:4 with filledcurves y=0 fc rgb '#9cc4e0' title 'Re η (left)', "
            "$mode%d using 1:2 axes x1y2 with lines lt 2 title '|u| (right)', $mode%d using 1:3 "
            "axes x1y2 with lines lt 5 title '|v| (right)'\nunset key\n",
            number, number, number);
}

th_status cli_draw_modes(const th_case *c, const th_flow *flow, const th_solution *s,
                         cli_figure *figure, th_error *err)
{
    const th_solve_options options = {.accuracy = c->accuracy};
    const cli_view v = cli_view_of(c);
    const int wanted = s->count < SHOWN ? s->count : SHOWN;
    double *all = calloc(5 * (size_t)POSITIONS, sizeof *all), from, to;
    shape f = {all, all + POSITIONS, all + 2 * POSITIONS, all + 3 * POSITIONS, all + 4 * POSITIONS};
    int shown[SHOWN], count = 0;
    th_status st = all != NULL
                       ? cli_figure_open(figure, 900, 120 + 260 * (wanted > 0 ? wanted : 1), err)
                       : th_fail(err, TH_ENOMEM, "figure: %d positions", POSITIONS);

    if (st != TH_OK)
        goto done;
    cli_picture_window(flow, &from, &to);
    for (int i = 0; i < wanted; i++) {
        th_error why;

        for (int k = 0; k < POSITIONS; k++)
            f.x[k] = from + (to - from) * k / (POSITIONS - 1);
        st = th_mode_profile(flow, &options, s->mode[i].omega_re, s->mode[i].omega_im, POSITIONS,
                             f.x, f.eta_re, f.eta_im, f.phi_re, f.phi_im, &why);
        if (st == TH_ENOMEM || st == TH_EBUG) {
            (void)th_fail(err, st, "%s", why.text);
            goto done;
        }
        if (st != TH_OK)
            continue; /* a mode without a shape is left out */
        shape_data(&v, flow, &f, i + 1, figure->out);
        shown[count++] = i;
    }
    fprintf(figure->out, "set xrange [%.9g:%.9g]\nset yrange [-1.1:1.1]\nset y2range [0:*]\n",
            from * v.length, to * v.length);
    cli_draw_pockets(flow, v.length, figure->out);
    fprintf(figure->out,
            "set ylabel 'η, largest 1'\nset y2label '|u|, |v|'\nset y2tics\n"
            "set xzeroaxis lw 1 lc rgb '#333333'\n"
            "set key at screen 0.5, screen %.4f center top horizontal maxrows 1 width -2\n"
            "set multiplot layout %d,1 margins 0.1,0.91,%.3f,%.3f spacing 0,%.3f\n",
            1.0 - 8.0 / figure->height, count > 0 ? count : 1, 70.0 / figure->height,
            1.0 - 62.0 / figure->height, 62.0 / figure->height);
    for (int i = 0; i < count; i++)
        plot_shape(&v, &s->mode[shown[i]], shown[i] + 1, i + 1 == count, figure->out);
    if (count == 0)
        fputs("set label 1 'no modes in the band' at graph 0.5, graph 0.5 center\nplot NaN "
              "notitle\n",
              figure->out);
    fputs("unset multiplot\n", figure->out);
    st = cli_figure_close(figure, err);
done:
    free(all);
    return st;
}
