/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What the errors of a measured profile do to the answer of `solve`: standard deviations of the
 * growing modes, the effect of the tapers, how safe their number is. */
#include <math.h>
#include <stdlib.h>
#include <twinhorizon/count_distance.h>
#include <twinhorizon/uncertainty.h>

#include "cli.h"

/* Failures that are an answer: a moved table makes no flow, or its modes cannot be followed. */
static bool no_answer(th_status st)
{
    return st == TH_EINVAL || st == TH_ECONVERGE || st == TH_EUNDECIDED || st == TH_ENONE;
}

/* Errors of the growing modes. */
static th_status find_modes(const th_case *c, const th_flow *flow, const th_solution *s,
                            cli_data_errors *out, th_error *err)
{
    th_omega *omega = calloc((size_t)out->count, sizeof *omega);
    th_error why = {.status = TH_OK};
    th_status st = TH_OK;

    out->sigma = calloc((size_t)out->count, sizeof *out->sigma);
    out->taper = calloc((size_t)out->count, sizeof *out->taper);
    if (omega == NULL || out->sigma == NULL || out->taper == NULL)
        st = th_fail(&why, TH_ENOMEM, "solve: errors of %d modes", out->count);
    for (int i = 0; st == TH_OK && i < out->count; i++)
        omega[i] = (th_omega){s->mode[i].omega_re, s->mode[i].omega_im};
    if (st == TH_OK)
        st = th_flow_uncertainty(flow, s->omega_top, omega, out->count, out->sigma, &why);
    out->sigma_known = st == TH_OK;
    if (st == TH_OK) {
        st = th_taper_effect(&c->setup, s->omega_top, omega, out->count, out->taper, &why);
        out->taper_known = st == TH_OK;
    } else if (no_answer(st)) {
        (void)snprintf(out->why, sizeof out->why, "%s", why.text);
    }
    free(omega);
    return no_answer(st) || st == TH_OK ? TH_OK : th_fail(err, st, "%s", why.text);
}

th_status cli_data_errors_find(const th_case *c, const th_flow *flow, const th_solution *s,
                               cli_data_errors *out, th_error *err)
{
    th_error why = {.status = TH_OK};
    th_status st;

    *out = (cli_data_errors){0};
    while (out->count < s->count && s->mode[out->count].label == TH_LABEL_UNSTABLE)
        out->count++; /* growing ones come first */
    if (th_flow_directions(flow) == 0)
        return TH_OK;
    out->known = true;
    st = th_count_distance(flow, &out->distance, &why);
    if (st != TH_OK)
        out->distance = 0;
    if (st != TH_OK && !no_answer(st))
        return th_fail(err, st, "%s", why.text);
    return out->count > 0 ? find_modes(c, flow, s, out, err) : TH_OK;
}

void cli_data_errors_clear(cli_data_errors *errors)
{
    free(errors->sigma);
    free(errors->taper);
    *errors = (cli_data_errors){0};
}

void cli_data_errors_print(const th_case *c, const th_solution *s, const cli_data_errors *errors)
{
    const cli_view v = cli_view_of(c);

    if (!errors->known)
        return;
    if (errors->count > 0 && !errors->sigma_known)
        printf("Data        errors of the modes are not known: %s\n", errors->why);
    for (int i = 0; errors->sigma_known && i < errors->count; i++) {
        const th_omega *sigma = &errors->sigma[i], *taper = &errors->taper[i];

        printf("%smode %d: frequency +- %.2g%s, growth rate +- %.2g%s (%.2g of them above zero)",
               i == 0 ? "Data        " : "            ", i + 1, sigma->re * v.frequency, v.hertz,
               sigma->im * v.rate, v.per_second, s->mode[i].omega_im / sigma->im);
        if (errors->taper_known)
            printf("; half the taper moves them by %.1g%s and %.1g%s",
                   fabs(taper->re) * v.frequency, v.hertz, fabs(taper->im) * v.rate, v.per_second);
        putchar('\n');
    }
    if (errors->sigma_known)
        puts("            one standard deviation, from the errors of the table to first order");
    if (errors->distance > 0)
        printf("%sthe nearest change of the number of growing modes is %.2g standard deviations of "
               "the table away\n",
               errors->count == 0 ? "Data        " : "            ", errors->distance);
    if (errors->sigma_known && s->verdict == TH_VERDICT_UNSTABLE)
        printf("To quote    the profile has %d growing %s; the fastest grows at %.3g +- %.2g%s and "
               "oscillates at %.4g +- %.2g%s (one standard deviation of the data; numerics below "
               "%.0e%s)\n",
               s->unstable, s->unstable == 1 ? "mode" : "modes", s->mode[0].omega_im * v.rate,
               errors->sigma[0].im * v.rate, v.per_second, s->mode[0].omega_re * v.frequency,
               errors->sigma[0].re * v.frequency, v.hertz, s->mode[0].omega_error * v.rate,
               v.per_second);
}
