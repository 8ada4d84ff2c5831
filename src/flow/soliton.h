/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A uniform plateau between two pieces of grey solitons, which the exact flows of wells and
 * barriers are, private to src/flow. What goes in: the upstream state, where the solitons are cut.
 * What comes out: the flow. */
#ifndef TH_FLOW_SOLITON_H
#define TH_FLOW_SOLITON_H

#include "shapes.h"

/**
 * n = N (m^2 + (1 - m^2) tanh^2(k s + start)) outside, s the distance from the plateau, N inside on
 * it; n v = N m c_u and c = c_u sqrt(n/N) everywhere; k = sqrt(1 - m^2) c_u, N the setup's density.
 *
 * @param[in] width  distance over which v varies at the ends of the plateau
 * @retval TH_EINVAL  a ring: key kind
 */
TH_MUST_USE th_status th_soliton_flow(const th_flow_setup *setup, double c_u, double m, double gap,
                                      double start, double inside, double width, th_flow **out,
                                      th_error *err);

#endif
