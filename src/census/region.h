/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The certified region with the samples on its contour. Private to census. */
#ifndef TH_CENSUS_REGION_H
#define TH_CENSUS_REGION_H

#include "census/path.h"
#include "twinhorizon/census.h"

typedef struct {
    th_workspace *workspace; /* the flow's */
    th_census census;
    th_path bottom; /* from Re omega = 0 to re_max */
    th_path lid;    /* up the right side and back along the top to Re omega = 0 */
} th_region;

/** Count; the region keeps its samples. Clear it in any case. Errors as th_census_count. */
TH_MUST_USE th_status th_region_count(const th_flow *flow, const th_matching *matching,
                                      double omega_top, th_region *r, th_error *err);

void th_region_clear(th_region *r);

#endif
