/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Fluctuations of the equilibrium state of Q. In: the Bogoliubov matrix, vectors, a temperature.
 * Out: covariances. Calls lapack.
 * Symbols: q, p scaled eta and phi, [q, p'] = i; A = C + S/4 and B = S the scaled forms of Q, so
 * that Q = (q^T A q + p^T B p)/2; Omega normal frequencies; T temperature; s imaginary frequency.
 *
 * A normal mode (a, b numbers) has <q q> = b coth(Omega/2T)/(2 Omega), Omega^2 = a b, and
 * coth is the sum over its poles: <z z^T> = T Sum_m G(2 pi T m), m = all integers,
 *     G(s) = [A s; -s B]^{-1},   G's part even in s is meant                                    (1)
 * for z = (q, p): T Sum 1/(a + s^2/b). This holds for matrices as it stands, needs no eigenvectors,
 * and G is a band matrix to be solved with. At T = 0 the sum is the integral (1/pi) Int_0^oo G ds.
 * At T > 0 the first terms are summed and the rest is an integral by the formula of Euler and
 * Maclaurin (NBS AMS 55, 25.4.7): G is analytic but on the imaginary axis, so that on the scale of
 * s its derivatives are tame. For the integral s = s0 + e^u and the trapezoidal rule, which errs by
 * e^{-pi^2/step}: the nearest singularity is at Im u = pi/2.
 * A constant phase costs no Q: G(0) is large there. Growing modes do not overlap with it (their
 * mass Int n eta vanishes). Proof: tests/test_seed.c, tests/check_seed.py. */
#include <gsl/gsl_math.h>
#include <stdlib.h>
#include <string.h>

#include "alloc.h"
#include "lapack.h"
#include "seed/inside.h"

/* Terms summed one by one: up to `joint`, and three more for differences about it. Seven-point
 * differences at the 8th of equidistant points of a function that varies on the scale of its
 * argument: relative errors (3/8)^7/140/12 of one term, 1e-6. */
enum { JOINT = 8, SIDE = 3 };
/* The integral over e^u starts and ends this factor beyond the rates that matter; what lies outside
 * is the sum of the geometric series that the trapezoidal rule has there. */
static const double beyond = 1e3;

typedef struct {
    const th_operator *op;
    int count;
    const double *r;                 /* [size, count] */
    double *band, *solution, *total; /* total [count, count] */
    int *pivot;
} summation;

/* G(s)^{-1} in LAPACK band form, from the entries of the operator's rows:
 * row of eta = [-V, S], row of phi = [-C - S/4, -V]. */
static void fill(summation *w, double s)
{
    const th_operator *op = w->op;
    const size_t height = 2 * (size_t)op->lower + (size_t)op->upper + 1;
    const int diagonal = op->lower + op->upper;

    memset(w->band, 0, height * (size_t)op->size * sizeof *w->band);
    for (int i = 0; i < op->size; i++) {
        const int partner = i ^ 1;

        for (int e = op->start[partner]; e < op->start[partner + 1]; e++) {
            const int j = op->column[e];

            if ((j ^ i) & 1) /* advection is no part of Q */
                continue;
            w->band[(size_t)(diagonal + i - j) + height * (size_t)j] =
                i % 2 == 0 ? -creal(op->value[e]) : creal(op->value[e]);
        }
        w->band[(size_t)(diagonal + i - partner) + height * (size_t)partner] = i % 2 == 0 ? s : -s;
    }
}

/* total += weight r^T G(s) r, even part */
static th_status add(summation *w, double s, double weight, th_error *err)
{
    const th_operator *op = w->op;
    const size_t size = (size_t)op->size, count = (size_t)w->count;
    th_status st;

    fill(w, s);
    memcpy(w->solution, w->r, size * count * sizeof *w->solution);
    st = th_lapack_band_factor_real(op->size, op->lower, op->upper, w->band, w->pivot, err);
    if (st == TH_OK)
        st = th_lapack_band_solve_real(op->size, op->lower, op->upper, w->band, w->pivot, w->count,
                                       w->solution, err);
    for (size_t a = 0; st == TH_OK && a < count; a++)
        for (size_t b = 0; b < count; b++) {
            double sum = 0.0;

            for (size_t i = 0; i < size; i++)
                sum += w->r[i + size * a] * w->solution[i + size * b];
            w->total[a + count * b] += 0.5 * weight * sum; /* the odd part is antisymmetric */
            w->total[b + count * a] += 0.5 * weight * sum;
        }
    return st;
}

/* (1/pi) Int_{s0}^oo G ds */
static th_status integrate(summation *w, double s0, double slow, double fast, double step,
                           th_error *err)
{
    const double low = log(fmax(s0, slow) / beyond), high = log(fmax(s0, fast) * beyond);
    const int intervals = (int)ceil((high - low) / step);
    const double h = (high - low) / intervals;
    th_status st = TH_OK;

    for (int i = 0; st == TH_OK && i <= intervals; i++) {
        const double e = exp(low + h * i);
        const double rest = i == 0 || i == intervals ? 1.0 / -expm1(-h) : 1.0;

        st = add(w, s0 + e, rest * h * e / M_PI, err);
    }
    return st;
}

/* Weight of G(2 pi T m) in the units of 2 T: the trapezoidal rule up to JOINT and the terms
 * -h f'/12 + h^3 f'''/720 - h^5 f'''''/30240 of Euler and Maclaurin at JOINT by central differences
 * (coefficients of the interpolating polynomial on seven points). */
static double explicit_weight(int m)
{
    static const double first[2 * SIDE + 1] = {-1.0 / 60, 9.0 / 60,  -45.0 / 60, 0.0,
                                               45.0 / 60, -9.0 / 60, 1.0 / 60};
    static const double third[2 * SIDE + 1] = {1.0 / 8,   -1.0, 13.0 / 8, 0.0,
                                               -13.0 / 8, 1.0,  -1.0 / 8};
    static const double fifth[2 * SIDE + 1] = {-0.5, 2.0, -2.5, 0.0, 2.5, -2.0, 0.5};
    const int at = m - JOINT + SIDE;
    double weight = m == 0 || m == JOINT ? 0.5 : m < JOINT ? 1.0 : 0.0;

    if (at >= 0)
        weight += -first[at] / 12.0 + third[at] / 720.0 - fifth[at] / 30240.0;
    return weight;
}

th_status th_seed_state(const th_operator *op, double temperature, double slow, double fast,
                        double step, int count, const double *r, double *covariance, th_error *err)
{
    const size_t size = (size_t)op->size;
    const double spacing = 2.0 * M_PI * temperature;
    summation w = {.op = op, .count = count, .r = r, .total = covariance};
    th_status st = TH_OK;

    memset(covariance, 0, (size_t)count * (size_t)count * sizeof *covariance);
    w.band = th_alloc((2 * (size_t)op->lower + (size_t)op->upper + 1) * size, sizeof *w.band);
    w.solution = th_alloc(size * (size_t)count, sizeof *w.solution);
    w.pivot = th_alloc(size, sizeof *w.pivot);
    if (w.band == NULL || w.solution == NULL || w.pivot == NULL) {
        st = th_fail(err, TH_ENOMEM, "seed: band factors of %d unknowns", op->size);
        goto done;
    }
    for (int m = 0; temperature > 0.0 && st == TH_OK && m <= JOINT + SIDE; m++)
        st = add(&w, spacing * m, 2.0 * temperature * explicit_weight(m), err);
    if (st == TH_OK)
        st = integrate(&w, spacing * JOINT, slow, fast, step, err);
done:
    free(w.band);
    free(w.solution);
    free(w.pivot);
    return st;
}
