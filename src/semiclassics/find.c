/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Levels of a pocket and what two horizons make of them. In: a flow, a pocket. Out:
 * th_semiclassics. Calls valley, orbit, waves, GSL (Gamma of a complex number), alloc.
 *
 * Symbols as in the header. At a black-hole horizon with v - c = kappa x the solution that sends
 * nothing upstream beyond it is Int k^{-ie} exp(i k x - i k^3/(24 c kappa)) dk, from below around
 * k = 0: stationary points at k_l and k_p, a factor exp(-pi e) between them, and from the branch
 * point k_s with the factor Gamma(1 - i e), which is not that of WKB but by f(e). A white-hole
 * horizon is its mirror image. So the round trip is exp(i (pi - S - f(e_b) - f(e_w)))
 * |alpha_b alpha_w| (1 + exp(-pi (e_b + e_w) + i phase)) and must be 1 at omega + i growth.
 * Proof: tests/test_semiclassics.c. */
#include "inside.h"

#include <complex.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_math.h>
#include <gsl/gsl_sf_gamma.h>

#include "alloc.h"

/* Levels below this part of the top of the band are not looked for: WKB has failed long before. */
#define SLOWEST 1e-6
/* Levels closer to a dip of the top of the band, relative to it, are not listed: the time an orbit
 * spends there grows without bound. */
#define DIP_MARGIN 1e-3
/* A level's action, relative; integrals have 1e-9. */
#define ACTION_TOLERANCE 2e-9
/* Newton's method takes five steps; a bracket halved that often is used up. */
enum { STEPS = 80 };
/* 1 + (ln 2)/3: what is left of Int |k_p| - Int k_s near a horizon over e, the logarithms taken
 * away. In units of its own, x = 1/q + q^2: Int |q| dx from -X to 0 = ln X + 2/3, Int q dx from the
 * turning point to X = ln X - (ln 2)/3 - 1/3. */
#define NEAR_HORIZON (1 + M_LN2 / 3)

/* Omega of an action, by Newton's method inside a bracket. S falls from above `action` to below it
 * between low and the frequency from which on there are more than two turning points. */
static th_status find_level(const th_valley *valley, double low, double action, double *omega,
                            th_orbit *orbit, th_error *err)
{
    double high = valley->single, at = (low + high) / 2;

    for (int i = 0; i < STEPS; i++) {
        const th_status st = th_orbit_follow(valley, at, orbit, err);
        double off;

        if (st != TH_OK)
            return st;
        *omega = at;
        off = orbit->action - action;
        if (fabs(off) <= ACTION_TOLERANCE * action)
            return TH_OK;
        if (off > 0)
            low = at;
        else
            high = at;
        at += off / orbit->round_trip;
        if (!(at > low && at < high))
            at = (low + high) / 2;
    }
    return th_fail(err, TH_ECONVERGE, "semiclassics: no frequency of action %g found", action);
}

/* f(e) of the header. */
static th_status horizon_phase(double e, double *phase, th_error *err)
{
    gsl_sf_result modulus, argument;

    if (gsl_sf_lngamma_complex_e(1, e, &modulus, &argument) != GSL_SUCCESS)
        return th_fail(err, TH_ECONVERGE, "semiclassics: Gamma(1 + i %g)", e);
    /* GSL reduces the argument to (-pi, pi]; Stirling's tells the turns, f itself is small. */
    *phase = remainder(argument.val - (e * log(e) - e + M_PI_4), 2 * M_PI);
    return TH_OK;
}

/* Growth of a level whose omega, orbit and phase are known. */
static th_status amplify(const th_valley *valley, th_semiclassical_mode *m, th_error *err)
{
    const double e_b = m->omega / valley->black.kappa, e_w = m->omega / valley->white.kappa;
    double f_b, f_w, shift, both, gain;
    double complex second; /* beta_b beta_w e^{i phase} over alpha_b alpha_w */
    th_status st;

    st = horizon_phase(e_b, &f_b, err);
    if (st == TH_OK)
        st = horizon_phase(e_w, &f_w, err);
    if (st != TH_OK)
        return st;
    m->created_black = 1 / expm1(2 * M_PI * e_b);
    m->created_white = 1 / expm1(2 * M_PI * e_w);
    both = exp(-M_PI * (e_b + e_w));
    second = both * cexp(I * m->phase);
    shift = (f_b + f_w - carg(1 + second)) / m->round_trip;
    m->omega_uniform = fmax(0, m->omega + shift);
    /* ln |alpha_b alpha_w (1 + second)|^2 without loss for small betas: |alpha|^2 = 1 + |beta|^2,
     * |1 + s|^2 = 1 + 2 Re s + |s|^2. */
    gain = log1p(m->created_black) + log1p(m->created_white);
    m->growth_low = fmax(0, gain + 2 * log1p(-both)) / (2 * m->round_trip);
    m->growth_high = (gain + 2 * log1p(both)) / (2 * m->round_trip);
    m->growth =
        fmax(m->growth_low, (gain + log1p(2 * creal(second) + both * both)) / (2 * m->round_trip));
    return TH_OK;
}

static th_status fill_level(const th_valley *valley, int level, double low,
                            th_semiclassical_mode *m, th_error *err)
{
    th_orbit orbit;
    double partner;
    th_status st;

    m->level = level;
    st = find_level(valley, low, 2 * M_PI * (level + 0.5), &m->omega, &orbit, err);
    if (st == TH_OK)
        st = th_orbit_partner(valley, m->omega, &partner, err);
    if (st != TH_OK)
        return st;
    m->left = orbit.left;
    m->right = orbit.right;
    m->round_trip = orbit.round_trip;
    m->phase = (orbit.sum + orbit.action) / 2 + partner +
               NEAR_HORIZON * m->omega * (1 / valley->black.kappa + 1 / valley->white.kappa);
    return amplify(valley, m, err);
}

/* |dk/dx|/k^2 = |d omega/dx|/(|group velocity| k^2), see the header for where. */
static double roughness(const th_valley *valley, double omega)
{
    double x[2], largest = 0;

    th_valley_turns(valley, (omega + valley->single) / 2, &x[0], &x[1]);
    for (int i = 0; i < 2; i++) {
        th_flow_point p;
        th_trapped w;

        th_flow_at(valley->flow, x[i], &p);
        th_trapped_waves(omega, &p, &w);
        largest = fmax(largest, fabs(th_trapped_force(w.k_s, &p)) / (w.speed_s * w.k_s * w.k_s));
        largest = fmax(largest, fabs(th_trapped_force(w.k_l, &p)) / (-w.speed_l * w.k_l * w.k_l));
    }
    return largest;
}

/* Numbers of the levels between SLOWEST and the lowest dip: first <= n < end. */
static th_status count_levels(const th_valley *valley, int *first, int *end, th_error *err)
{
    th_orbit orbit;
    th_status st = th_orbit_follow(valley, SLOWEST * valley->top, &orbit, err);

    *first = 0;
    if (st != TH_OK)
        return st;
    *end = (int)fmin(TH_SEMICLASSICS_MAX, ceil(orbit.action / (2 * M_PI) - 0.5));
    if (!(valley->single < valley->top))
        return TH_OK;
    st = th_orbit_follow(valley, (1 - DIP_MARGIN) * valley->single, &orbit, err);
    if (st != TH_OK)
        return st;
    *first = (int)fmin(*end, ceil(orbit.action / (2 * M_PI) - 0.5));
    if (*first == *end && *end > 0)
        return th_fail(err, TH_ENONE,
                       "semiclassics: more than two turning points at the frequencies of all "
                       "levels, want one below %g, where the top of the band dips",
                       valley->single);
    return TH_OK;
}

th_status th_semiclassics_find(const th_flow *flow, int pocket, th_semiclassics *out, th_error *err)
{
    th_status st = TH_EBUG;
    th_valley valley;
    double action;
    int first, end;
    const th_horizon *steep;

    if (flow == NULL || out == NULL)
        return th_fail(err, TH_EINVAL, "semiclassics: want a flow and a place for the answer");
    *out = (th_semiclassics){.count = 0};
    st = th_valley_look(flow, pocket, &valley, err);
    if (st == TH_OK)
        st = th_orbit_static(&valley, &action, err);
    if (st == TH_OK)
        st = count_levels(&valley, &first, &end, err);
    if (st != TH_OK)
        goto done;
    steep = valley.black.kappa > valley.white.kappa ? &valley.black : &valley.white;
    out->levels = action / (2 * M_PI);
    out->omega_max = valley.top;
    out->omega_single = valley.single;
    out->kappa_black = valley.black.kappa;
    out->kappa_white = valley.white.kappa;
    out->thermal = steep->kappa / valley.top;
    out->steepness = steep->kappa / (steep->speed * steep->speed);
    out->impedance = valley.impedance;
    out->count = end - first;
    out->mode = th_alloc((size_t)out->count, sizeof *out->mode);
    if (out->mode == NULL) {
        st = th_fail(err, TH_ENOMEM, "semiclassics: room for %d levels", out->count);
        goto done;
    }
    for (int i = 0; i < out->count; i++) {
        st = fill_level(&valley, first + i, SLOWEST * valley.top, &out->mode[i], err);
        if (st != TH_OK)
            goto done;
    }
    if (out->count > 0)
        out->roughness = roughness(&valley, out->mode[out->count - 1].omega);
done:
    if (st != TH_OK)
        th_semiclassics_clear(out);
    return st;
}

void th_semiclassics_clear(th_semiclassics *semiclassics)
{
    if (semiclassics == NULL)
        return;
    free(semiclassics->mode);
    *semiclassics = (th_semiclassics){.count = 0};
}
