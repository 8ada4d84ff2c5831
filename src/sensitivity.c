/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Sensitivities from the matching function. In: a configuration, a key, a mode. Out: d omega/d key.
 * Calls flow, matching.
 * N(p) = -F/F_omega at the mode's omega is Newton's step for the flow with parameter p; it
 * vanishes at the mode's own parameter, and its slope there is -F_p/F_omega = d omega/dp. Any
 * factor of F that depends on p only drops out of it.
 * Symbols: p parameter, h its step. Proof: tests/test_sensitivity.c. */
#include "twinhorizon/sensitivity.h"

#include <complex.h>
#include <float.h>
#include <math.h>

#include "twinhorizon/matching.h"

/* Step relative to the parameter: the fourth-order difference then errs by 1e-12 (relative to the
 * scale on which omega bends), rounding by as much. */
static const double relative_step = 1e-3;

static th_status newton_step(const th_flow_setup *setup, int key, double value, double omega_top,
                             double re, double im, double complex *step, th_error *err)
{
    th_flow_setup moved = *setup;
    th_flow *flow = NULL;
    th_matching *matching = NULL;
    th_matching_value f;
    th_status st;

    moved.value[key] = value;
    st = th_flow_build(&moved, &flow, err);
    if (st == TH_OK)
        st = th_matching_create(flow, omega_top, TH_MATCHING_USUAL, &matching, err);
    if (st == TH_OK)
        st = th_matching_eval(matching, re, im, true, &f, err);
    if (st == TH_OK)
        *step = -(f.re + I * f.im) / (f.slope_re + I * f.slope_im);
    th_matching_destroy(matching);
    th_flow_destroy(flow);
    return st;
}

th_status th_sensitivity(const th_flow_setup *setup, int key, double omega_top, double omega_re,
                         double omega_im, th_slope *out, th_error *err)
{
    static const double at[4] = {-1.0, -0.5, 0.5, 1.0}; /* in units of h */
    double complex n[4], wide, narrow, slope;
    double h;

    if (setup == NULL || out == NULL || key < 0 || key >= setup->shape->keys)
        return th_fail(err, TH_EINVAL, "sensitivity: key %d does not exist", key);
    if (!setup->given[key] ||
        (setup->ends.kind == TH_ENDS_RING && setup->shape->key[key].fixed_by_ring))
        return th_fail(err, TH_ENONE, "sensitivity: %s is not free", setup->shape->key[key].key);
    h = relative_step * fabs(setup->value[key]);
    if (!(h > 0.0))
        return th_fail(err, TH_ENONE, "sensitivity: %s is zero", setup->shape->key[key].key);
    for (int i = 0; i < 4; i++) {
        th_status st = newton_step(setup, key, setup->value[key] + at[i] * h, omega_top, omega_re,
                                   omega_im, &n[i], err);

        if (st != TH_OK)
            return st;
    }
    wide = (n[3] - n[0]) / (2.0 * h);
    narrow = (n[2] - n[1]) / h;
    slope = (4.0 * narrow - wide) / 3.0;            /* Richardson */
    out->re = omega_re == 0.0 ? 0.0 : creal(slope); /* a mode on the axis stays on it */
    out->im = cimag(slope);
    /* the extrapolation gains two orders of h over the difference of the two estimates */
    out->error =
        cabs(wide - narrow) * fmin(1.0, 10.0 * cabs(wide - narrow) / fmax(cabs(slope), DBL_MIN)) +
        8.0 * DBL_EPSILON * fmax(hypot(omega_re, omega_im), omega_top) / h;
    return TH_OK;
}
