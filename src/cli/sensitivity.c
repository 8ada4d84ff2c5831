/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * solve --sensitivity: what one per cent of each key does to each growing mode. */
#include <twinhorizon/sensitivity.h>

#include "cli.h"

/* Unit in which the text view shows a key: factor from reduced, and its word. */
static double shown(const th_case *c, const cli_view *v, th_dimension dimension, const char **word)
{
    switch (dimension) {
    case TH_DIM_LENGTH:
        *word = v->micrometres;
        return v->length;
    case TH_DIM_SPEED:
        *word = v->speeds;
        return v->speed;
    default:
        *word = "";
        return th_scale_factor(&c->scale, dimension);
    }
}

static void print_row(const th_case *c, const cli_view *v, int key, const th_slope *slope)
{
    const th_shape_key *k = &c->setup.shape->key[key];
    const double percent = 0.01 * c->setup.value[key];
    const char *word;
    const double unit = shown(c, v, k->dimension, &word);
    char re[CLI_NUMBER], im[CLI_NUMBER], name[64];

    (void)snprintf(name, sizeof name, "%s%s%s", k->key, *word != '\0' ? " /" : "", word);
    printf("      %-24s %14s %14s %8.0e %12.4g %12.4g\n", name,
           cli_number(slope->re * v->frequency / unit, slope->error * v->frequency / unit, re),
           cli_number(slope->im * v->rate / unit, slope->error * v->rate / unit, im),
           slope->error * v->rate / unit, slope->re * percent * v->frequency,
           slope->im * percent * v->rate);
}

th_status cli_print_sensitivity(const th_case *c, const th_solution *s, th_error *err)
{
    const cli_view v = cli_view_of(c);
    th_status st = TH_OK;

    printf("\n%4s  %-24s %14s %14s %8s %12s %12s\n", "mode", "per unit of", "d frequency",
           "d growth", "+-", "freq. per 1%", "growth per 1%");
    for (int i = 0; st == TH_OK && i < s->count; i++) {
        if (s->mode[i].label != TH_LABEL_UNSTABLE)
            continue;
        printf("%4d\n", i + 1);
        for (int key = 0; st == TH_OK && key < c->setup.shape->keys; key++) {
            th_slope slope;

            st = th_sensitivity(&c->setup, key, s->omega_top, s->mode[i].omega_re,
                                s->mode[i].omega_im, &slope, err);
            if (st == TH_OK)
                print_row(c, &v, key, &slope);
            else if (st == TH_ENONE)
                st = TH_OK;
        }
    }
    if (s->unstable == 0)
        puts("      no growing mode");
    if (v.si)
        puts("      frequencies in Hz, growth rates in 1/s");
    return st;
}
