/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Outgoing waves of a uniform end. Private to matching. Depends on transfer, dispersion. */
#ifndef TH_MATCHING_ENDS_H
#define TH_MATCHING_ENDS_H

#include <complex.h>
#include "matching/transfer.h"

/* A uniform end in scaled units. */
typedef struct {
    double density, speed, sound;
    int side; /* -1 left, +1 right */
} th_end;

/* Sum of the wave numbers of the outgoing pair, and its omega-derivative. */
typedef struct {
    double complex value, slope;
} th_pair_sum;

/**
 * The two solutions that leave through an end, as a frame that is analytic in omega, with its
 * derivative. Their wedge product is that of u(k1) and u(k2) over (k1 - k2), with
 * u(k) = (k, i n k^2, -i (omega/k - v), n (omega - v k)).
 *
 * @param[in]  omega  scaled, not zero
 * @param[out] out    the frame
 * @param[out] sum    k1 + k2, analytic in omega too
 * @retval TH_ECONVERGE  the waves cannot be told apart or followed below the real axis
 */
TH_MUST_USE th_status th_end_frame(const th_end *end, double complex omega, th_frame *out,
                                   th_pair_sum *sum, th_error *err);

#endif
