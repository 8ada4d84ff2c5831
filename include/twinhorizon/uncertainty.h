/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What noise of a measured profile, and the uniform ends put on it, make of a mode's frequency.
 * What goes in: a flow or its setup, modes. What comes out: standard deviations, shifts. Depends on
 * flow, matching, status. */
#ifndef TWINHORIZON_UNCERTAINTY_H
#define TWINHORIZON_UNCERTAINTY_H

#include <twinhorizon/flow.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/* Of one mode, reduced units. */
typedef struct {
    double re, im;
} th_omega;

/**
 * Standard deviations of the frequencies of modes, from the directions in which the flow is
 * uncertain (th_flow_vary): the sum over them of (d omega/d direction)^2, each by one step of
 * Newton's method for the matching function of the flow moved a little. To first order in the
 * uncertainty: where it reaches a switch-on or another mode they mean little.
 *
 * @param[in]  omega_top  as for th_matching_create
 * @param[in]  omega      [count] modes of this flow, polished
 * @param[out] sigma      [count] of Re omega and Im omega; zero for a flow without directions;
 *                        Re of a mode on the imaginary axis is zero
 * @retval TH_EINVAL      flow, omega or sigma is NULL, count < 1
 * @retval TH_ECONVERGE, TH_EUNDECIDED  as th_matching_create and th_matching_eval
 * Tests: tests/test_table_flow.c.
 */
TH_MUST_USE th_status th_flow_uncertainty(const th_flow *flow, double omega_top,
                                          const th_omega *omega, int count, th_omega *sigma,
                                          th_error *err);

/**
 * By how much modes move when the tapers of shape `table` are half as long, to first order: a
 * measure of what the uniform ends do to them.
 *
 * @param[in]  setup  the configuration whose modes these are
 * @param[out] shift  [count]
 * @retval TH_ENONE   the shape has no tapers, or so short ones break a rule: too few rows in them,
 *                    or not uniform over them; the text says which
 * @retval TH_EINVAL  as th_flow_uncertainty, or the setup itself breaks a rule
 */
TH_MUST_USE th_status th_taper_effect(const th_flow_setup *setup, double omega_top,
                                      const th_omega *omega, int count, th_omega *shift,
                                      th_error *err);

#ifdef __cplusplus
}
#endif
#endif
