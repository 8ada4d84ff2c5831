/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Waves on a uniform flow, private to the library. Depends on status. */
#ifndef TH_DISPERSION_H
#define TH_DISPERSION_H

#include <complex.h>
#include "twinhorizon/status.h"

/**
 * The four wave numbers at a frequency: roots of (omega - v k)^2 = c^2 k^2 + k^4/4.
 *
 * @param[in]  omega  any finite complex frequency
 * @param[in]  v, c   speed and sound speed, c > 0
 * @param[out] k      [4] ordered by falling imaginary part, then falling real part
 * @param[out] err    message on failure; may be NULL
 *
 * @retval TH_OK         each root satisfies the equation to a few units of rounding
 * @retval TH_ECONVERGE  never seen; values that are not finite end here
 *
 * For Im omega > 0 exactly two roots have Im k > 0, whatever v/c (DEVELOPERS.md, "Ends").
 * Source: Bogoliubov dispersion relation in a moving frame, hbar = m = 1.
 */
TH_MUST_USE th_status th_dispersion_roots(double complex omega, double v, double c,
                                          double complex k[4], th_error *err);

#endif
