/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Uncertainties of modes from those of a flow. In: a flow or its setup, modes. Out: standard
 * deviations, shifts. Calls flow, matching.
 * N(p) = -F/F_omega at a mode's omega is Newton's step for the flow moved by p; its slope at p = 0
 * is d omega/dp, as in sensitivity.c. N(0), what is left of the mode's own error, is taken off.
 * Proof: tests/test_table_flow.c. */
#include "twinhorizon/uncertainty.h"

#include <complex.h>
#include <gsl/gsl_math.h>

#include "alloc.h"
#include "flow/table.h"
#include "twinhorizon/matching.h"

/* Step in a direction, in standard deviations: small, so that the answer is that of first order,
 * and far above the rounding of F for all but noise-free tables, whose bars are then roundings. */
static const double part = 0.05;

static th_status newton_steps(const th_flow *flow, double omega_top, const th_omega *omega,
                              int count, double complex *step, th_error *err)
{
    th_matching *matching = NULL;
    th_matching_value f;
    th_status st = th_matching_create(flow, omega_top, TH_MATCHING_USUAL, &matching, err);

    for (int i = 0; i < count && st == TH_OK; i++) {
        st = th_matching_eval(matching, omega[i].re, omega[i].im, true, &f, err);
        if (st == TH_OK)
            step[i] = -(f.re + I * f.im) / (f.slope_re + I * f.slope_im);
    }
    th_matching_destroy(matching);
    return st;
}

/* own: [count] steps of the flow itself, then [count] of a moved one. */
static th_status prepare(const th_flow *flow, double omega_top, const th_omega *omega, int count,
                         th_omega *out, double complex **own, th_error *err)
{
    *own = NULL;
    if (flow == NULL || omega == NULL || out == NULL || count < 1)
        return th_fail(err, TH_EINVAL,
                       "uncertainty: %d modes, want >= 1, a flow, and places for the result",
                       count);
    *own = th_alloc(2 * (size_t)count, sizeof **own);
    if (*own == NULL)
        return th_fail(err, TH_ENOMEM, "uncertainty: %d modes", count);
    return newton_steps(flow, omega_top, omega, count, *own, err);
}

th_status th_flow_uncertainty(const th_flow *flow, double omega_top, const th_omega *omega,
                              int count, th_omega *sigma, th_error *err)
{
    double complex *own = NULL;
    th_status st = prepare(flow, omega_top, omega, count, sigma, &own, err);

    for (int i = 0; i < count && st == TH_OK; i++)
        sigma[i] = (th_omega){0, 0};
    for (int d = 0; st == TH_OK && d < th_flow_directions(flow); d++) {
        th_flow *moved = NULL;

        st = th_flow_vary(flow, d, part, &moved, err);
        if (st == TH_OK)
            st = newton_steps(moved, omega_top, omega, count, own + count, err);
        for (int i = 0; i < count && st == TH_OK; i++) {
            const double complex slope = (own[count + i] - own[i]) / part;

            sigma[i].re += omega[i].re == 0.0 ? 0.0 : creal(slope) * creal(slope);
            sigma[i].im += cimag(slope) * cimag(slope);
        }
        th_flow_destroy(moved);
    }
    for (int i = 0; i < count && st == TH_OK; i++)
        sigma[i] = (th_omega){sqrt(sigma[i].re), sqrt(sigma[i].im)};
    free(own);
    return st;
}

th_status th_taper_effect(const th_flow_setup *setup, double omega_top, const th_omega *omega,
                          int count, th_omega *shift, th_error *err)
{
    double complex *own = NULL;
    th_flow *flow = NULL, *other = NULL;
    th_flow_setup half;
    th_error why;
    th_status st;

    if (setup == NULL)
        return th_fail(err, TH_EINVAL, "uncertainty: no setup");
    if (!(th_table_taper(setup) > 0))
        return th_fail(err, TH_ENONE, "uncertainty: shape %s has no tapers", setup->shape->name);
    st = th_flow_build(setup, &flow, err);
    if (st == TH_OK)
        st = prepare(flow, omega_top, omega, count, shift, &own, err);
    if (st != TH_OK)
        goto done;
    half = *setup;
    th_table_set_taper(&half, th_table_taper(setup) / 2);
    st = th_flow_build(&half, &other, &why);
    if (st != TH_OK) /* the taper in force is fine, half of it need not be */
        st = th_fail_key(err, st == TH_EINVAL ? TH_ENONE : st, why.key, "%s", why.text);
    if (st == TH_OK)
        st = newton_steps(other, omega_top, omega, count, own + count, err);
    for (int i = 0; i < count && st == TH_OK; i++) {
        const double complex moved = own[count + i] - own[i];

        shift[i] = (th_omega){omega[i].re == 0.0 ? 0.0 : creal(moved), cimag(moved)};
    }
done:
    free(own);
    th_flow_destroy(other);
    th_flow_destroy(flow);
    return st;
}
