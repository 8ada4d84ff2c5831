/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The two ways to a stationary flow, private to src/flow: the depth at which a plateau forms, and
 * all flows at a given depth. What goes in: profile, lengths, the state far upstream. What comes
 * out: solved flows. Proved by tests/test_potential.c. */
#ifndef TH_FLOW_PLATEAU_H
#define TH_FLOW_PLATEAU_H

#include "stationary.h"

/**
 * The depth (height of barriers) at which the supersonic pocket is a plateau, and the flow. Starts
 * from the sharp edge, where half a grey soliton meets the plateau, and widens it step by step.
 * @retval TH_EINVAL  no plateau forms: err->key is width, and the text says up to which one does,
 * or gap
 */
TH_MUST_USE th_status th_plateau_find(th_trap *trap, const th_upstream *up, const th_gll *rule,
                                      th_stationary *out, th_error *err);

/* What is wanted of a flow at a given depth. */
enum { TH_FLOWS_MAX = 32 };
typedef struct {
    int count;
    double most; /* share of the pocket that must be supersonic */
    th_stationary flow[TH_FLOWS_MAX];
    double inside[TH_FLOWS_MAX]; /* supersonic part of the pocket, 0..1 */
    double ripple[TH_FLOWS_MAX]; /* largest less smallest density there over their sum */
} th_flow_list;

/**
 * All stationary flows at a depth, the best one first: supersonic over most of the pocket, then the
 * smoothest there; then those that are supersonic over less of it. Of a table, whose pocket is not
 * known, a healing length is enough.
 * @param[in] pocket  [2] where the pocket should be; of a table its whole length
 * @retval TH_OK      count may be 0
 */
TH_MUST_USE th_status th_flows_find(const th_trap *trap, const th_upstream *up, double depth,
                                    const double *pocket, const th_gll *rule, th_flow_list *out,
                                    th_error *err);
void th_flow_list_clear(th_flow_list *list);

/** Whether the best flow of the list is supersonic over most of the pocket. */
bool th_flow_list_transonic(const th_flow_list *list);

/** How many flows at a depth are supersonic over most of the pocket: no elements, for searches. */
TH_MUST_USE th_status th_flows_count(const th_trap *trap, const th_upstream *up, double depth,
                                     const double *pocket, int *count, th_error *err);

#endif
