/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * How safe the number of growing modes is where a flow comes from data. What goes in: a flow with
 * directions of uncertainty. What comes out: standard deviations to the nearest change. Depends on
 * flow, index, status. */
#ifndef TWINHORIZON_COUNT_DISTANCE_H
#define TWINHORIZON_COUNT_DISTANCE_H

#include <twinhorizon/flow.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/**
 * How far the number of growing modes is from its nearest change, in standard deviations of the
 * flow's data: margin of the static index (index.h) over the root of the sum over all directions of
 * its squared slope. Below 2 or so another number is about as likely. To first order in the errors.
 *
 * @param[out] sigmas  > 0; HUGE_VAL when the margin does not move
 * @retval TH_ENONE    no directions, or no static index (ends that are not open and subsonic)
 * @retval TH_EINVAL   flow or sigmas is NULL, or the moved flow does not exist
 * @retval TH_EUNDECIDED, TH_ECONVERGE, TH_ENOMEM  as th_index_open, th_flow_vary
 * Cost: an index for each direction. Tests: tests/test_count_distance.c.
 */
TH_MUST_USE th_status th_count_distance(const th_flow *flow, double *sigmas, th_error *err);

#ifdef __cplusplus
}
#endif
#endif
