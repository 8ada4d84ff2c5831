/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Transfer over one step, with its derivative with respect to omega. Private to matching. Depends
 * on steps.
 *
 * State y = (eta, n eta', phi, n phi'); Y(t) is the fundamental matrix with Y(0) = 1 at the middle
 * of the step. Values and omega-derivatives go together. */
#ifndef TH_MATCHING_TRANSFER_H
#define TH_MATCHING_TRANSFER_H

#include <complex.h>
#include <stdbool.h>
#include "matching/steps.h"

typedef double complex th_matrix4[4][4]; /* [row][column] */

/* Fundamental matrix at both ends of a step and its omega-derivative (only when asked for). */
typedef struct {
    th_matrix4 left, right;
    th_matrix4 left_slope, right_slope;
} th_fundamental;

/**
 * @param[in] omega  scaled frequency
 * @retval TH_ECONVERGE  the series needs too many terms: |omega| half^2 is far too large
 * Equations: eta' = y2/n, y2' = 4 (-i omega n phi + J y4/n + n c^2 eta), phi' = y4/n,
 * y4' = i omega n eta - J y2/n.
 */
TH_MUST_USE th_status th_transfer_expand(const th_step *step, double flux, double complex omega,
                                         bool slope, th_fundamental *out, th_error *err);

/* Two solutions and their omega-derivatives, [solution][component]. */
typedef struct {
    double complex y[2][4], z[2][4];
} th_frame;

/** Carry a frame over the step: from its left end to its right end, or back. Does not fail: the
 * fundamental matrix has determinant one. */
void th_transfer_carry(const th_fundamental *f, bool backwards, bool slope, th_frame *frame);

/** The transfer matrix of a step, right end from left end, and its derivative. */
void th_transfer_matrix(const th_fundamental *f, bool slope, th_matrix4 value, th_matrix4 change);

#endif
