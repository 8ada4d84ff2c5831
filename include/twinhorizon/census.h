/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Census: how many growing modes a flow has, counted by the argument principle on the matching
 * function, and where they are, found without any matrix. Depends on matching, flow, status. */
#ifndef TWINHORIZON_CENSUS_H
#define TWINHORIZON_CENSUS_H

#include <stdbool.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/matching.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/* The certified region is |Re omega| < re_max, floor < Im omega < im_max, |omega| > slowest. */
typedef struct {
    int growing;    /* modes in the region, both signs of Re omega */
    int slow;       /* open ends: modes with |omega| < slowest, growing or not, both signs of
                       Re omega; in a flow that is not within a hair of a switch-on there are
                       none */
    int neutral;    /* rings, walls: modes with |Im omega| < floor and 0 < Re omega < re_max; 0
                       for open ends */
    double re_max;  /* well beyond the top of the negative-energy band */
    double im_max;  /* rigorous bound on growth rates (th_growth_bound), or ten times the floor of
                       neutral modes where that is more */
    double floor;   /* 0 for open ends: the contour runs on the real axis itself */
    double slowest; /* 0 for rings and walls, where floor does its work */
    double worst_step; /* largest phase step between neighbouring samples, radians, < pi/4 */
    long evaluations;  /* of the matching function */
} th_census;

/**
 * Upper bound on the growth rate of any mode: the smaller of max c^2 and the largest of -v' and
 * v c'/c plus, for jumps of c^2 that rise along the flow, J Sum (c_+^2 - c_-^2) / (2 min n c); on a
 * ring the last term over tanh(circumference min c). Between walls, and where v jumps, max c^2
 * alone. Derived in DEVELOPERS.md ("Growth bound"). Smooth flows are sampled densely and the result
 * is taken two per cent larger.
 */
double th_growth_bound(const th_flow *flow);

/**
 * Count the growing modes.
 *
 * @param[in]  flow       for the bound on growth
 * @param[in]  matching   of the same flow
 * @param[in]  omega_top  top of the negative-energy band; the region reaches three times as far
 * @param[out] out        filled also when undecided, as far as it got
 * @retval TH_EUNDECIDED  a phase step stayed too large: a mode lies on the contour, or the total is
 *                        not within 0.05 of a whole number
 * What success does not prove: that there is no growing mode with |Re omega| > re_max; none can
 * find a negative-energy partner there. Cost: some hundred evaluations, more for long pockets.
 * Source: argument principle; "A topological invariant arising in the stability analysis of
 * travelling waves", J. reine angew. Math. 410, 167 (1990).
 */
TH_MUST_USE th_status th_census_count(const th_flow *flow, const th_matching *matching,
                                      double omega_top, th_census *out, th_error *err);

/**
 * Count, find and polish: the growing modes of the region, as many as were counted. Open ends only.
 *
 * Slow modes (|omega| < out->slowest) are counted in out->slow and not listed: within about a
 * millionth of a switch-on, growing + slow equals the static index, not growing alone.
 *
 * @param[out] omega  [*count][2] (Re, Im) of the growing modes with Re omega >= 0, by falling Im;
 *                    the caller frees it (plain memory); NULL after a failure
 * @retval TH_EUNDECIDED  as th_census_count, or a mode that was counted could not be pinned down
 * @retval TH_EINVAL      not open ends
 */
TH_MUST_USE th_status th_census_find(const th_flow *flow, const th_matching *matching,
                                     double omega_top, th_census *out, double (**omega)[2],
                                     int *count, th_error *err);

#ifdef __cplusplus
}
#endif
#endif
