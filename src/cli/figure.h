/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Figures: a script with its data, drawn by gnuplot as SVG, PDF or PNG. Nothing of a case or path
 * is ever part of a command line or run by a shell. */
#ifndef CLI_FIGURE_H
#define CLI_FIGURE_H

#include <twinhorizon/onset.h>
#include <twinhorizon/track.h>

#include "cli.h"

/* A figure in the making: write gnuplot commands and data blocks to `out`. */
typedef struct {
    FILE *out;
    char *text; /* once cli_figure_close was called */
    size_t length;
    int width, height; /* in points of 1/72 inch on paper, pixels on a screen */
} cli_figure;

/* Begin one: size, the common style. */
th_status cli_figure_open(cli_figure *figure, int width, int height, th_error *err) TH_MUST_USE;

/* End writing. */
th_status cli_figure_close(cli_figure *figure, th_error *err) TH_MUST_USE;

/* Draw it into a file by its ending, .svg, .pdf or .png; the script too where `script` is not
 * NULL. */
th_status cli_figure_save(const cli_figure *figure, const char *path, const char *script,
                          th_error *err) TH_MUST_USE;

/* Draw it as the SVG element of a page that scales with it; *svg is freed by the caller. */
th_status cli_figure_svg(const cli_figure *figure, char **svg, th_error *err) TH_MUST_USE;

void cli_figure_clear(cli_figure *figure);

/* TH_EINVAL when the ending of a figure's name is none of the three; NULL is no figure. */
th_status cli_figure_check(const char *command, const char *option, const char *path,
                           th_error *err) TH_MUST_USE;

/* TH_EINVAL when a script is wanted without a figure. */
th_status cli_script_check(const char *command, const char *script, bool figure,
                           th_error *err) TH_MUST_USE;

/* The two options of a command that draws, CLI_FILE or CLI_LATE. */
#define CLI_FIGURE_OPTIONS(picture, script, when)                                                  \
    {"--figure", "FILE", "figure, SVG, PDF or PNG by the ending of its name", &(picture), when},   \
    {                                                                                              \
        "--script", "FILE.gp", "keep the figure's gnuplot script with its data", &(script), when   \
    }

/* What a picture shows of a flow: the pockets and as much again on each side, within cli_window. */
void cli_picture_window(const th_flow *flow, double *from, double *to);

/* Shade pockets and draw horizons as vertical lines, in a script; shown = reduced x length. */
void cli_draw_pockets(const th_flow *flow, double length, FILE *out);

/* ---- what is drawn: each writes a whole figure ----------------------------------------------- */

/* Speed and sound speed, density, potential; horizons and pockets marked. */
th_status cli_draw_flow(const th_case *c, const th_flow *flow, cli_figure *figure,
                        th_error *err) TH_MUST_USE;

/* The complex plane with error bars and the certified region. */
th_status cli_draw_spectrum(const th_case *c, const th_solution *s, cli_figure *figure,
                            th_error *err) TH_MUST_USE;

/* |u|, |v| and the density ripple of the first modes. */
th_status cli_draw_modes(const th_case *c, const th_flow *flow, const th_solution *s,
                         cli_figure *figure, th_error *err) TH_MUST_USE;

/* The tables of a finished sweep: branches over one axis, a map over the last two of more. */
th_status cli_draw_sweep(const th_case *c, const char *folder, int threads, cli_figure *figure,
                         th_error *err) TH_MUST_USE;

/* Growth and frequency along a line of lengths, with `onsets` switch-on lengths marked. */
th_status cli_draw_track(const th_case *c, const th_track *track, const th_onset *onset, int onsets,
                         cli_figure *figure, th_error *err) TH_MUST_USE;

#endif
