/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A mode to the last digits, with its error bar. Private to modes and point. Depends on matching.
 */
#ifndef TH_MODES_POLISH_H
#define TH_MODES_POLISH_H

#include <complex.h>
#include "twinhorizon/flow.h"
#include "twinhorizon/matching.h"

/**
 * Polish a root on two grains of the matching function.
 *
 * @param[in]  scale      of rounding errors: th_polish_scale
 * @param[in]  from       start
 * @param[in]  reach      largest distance of the root from it
 * @param[out] root       on the fine grain
 * @param[out] error      twice the sum of the difference of the grains and Newton's last step, plus
 *                        rounding
 * @retval TH_ECONVERGE  no root within reach on one of them
 */
TH_MUST_USE th_status th_polish(const th_matching *usual, const th_matching *fine, double scale,
                                double complex from, double reach, double complex *root,
                                double *error);

/** Frequency to which rounding errors of roots are relative: the top of the band, or a quarter of
 * c^2 where that is larger. */
double th_polish_scale(const th_flow *flow, double omega_top);

#endif
