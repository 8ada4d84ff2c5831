/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Distance of the nearest change of the number of growing modes. In: a flow with directions. Out:
 * standard deviations. Calls flow, index. Symbols: margin as in index.h, sigma standard deviation.
 * Proof: tests/test_count_distance.c. */
#include "twinhorizon/count_distance.h"

#include <gsl/gsl_math.h>

#include "twinhorizon/index.h"

/* Step in a direction, in standard deviations: small, so that the answer is of first order, and far
 * above the rounding of the margin. */
static const double part = 0.05;

th_status th_count_distance(const th_flow *flow, double *sigmas, th_error *err)
{
    th_index own, other;
    double sum = 0;
    th_status st;

    if (flow == NULL || sigmas == NULL)
        return th_fail(err, TH_EINVAL, "count: want a flow and a place for the result");
    if (th_flow_directions(flow) == 0 || th_flow_ends(flow).kind != TH_ENDS_OPEN)
        return th_fail(err, TH_ENONE, "count: no errors of the flow are known, or no index");
    st = th_index_open(flow, &own, err);
    for (int d = 0; st == TH_OK && d < th_flow_directions(flow); d++) {
        th_flow *moved = NULL;
        double turns;

        st = th_flow_vary(flow, d, part, &moved, err);
        if (st == TH_OK)
            st = th_index_open(moved, &other, err);
        th_flow_destroy(moved);
        if (st != TH_OK)
            break;
        turns = (other.margin - own.margin) / M_PI; /* it jumps by pi half way between changes */
        turns -= floor(turns + 0.5);
        sum += turns * turns;
    }
    if (st == TH_OK)
        *sigmas = sum > 0 ? part * fabs(own.margin) / (M_PI * sqrt(sum)) : HUGE_VAL;
    return st;
}
