/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * det(M - 1) of a ring in cyclic form. Private to matching. Depends on transfer. */
#ifndef TH_MATCHING_RING_H
#define TH_MATCHING_RING_H

#include "matching/steps.h"
#include "matching/transfer.h"

/* A number and its omega-derivative, both times 2^exponent. */
typedef struct {
    double complex value, slope;
    long exponent;
} th_scaled;

/** Multiply by a factor with its derivative and renormalise. */
void th_scaled_times(th_scaled *a, double complex value, double complex slope);

/**
 * Determinant of the cyclic system y_{i+1} = T_i y_i, y_m = y_0 (up to a constant sign
 * det(M - 1), M = T_m ... T_1), by block elimination with row pivoting: no product of transfer
 * matrices is formed, so evanescent waves cannot overflow or drown the others.
 *
 * @param[in] omega  scaled
 * @retval TH_ECONVERGE  as th_transfer_expand
 */
TH_MUST_USE th_status th_ring_determinant(const th_steps *steps, double complex omega, bool slope,
                                          th_scaled *out, th_error *err);

#endif
