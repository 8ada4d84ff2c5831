/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The one door to LAPACK. Matrices are column-major. LAPACK's info > 0 (no convergence, singular)
 * and info < 0 (a bug of ours) stay apart. Depends on status. */
#ifndef TH_LAPACK_H
#define TH_LAPACK_H

#include <complex.h>
#include "twinhorizon/status.h"

/**
 * All eigenvalues of a real matrix, no vectors: balancing (permutation and scaling), Hessenberg
 * form, implicit QR (dgeev).
 * @param[in,out] a       [n, n], destroyed
 * @param[out]    lambda  [n], in LAPACK's order, conjugates adjacent
 * @retval TH_ECONVERGE  QR did not converge
 */
TH_MUST_USE th_status th_lapack_eigen_real(int n, double *a, double complex *lambda, th_error *err);

/** As th_lapack_eigen_real for a complex matrix (zgeev). */
TH_MUST_USE th_status th_lapack_eigen_complex(int n, double complex *a, double complex *lambda,
                                              th_error *err);

/**
 * LU factors of a band matrix (zgbtrf).
 * @param[in,out] band   [2 lower + upper + 1, n], LAPACK band form with `lower` spare rows on top
 * @param[out]    pivot  [n]
 * @retval TH_ECONVERGE  exactly singular
 */
TH_MUST_USE th_status th_lapack_band_factor(int n, int lower, int upper, double complex *band,
                                            int *pivot, th_error *err);

/** Solve with the factors in place (zgbtrs): A x = b, or A^T x = b (no conjugation) when
 * transposed. @param[in,out] b  [n] */
TH_MUST_USE th_status th_lapack_band_solve(int n, int lower, int upper, const double complex *band,
                                           const int *pivot, int transposed, double complex *b,
                                           th_error *err);

/** As th_lapack_band_factor for a real matrix (dgbtrf). */
TH_MUST_USE th_status th_lapack_band_factor_real(int n, int lower, int upper, double *band,
                                                 int *pivot, th_error *err);

/** Solve A X = B with the real factors in place (dgbtrs). @param[in,out] b  [n, count] */
TH_MUST_USE th_status th_lapack_band_solve_real(int n, int lower, int upper, const double *band,
                                                const int *pivot, int count, double *b,
                                                th_error *err);

/**
 * All eigenvalues of a real symmetric matrix, ascending (dsyev, no vectors).
 * @param[in,out] a  [n, n], lower triangle read, destroyed
 */
TH_MUST_USE th_status th_lapack_eigen_symmetric(int n, double *a, double *lambda, th_error *err);

#endif
