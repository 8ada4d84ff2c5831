/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The share of growing modes in the initial state. In: a flow, frequencies, a temperature. Out:
 * mode shapes and the covariance of the modes' amplitudes. Calls line, state, spectrum. Symbols: z
 * scaled unknowns (eta, phi times sqrt(mass)), z_t = A z, A = J H with J = [0 1; -1 0]; x
 * eigenvector at omega, x* the partner's at omega*; y left eigenvector; b amplitude. A is real, H
 * symmetric: conj(x*) belongs to -i omega, so that H conj(x*) = i omega J^{-1} conj(x*) and y =
 * J^{-1} conj(x*) satisfies A^T y = -i omega y. The initial state holds b = y^T z/(y^T x) of the
 * mode: b x e^{-i omega t} grows, the partner's share dies. Proof: tests/check_seed.py. */
#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "alloc.h"
#include "seed/inside.h"
#include "spectrum.h"

/* An eigenvalue on these elements is the mode's when it is this close, relative to its growth rate:
 * what the far ends reflect is below a hundredth of that. */
static const double same_growth = 1e-2;

static th_status find(const th_operator *op, double complex omega, th_eigenpair *pair,
                      th_error *err)
{
    th_status st = th_spectrum_refine(op, omega, pair, err);

    if (st == TH_OK && !(cabs(pair->omega - omega) <= same_growth * fabs(cimag(omega))))
        st = th_fail(err, TH_EUNDECIDED,
                     "seed: no mode of the real line at omega = %g%+gi; %g%+gi is nearest",
                     creal(omega), cimag(omega), creal(pair->omega), cimag(pair->omega));
    return st;
}

/* A purely growing mode is real: turn the factor that the eigensolver left free. */
static void make_real(int n, double complex *x)
{
    int top = 0;
    double complex turn;

    for (int i = 1; i < n; i++)
        if (cabs(x[i]) > cabs(x[top]))
            top = i;
    turn = conj(x[top]) / cabs(x[top]);
    for (int i = 0; i < n; i++)
        x[i] = creal(turn * x[i]);
}

/* Left eigenvector over y^T x into the two columns of r: its real and imaginary part. */
static void put_left(int n, const double complex *x, const double complex *partner, double *r)
{
    double complex product = 0.0;

    for (int i = 0; i < n; i += 2) /* y = J^{-1} conj(partner) = (-phi, eta) */
        product += -conj(partner[i + 1]) * x[i] + conj(partner[i]) * x[i + 1];
    for (int i = 0; i < n; i += 2) {
        const double complex y_eta = -conj(partner[i + 1]) / product;
        const double complex y_phi = conj(partner[i]) / product;

        r[i] = creal(y_eta);
        r[i + 1] = creal(y_phi);
        r[n + i] = cimag(y_eta);
        r[n + i + 1] = cimag(y_phi);
    }
}

static void put_shape(const th_mesh *mesh, const th_operator *op, const double complex *x,
                      double complex *eta)
{
    const int nodes = mesh->elements * (mesh->rule.order + 1);

    for (int at = 0; at < nodes; at++)
        if (op->slot[at] >= 0)
            eta[at] = x[2 * op->slot[at]] / creal(csqrt(op->mass[op->slot[at]]));
}

static th_status put_mode(const th_operator *op, double complex omega, int j, double *left,
                          th_seed_answer *out, th_error *err)
{
    const size_t nodes = (size_t)out->mesh->elements * (size_t)(out->mesh->rule.order + 1);
    th_eigenpair mode = {0}, partner = {0};
    th_status st = find(op, omega, &mode, err);

    if (st == TH_OK)
        st = find(op, conj(omega), &partner, err);
    if (st != TH_OK)
        goto done;
    if (creal(omega) == 0.0) {
        make_real(op->size, mode.right);
        make_real(op->size, partner.right);
    }
    put_left(op->size, mode.right, partner.right, left + 2 * (size_t)j * (size_t)op->size);
    put_shape(out->mesh, op, mode.right, out->eta + nodes * (size_t)j);
done:
    th_eigenpair_clear(&mode);
    th_eigenpair_clear(&partner);
    return st;
}

/* Rates between which the modes' left eigenvectors vary in time under Q: that of the slowest
 * mode's tail, which is as long as its growth takes, and that of the healing length. */
static void find_rates(const th_seed_answer *out, const double complex *omega, double *slow,
                       double *fast)
{
    const int nodes = out->mesh->elements * (out->mesh->rule.order + 1);

    *slow = HUGE_VAL;
    *fast = 0.0;
    for (int j = 0; j < out->known; j++) {
        *slow = fmin(*slow, cimag(omega[j]));
        *fast = fmax(*fast, cabs(omega[j]));
    }
    for (int i = 0; i < nodes; i++)
        *fast = fmax(*fast, out->mesh->sound2[i]);
}

th_status th_seed_project(const th_flow *flow, const th_seed_level *level, double temperature,
                          int count, const double complex *omega, th_seed_answer *out,
                          th_error *err)
{
    th_status st = TH_OK;
    th_operator *op = NULL;
    double *left = NULL;
    double slow, fast;
    size_t nodes, vectors;

    *out = (th_seed_answer){.known = count};
    for (; out->known > 0; out->known--) { /* leave the slowest out until the rest fits */
        st = th_seed_line(flow, level, out->known, omega, &out->mesh, err);
        if (st != TH_OK || out->mesh != NULL)
            break;
    }
    if (st != TH_OK || out->known == 0)
        return st;
    nodes = (size_t)out->mesh->elements * (size_t)(out->mesh->rule.order + 1);
    vectors = 2 * (size_t)out->known;
    st = th_operator_create(out->mesh, &op, err);
    if (st != TH_OK)
        goto done;
    left = th_alloc((size_t)op->size * vectors, sizeof *left);
    out->eta = th_alloc(nodes * (size_t)out->known, sizeof *out->eta);
    out->covariance = th_alloc(vectors * vectors, sizeof *out->covariance);
    if (left == NULL || out->eta == NULL || out->covariance == NULL) {
        st = th_fail(err, TH_ENOMEM, "seed: %d modes of %d unknowns", out->known, op->size);
        goto done;
    }
    for (int j = 0; st == TH_OK && j < out->known; j++)
        st = put_mode(op, omega[j], j, left, out, err);
    if (st != TH_OK)
        goto done;
    find_rates(out, omega, &slow, &fast);
    st = th_seed_state(op, temperature, slow, fast, level->step, (int)vectors, left,
                       out->covariance, err);
done:
    free(left);
    th_operator_destroy(op);
    if (st != TH_OK)
        th_seed_answer_clear(out);
    return st;
}

void th_seed_answer_clear(th_seed_answer *answer)
{
    th_mesh_destroy(answer->mesh);
    free(answer->eta);
    free(answer->covariance);
    *answer = (th_seed_answer){0};
}

double complex th_seed_eta(const th_seed_answer *answer, int j, double x)
{
    const th_mesh *m = answer->mesh;
    const int nodes = m->rule.order + 1;
    const th_element *el;
    const double complex *eta;
    double re[TH_GLL_ORDER_MAX + 1], im[TH_GLL_ORDER_MAX + 1], z;
    int low = 0, high = m->elements - 1;

    while (low < high) {
        const int middle = low + (high - low + 1) / 2;

        if (m->element[middle].left <= x)
            low = middle;
        else
            high = middle - 1;
    }
    el = &m->element[low];
    if (x < el->left || x > el->left + el->length)
        return 0.0;
    eta = answer->eta + (size_t)nodes * ((size_t)j * (size_t)m->elements + (size_t)low);
    for (int i = 0; i < nodes; i++) {
        re[i] = creal(eta[i]);
        im[i] = cimag(eta[i]);
    }
    z = 2.0 * (x - el->left) / el->length - 1.0;
    return th_gll_interpolate(&m->rule, re, z) + I * th_gll_interpolate(&m->rule, im, z);
}
