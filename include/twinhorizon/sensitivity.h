/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * How a mode's frequency answers to the parameters of the flow. What goes in: a configuration and
 * one of its modes. What comes out: d omega / d key. Depends on flow, matching, status. */
#ifndef TWINHORIZON_SENSITIVITY_H
#define TWINHORIZON_SENSITIVITY_H

#include <twinhorizon/flow.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

typedef struct {
    double re, im; /* d Re omega / d key, d Im omega / d key, reduced units */
    double error;  /* bound on |error|: difference of two step lengths plus rounding */
} th_slope;

/**
 * Derivative of a mode's frequency with respect to one key of the shape, all other keys fixed:
 * -F_p / F_omega, F the matching function. F_omega is exact, F_p a fourth-order difference of
 * F/F_omega, in which the scale of F cancels.
 *
 * @param[in]  setup      the configuration
 * @param[in]  key        index into setup->shape->key
 * @param[in]  omega_top  as for th_matching_create
 * @param[in]  omega_re, omega_im  a mode of this configuration, polished
 * @retval TH_ENONE    the key is fixed by the ring's winding, or has no value
 * @retval TH_EINVAL   key out of range, or the flow does not exist for values a thousandth away
 * @retval TH_ECONVERGE as th_matching_eval
 * At a switch-on or a merger of two modes no derivative exists; the error bar then explodes.
 * Tests: tests/test_sensitivity.c.
 */
TH_MUST_USE th_status th_sensitivity(const th_flow_setup *setup, int key, double omega_top,
                                     double omega_re, double omega_im, th_slope *out,
                                     th_error *err);

#ifdef __cplusplus
}
#endif
#endif
