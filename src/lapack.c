/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The one file that includes lapacke.h. In: matrices. Out: eigenvalues, factors, solutions.
 * Calls LAPACK and status. Proof: tests/test_spectrum.c plants spectra and asks for them back. */
#include "lapack.h"

#include <lapacke.h>
#include <stdlib.h>

#include "alloc.h"

static th_status verdict(const char *routine, lapack_int info, int n, th_error *err)
{
    if (info == 0)
        return TH_OK;
    if (info == LAPACK_WORK_MEMORY_ERROR || info == LAPACK_TRANSPOSE_MEMORY_ERROR)
        return th_fail(err, TH_ENOMEM, "%s: workspace for n = %d", routine, n);
    if (info > 0)
        return th_fail(err, TH_ECONVERGE, "%s: no result for n = %d, info = %d", routine, n,
                       (int)info);
    return th_fail(err, TH_EBUG, "%s: argument %d rejected, n = %d", routine, (int)-info, n);
}

th_status th_lapack_eigen_real(int n, double *a, double complex *lambda, th_error *err)
{
    th_status st = TH_EBUG;
    double *re = th_alloc((size_t)n, sizeof *re), *im = th_alloc((size_t)n, sizeof *im);

    if (re == NULL || im == NULL) {
        st = th_fail(err, TH_ENOMEM, "dgeev: %d eigenvalues", n);
        goto done;
    }
    st = verdict("dgeev",
                 LAPACKE_dgeev(LAPACK_COL_MAJOR, 'N', 'N', n, a, n, re, im, NULL, 1, NULL, 1), n,
                 err);
    for (int i = 0; st == TH_OK && i < n; i++)
        lambda[i] = re[i] + I * im[i];
done:
    free(re);
    free(im);
    return st;
}

th_status th_lapack_eigen_complex(int n, double complex *a, double complex *lambda, th_error *err)
{
    return verdict("zgeev",
                   LAPACKE_zgeev(LAPACK_COL_MAJOR, 'N', 'N', n, a, n, lambda, NULL, 1, NULL, 1), n,
                   err);
}

th_status th_lapack_band_factor(int n, int lower, int upper, double complex *band, int *pivot,
                                th_error *err)
{
    return verdict(
        "zgbtrf",
        LAPACKE_zgbtrf(LAPACK_COL_MAJOR, n, n, lower, upper, band, 2 * lower + upper + 1, pivot), n,
        err);
}

th_status th_lapack_band_solve(int n, int lower, int upper, const double complex *band,
                               const int *pivot, int transposed, double complex *b, th_error *err)
{
    return verdict("zgbtrs",
                   LAPACKE_zgbtrs(LAPACK_COL_MAJOR, transposed ? 'T' : 'N', n, lower, upper, 1,
                                  band, 2 * lower + upper + 1, pivot, b, n),
                   n, err);
}

th_status th_lapack_band_factor_real(int n, int lower, int upper, double *band, int *pivot,
                                     th_error *err)
{
    return verdict(
        "dgbtrf",
        LAPACKE_dgbtrf(LAPACK_COL_MAJOR, n, n, lower, upper, band, 2 * lower + upper + 1, pivot), n,
        err);
}

th_status th_lapack_band_solve_real(int n, int lower, int upper, const double *band,
                                    const int *pivot, int count, double *b, th_error *err)
{
    return verdict("dgbtrs",
                   LAPACKE_dgbtrs(LAPACK_COL_MAJOR, 'N', n, lower, upper, count, band,
                                  2 * lower + upper + 1, pivot, b, n),
                   n, err);
}

th_status th_lapack_eigen_symmetric(int n, double *a, double *lambda, th_error *err)
{
    return verdict("dsyev", LAPACKE_dsyev(LAPACK_COL_MAJOR, 'N', 'L', n, a, n, lambda), n, err);
}
