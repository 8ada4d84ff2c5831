/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The shape of a mode in space. In: a flow, a frequency, positions. Out: eta and phi there. Calls
 * modes (level, field), spectrum.
 * The vector comes from the check level, the finest that th_solve uses. Symbols: eta, phi density
 * and phase fluctuation. Proof: tests/test_profile.c. */
#include "twinhorizon/profile.h"

#include <complex.h>
#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "modes/field.h"
#include "modes/solver.h"
#include "spectrum.h"

/* The eigenvalue must lie this close to the frequency asked for, relative to it: as close as the
 * two levels of th_solve. */
static const double same_mode = 1e-3;
/* |eta| this close to the largest counts as largest: mirror images differ by what the two sides of
 * the mesh make of them, 1e-12, and a grid that is symmetric to rounding should not choose. */
static const double tie = 1e-6;

static th_status check(const th_flow *flow, const th_solve_options *options, double complex omega,
                       int count, const double *x, th_error *err)
{
    if (flow == NULL || options == NULL || count < 1 || x == NULL)
        return th_fail(err, TH_EINVAL,
                       "profile: count = %d, want count >= 1, positions, a flow and options",
                       count);
    if (!(options->accuracy >= 1e-12 && options->accuracy <= 1e-3))
        return th_fail(err, TH_EINVAL, "profile: accuracy = %g, want 1e-12 to 1e-3",
                       options->accuracy);
    if (!isfinite(creal(omega)) || !isfinite(cimag(omega)) || omega == 0.0)
        return th_fail(err, TH_EINVAL, "profile: omega = %g%+gi, want a finite one, not zero",
                       creal(omega), cimag(omega));
    for (int i = 0; i < count; i++)
        if (!isfinite(x[i]))
            return th_fail(err, TH_EINVAL, "profile: x[%d] = %g, want a finite position", i, x[i]);
    return TH_OK;
}

/* The eigenpair next to omega, on a level whose ends resolve it. */
static th_status find_pair(const th_flow *flow, double accuracy, double complex omega,
                           th_level *level, th_eigenpair *pair, th_error *err)
{
    const double top = th_flow_band_limit(flow);
    int attempt = 0;
    th_status st;

    while (th_matrix_reach(attempt + 1) > 0.0 && th_matrix_reach(attempt) * top > cabs(omega))
        attempt++;
    st = th_level_create(flow, TH_LEVEL_CHECK, accuracy, fmax(top, fabs(creal(omega))),
                         th_matrix_reach(attempt) * top, level, err);
    if (st == TH_OK)
        st = th_spectrum_refine(level->op, omega, pair, err);
    if (st == TH_OK && cabs(pair->omega - omega) > same_mode * cabs(omega))
        st = th_fail(err, TH_ENONE,
                     "profile: the matrix has no mode at omega = %g%+gi; %g%+gi is nearest",
                     creal(omega), cimag(omega), creal(pair->omega), cimag(pair->omega));
    return st;
}

/* The inside element that holds x. */
static int element_at(const th_mesh *m, double x)
{
    int low = m->first_inside, high = m->last_inside;

    while (low < high) {
        const int middle = low + (high - low + 1) / 2;

        if (m->element[middle].left <= x)
            low = middle;
        else
            high = middle - 1;
    }
    return low;
}

/* The fields at the positions, unscaled. */
static th_status sample_all(const th_field *f, int count, const double *x, double *eta_re,
                            double *eta_im, double *phi_re, double *phi_im, th_error *err)
{
    const th_ends ends = th_flow_ends(f->flow);
    th_field_tail tail[2] = {{0}, {0}}; /* left, right */
    const double *edge;
    int edges;

    edge = th_flow_edges(f->flow, &edges);
    for (int i = 0; i < count; i++) {
        const double left = edge[0], right = edge[edges - 1];
        double at = x[i];
        th_field_sample s = {0};

        if (ends.kind == TH_ENDS_RING && (at < left || at > right))
            at -= ends.circumference * floor((at - left) / ends.circumference);
        if (at >= left && at <= right) {
            s = th_field_inside(f, element_at(f->mesh, at), at);
        } else if (ends.kind == TH_ENDS_OPEN) {
            th_field_tail *t = &tail[at > right];

            if (!t->known) {
                const th_status st = th_field_tail_find(f, at > right ? 1 : -1, t, err);

                if (st != TH_OK)
                    return st;
            }
            if (!t->known)
                return th_fail(err, TH_EUNDECIDED,
                               "profile: the waves of omega = %g%+gi beyond the %s end are not "
                               "known: it is damped too strongly",
                               creal(f->omega), cimag(f->omega), at > right ? "right" : "left");
            s = th_field_outside(t, at > right ? at - right : left - at);
        }
        eta_re[i] = creal(s.eta);
        eta_im[i] = cimag(s.eta);
        phi_re[i] = creal(s.phi);
        phi_im[i] = cimag(s.phi);
        if (!isfinite(hypot(eta_re[i], eta_im[i])) || !isfinite(hypot(phi_re[i], phi_im[i])))
            return th_fail(err, TH_ENONE,
                           "profile: the mode at x = %g is beyond the range of numbers", x[i]);
    }
    return TH_OK;
}

static void multiply(double complex factor, double *re, double *im)
{
    const double complex product = factor * (*re + I * *im);

    *re = creal(product);
    *im = cimag(product);
}

static th_status normalise(int count, double *eta_re, double *eta_im, double *phi_re,
                           double *phi_im, th_error *err)
{
    double largest = 0.0;
    double complex factor;
    int first = 0;

    for (int i = 0; i < count; i++)
        largest = fmax(largest, hypot(eta_re[i], eta_im[i]));
    if (largest == 0.0)
        return th_fail(err, TH_ENONE, "profile: the mode is zero on all %d positions", count);
    while (hypot(eta_re[first], eta_im[first]) < (1.0 - tie) * largest)
        first++;
    factor = eta_re[first] - I * eta_im[first];
    factor /= cabs(factor);
    for (int i = 0; i < count; i++) {
        multiply(factor, &eta_re[i], &eta_im[i]);
        multiply(factor, &phi_re[i], &phi_im[i]);
        eta_re[i] /= largest;
        eta_im[i] /= largest;
        phi_re[i] /= largest;
        phi_im[i] /= largest;
    }
    eta_im[first] = 0.0; /* what rounding left */
    return TH_OK;
}

th_status th_mode_profile(const th_flow *flow, const th_solve_options *options, double omega_re,
                          double omega_im, int count, const double *x, double *eta_re,
                          double *eta_im, double *phi_re, double *phi_im, th_error *err)
{
    const double complex omega = omega_re + I * omega_im;
    th_level level = {NULL, NULL};
    th_eigenpair pair = {0};
    th_field field = {0};
    th_status st = check(flow, options, omega, count, x, err);

    if (st != TH_OK)
        return st;
    if (eta_re == NULL || eta_im == NULL || phi_re == NULL || phi_im == NULL)
        return th_fail(err, TH_EINVAL, "profile: want places for eta and phi");
    st = find_pair(flow, options->accuracy, omega, &level, &pair, err);
    if (st != TH_OK)
        goto done;
    st = th_field_create(flow, level.mesh, level.op, pair.omega, pair.right, &field, err);
    if (st == TH_OK)
        st = sample_all(&field, count, x, eta_re, eta_im, phi_re, phi_im, err);
    if (st == TH_OK)
        st = normalise(count, eta_re, eta_im, phi_re, phi_im, err);
done:
    th_field_clear(&field);
    th_eigenpair_clear(&pair);
    th_level_clear(&level);
    return st;
}
