/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Eigenvalues: all of them by dense QR, one of them with its vectors on band factors. In: the
 * operator. Out: frequencies omega = i lambda. Calls operator and lapack.
 * Symbols: A matrix, lambda eigenvalue, x right and y left vector, y^T A = lambda y^T (transpose,
 * not adjoint: on rotated ends A is not Hermitian in any useful sense).
 * Proof: tests/test_spectrum.c. */
#include "spectrum.h"

#include <float.h>
#include <gsl/gsl_math.h>
#include <stdlib.h>
#include <string.h>

#include "alloc.h"
#include "lapack.h"

/* Apply the reflection 1 - 2 u u^T on the slots of one field, from the left and from the right.
 * u [nodes] real, unit length; a [n, n] column-major, n = 2 nodes. */
static void reflect(int nodes, const double *u, int field, double *a)
{
    const size_t n = 2 * (size_t)nodes;

    for (size_t j = 0; j < n; j++) {
        double sum = 0.0;

        for (int s = 0; s < nodes; s++)
            sum += u[s] * a[2 * (size_t)s + (size_t)field + n * j];
        for (int s = 0; s < nodes; s++)
            a[2 * (size_t)s + (size_t)field + n * j] -= 2.0 * sum * u[s];
    }
    for (size_t i = 0; i < n; i++) {
        double sum = 0.0;

        for (int s = 0; s < nodes; s++)
            sum += u[s] * a[i + n * (2 * (size_t)s + (size_t)field)];
        for (int s = 0; s < nodes; s++)
            a[i + n * (2 * (size_t)s + (size_t)field)] -= 2.0 * sum * u[s];
    }
}

/* Ring: a constant phase, e = sqrt(mass) in the field phi, is an exact right null vector of A, and
 * e in the field eta (total mass) an exact left one. Fluctuations with e^T eta = 0, taken modulo
 * a constant phase, are the physical ones; a reflection that maps e to slot 0 in both fields
 * turns the restriction into striking out the rows and columns of slot 0. */
static th_status deflate(const th_operator *op, double *a, int *size, th_error *err)
{
    const int nodes = op->nodes;
    const size_t n = 2 * (size_t)nodes, m = n - 2;
    double *u = th_alloc((size_t)nodes, sizeof *u), norm = 0.0;

    if (u == NULL)
        return th_fail(err, TH_ENOMEM, "spectrum: %d numbers of workspace", nodes);
    for (int s = 0; s < nodes; s++)
        norm += creal(op->mass[s]);
    for (int s = 0; s < nodes; s++)
        u[s] = sqrt(creal(op->mass[s]) / norm);
    u[0] += 1.0; /* Householder: u = e + (1, 0, ...) */
    norm = 0.0;
    for (int s = 0; s < nodes; s++)
        norm += u[s] * u[s];
    for (int s = 0; s < nodes; s++)
        u[s] /= sqrt(norm);
    reflect(nodes, u, 0, a);
    reflect(nodes, u, 1, a);
    for (size_t j = 0; j < m; j++)
        memmove(a + m * j, a + 2 + n * (j + 2), m * sizeof *a);
    *size = (int)m;
    free(u);
    return TH_OK;
}

static int by_growth(const void *a, const void *b)
{
    const double complex x = *(const double complex *)a, y = *(const double complex *)b;

    if (cimag(x) != cimag(y))
        return cimag(x) > cimag(y) ? -1 : 1;
    return (creal(x) > creal(y)) - (creal(x) < creal(y));
}

th_status th_spectrum_all(const th_operator *op, double complex **omega, int *count, th_error *err)
{
    th_status st = TH_EBUG;
    const size_t entries = (size_t)op->size * (size_t)op->size;
    double complex *a = NULL, *lambda = NULL;
    double *real = NULL;
    int size = op->size;

    *omega = NULL;
    *count = 0;
    a = th_alloc(entries, op->real ? sizeof *real : sizeof *a);
    lambda = th_alloc((size_t)size, sizeof *lambda);
    if (a == NULL || lambda == NULL) {
        st = th_fail(err, TH_ENOMEM, "spectrum: a dense matrix of %d unknowns", size);
        goto done;
    }
    if (op->real) {
        real = (double *)a;
        th_operator_dense_real(op, real);
        st = op->ring ? deflate(op, real, &size, err) : TH_OK;
        if (st != TH_OK)
            goto done;
        st = th_lapack_eigen_real(size, real, lambda, err);
    } else {
        th_operator_dense(op, a);
        st = th_lapack_eigen_complex(size, a, lambda, err);
    }
    if (st != TH_OK)
        goto done;
    for (int i = 0; i < size; i++)
        lambda[i] *= I;
    qsort(lambda, (size_t)size, sizeof *lambda, by_growth);
    *omega = lambda;
    *count = size;
    lambda = NULL;
done:
    free(a);
    free(lambda);
    return st;
}

static double length(const double complex *x, int n)
{
    double sum = 0.0;

    for (int i = 0; i < n; i++)
        sum += creal(x[i]) * creal(x[i]) + cimag(x[i]) * cimag(x[i]);
    return sqrt(sum);
}

static void normalise(double complex *x, int n)
{
    const double size = length(x, n);

    for (int i = 0; i < n; i++)
        x[i] /= size;
}

static double complex product(const double complex *y, const double complex *x, int n)
{
    double complex sum = 0.0;

    for (int i = 0; i < n; i++)
        sum += y[i] * x[i];
    return sum;
}

/* A start vector without symmetry, the same in every run: a linear congruential sequence
 * modulo 2^32. */
static void scatter(double complex *x, int n)
{
    unsigned long state = 20011u;

    for (int i = 0; i < n; i++) {
        double part[2];

        for (int k = 0; k < 2; k++) {
            state = (1664525ul * state + 1013904223ul) & 0xfffffffful;
            part[k] = (double)state / 4294967296.0 - 0.5;
        }
        x[i] = part[0] + I * part[1];
    }
}

typedef struct {
    const th_operator *op;
    double complex *band; /* [2 lower + upper + 1, size] */
    int *pivot;           /* [size] */
    double complex *x, *y, *image;
} iteration;

/* Factor A - shift; an exactly singular matrix is moved off by a rounding error. */
static th_status factor(iteration *it, double complex shift, double size_of_a, th_error *err)
{
    const th_operator *op = it->op;
    th_status st = TH_ECONVERGE;

    for (int attempt = 0; st == TH_ECONVERGE && attempt < 4; attempt++) {
        th_operator_band(op, shift, it->band);
        st = th_lapack_band_factor(op->size, op->lower, op->upper, it->band, it->pivot, err);
        shift += DBL_EPSILON * size_of_a;
    }
    return st;
}

static th_status improve(iteration *it, double complex *lambda, th_error *err)
{
    const th_operator *op = it->op;
    th_status st =
        th_lapack_band_solve(op->size, op->lower, op->upper, it->band, it->pivot, 0, it->x, err);

    if (st == TH_OK)
        st = th_lapack_band_solve(op->size, op->lower, op->upper, it->band, it->pivot, 1, it->y,
                                  err);
    if (st != TH_OK)
        return st;
    normalise(it->x, op->size);
    normalise(it->y, op->size);
    th_operator_apply(op, false, it->x, it->image);
    *lambda = product(it->y, it->image, op->size) / product(it->y, it->x, op->size);
    if (!isfinite(creal(*lambda)) || !isfinite(cimag(*lambda)))
        return th_fail(err, TH_ECONVERGE, "spectrum: a defective eigenvalue");
    return TH_OK;
}

th_status th_spectrum_refine(const th_operator *op, double complex guess, th_eigenpair *pair,
                             th_error *err)
{
    const size_t n = (size_t)op->size;
    const double size_of_a = th_operator_norm(op);
    const int solves = 3;  /* inverse iterations at one shift; each gains the ratio of distances */
    const int shifts = 12; /* Rayleigh shifts: cubic convergence, two or three are the rule */
    th_status st = TH_EBUG;
    iteration it = {.op = op};
    double complex shift = guess / I, lambda = shift, last = shift;
    bool settled = false;

    memset(pair, 0, sizeof *pair);
    it.band = th_alloc((2 * (size_t)op->lower + (size_t)op->upper + 1) * n, sizeof *it.band);
    it.pivot = th_alloc(n, sizeof *it.pivot);
    it.x = th_alloc(n, sizeof *it.x);
    it.y = th_alloc(n, sizeof *it.y);
    it.image = th_alloc(n, sizeof *it.image);
    if (it.band == NULL || it.pivot == NULL || it.x == NULL || it.y == NULL || it.image == NULL) {
        st = th_fail(err, TH_ENOMEM, "spectrum: band factors of %d unknowns", op->size);
        goto done;
    }
    scatter(it.x, op->size);
    scatter(it.y, op->size);
    for (int k = 0; !settled && k < shifts; k++) {
        st = factor(&it, shift, size_of_a, err);
        for (int i = 0; st == TH_OK && i < solves; i++) {
            last = lambda;
            st = improve(&it, &lambda, err);
        }
        if (st != TH_OK)
            goto done;
        shift = lambda;
        pair->condition = 1.0 / cabs(product(it.y, it.x, op->size));
        pair->rounding = DBL_EPSILON * th_operator_bound(op, it.y, it.x) * pair->condition;
        settled = cabs(lambda - last) <= fmax(pair->rounding, 4.0 * DBL_EPSILON * cabs(lambda));
    }
    if (!settled) {
        st = th_fail(err, TH_ECONVERGE, "spectrum: no eigenvalue settled near omega = %g%+gi",
                     creal(guess), cimag(guess));
        goto done;
    }
    th_operator_apply(op, false, it.x, it.image);
    for (size_t i = 0; i < n; i++)
        it.image[i] -= lambda * it.x[i];
    pair->omega = I * lambda;
    pair->residual = length(it.image, op->size) / size_of_a;
    pair->right = it.x;
    it.x = NULL;
done:
    free(it.band);
    free(it.pivot);
    free(it.x);
    free(it.y);
    free(it.image);
    return st;
}

void th_eigenpair_clear(th_eigenpair *pair)
{
    free(pair->right);
    pair->right = NULL;
}
