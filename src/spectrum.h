/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Eigenvalues of the Bogoliubov matrix. Depends on operator, lapack, status. */
#ifndef TH_SPECTRUM_H
#define TH_SPECTRUM_H

#include <complex.h>
#include "operator.h"
#include "twinhorizon/status.h"

/**
 * All frequencies of a matrix by the dense QR algorithm, without vectors. Real arithmetic where A
 * is real. On a ring the phase zero mode and its partner, the shift of chemical potential, are
 * deflated exactly beforehand: they are not in the result.
 *
 * @param[out] omega  [count] omega = i lambda, sorted by falling Im, then rising Re; the caller
 *                    frees it
 * @retval TH_ENOMEM, TH_ECONVERGE
 */
TH_MUST_USE th_status th_spectrum_all(const th_operator *op, double complex **omega, int *count,
                                      th_error *err);

/* One eigenpair. Vectors are in the scaled unknowns of the operator. */
typedef struct {
    double complex omega;
    double complex *right; /* [size] 2-norm 1 */
    double condition;      /* |left| |right| / |left^T right|, >= 1 */
    double residual;       /* |A right - lambda right| / norm of A */
    double rounding;       /* what rounding of A can do to omega: eps |left| |A| |right| /
                              |left^T right| */
} th_eigenpair;

/**
 * The eigenpair nearest to a frequency by two-sided Rayleigh quotient iteration on band factors.
 *
 * @param[in]  guess  frequency; should be close to an eigenvalue
 * @param[out] pair   release pair->right with th_eigenpair_clear; after a failure it holds nothing
 * @retval TH_ECONVERGE  the iteration did not settle
 * What success does not prove: that omega is the eigenvalue meant; compare it with the guess.
 */
TH_MUST_USE th_status th_spectrum_refine(const th_operator *op, double complex guess,
                                         th_eigenpair *pair, th_error *err);

/** Release the vectors of a pair. */
void th_eigenpair_clear(th_eigenpair *pair);

#endif
