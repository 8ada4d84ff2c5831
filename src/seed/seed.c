/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Contrast of seeded growth. In: a flow, its modes, density, temperature. Out: amplitudes, contrast
 * against time and place. Calls project.
 * Symbols: E = eta(x) e^{-i omega t} of a mode, b its amplitude.
 * The real field is Sum g Re(b E), g = 2 for a mode that stands for both signs of Re omega, 1 for a
 * purely growing one (b and E real). With u = g (Re E, -Im E) it is Sum u (Re b, Im b), so its mean
 * square is u^T C u, C the covariance. Averaged over an oscillation a mode keeps g^2 |E|^2
 * <|b|^2>/2. Proof: tests/test_seed.c, tests/check_seed.py. */
#include "twinhorizon/seed.h"

#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "alloc.h"
#include "seed/inside.h"

/* The answer, and a coarser one in every respect: their difference bounds the error. */
static const th_seed_level fine = {14, 1e-9, 12.0, 1e6, 0.5};
static const th_seed_level coarse = {11, 1e-7, 9.0, 1e4, 0.7};
static const double disagreement = 0.1; /* relative, of an amplitude: then nothing is understood */

/* Points in the pockets for each element and order of it: at the resolution limit of the mesh a
 * maximum between two of them is higher by 2e-4. */
enum { POINTS = 16 };

struct th_seed {
    int count;
    th_seed_mode *mode; /* [count], known ones first */
    th_seed_answer answer;
    int points;
    double *x;           /* [points] in the pockets, ascending */
    double complex *eta; /* [points, known] */
};

static double complex omega_of(const th_seed_mode *mode)
{
    return mode->omega_re + I * mode->omega_im;
}

static double share(const th_seed_mode *mode)
{
    return mode->omega_re == 0.0 ? 1.0 : 2.0;
}

static double entry(const th_seed_answer *a, int i, int j)
{
    return a->covariance[i + 2 * a->known * j];
}

/* Mean square contrast where the modes have eta[0], eta[stride], ... */
static double mean_square(const th_seed *s, th_seed_kind kind, double time,
                          const double complex *eta, size_t stride)
{
    const th_seed_answer *a = &s->answer;
    double sum = 0.0;

    for (int i = 0; i < a->known; i++) {
        const double complex e_i =
            share(&s->mode[i]) * eta[stride * (size_t)i] * cexp(-I * omega_of(&s->mode[i]) * time);
        const bool real_i = s->mode[i].omega_re == 0.0;

        if (kind == TH_SEED_AVERAGE && !real_i) {
            sum += 0.5 * creal(e_i * conj(e_i)) *
                   (entry(a, 2 * i, 2 * i) + entry(a, 2 * i + 1, 2 * i + 1));
            continue;
        }
        for (int j = 0; j < a->known; j++) {
            const double complex e_j = share(&s->mode[j]) * eta[stride * (size_t)j] *
                                       cexp(-I * omega_of(&s->mode[j]) * time);

            if (kind == TH_SEED_AVERAGE && s->mode[j].omega_re != 0.0)
                continue;
            sum += creal(e_i) * creal(e_j) * entry(a, 2 * i, 2 * j) -
                   2.0 * creal(e_i) * cimag(e_j) * entry(a, 2 * i, 2 * j + 1) +
                   cimag(e_i) * cimag(e_j) * entry(a, 2 * i + 1, 2 * j + 1);
        }
    }
    return sum < 0.0 ? 0.0 : sum; /* by rounding; not finite where e^{Im omega t} is not */
}

/* ---- making --------------------------------------------------------------------------------- */

static bool in_pocket(const th_flow *flow, double x)
{
    const th_pocket *pocket;
    int pockets;
    bool yes = false;

    pocket = th_flow_pockets(flow, &pockets);
    for (int i = 0; i < pockets; i++)
        yes = yes || (x >= pocket[i].left && x <= pocket[i].right);
    return yes || pockets == 0; /* no pocket, no growth: anywhere will do */
}

/* Points of the inside elements that are in pockets; a first pass counts. */
static th_status lay_points(const th_flow *flow, th_seed *s, th_error *err)
{
    const th_mesh *m = s->answer.mesh;
    const int parts = POINTS * m->rule.order;

    for (int pass = 0; pass < 2; pass++) {
        if (pass == 1) {
            s->x = th_alloc((size_t)s->points, sizeof *s->x);
            s->eta = th_alloc((size_t)s->points * (size_t)s->answer.known, sizeof *s->eta);
            if (s->x == NULL || s->eta == NULL)
                return th_fail(err, TH_ENOMEM, "seed: %d points", s->points);
        }
        s->points = 0;
        for (int e = m->first_inside; e <= m->last_inside; e++)
            for (int i = 0; i <= parts; i++) {
                const double x = m->element[e].left + m->element[e].length * i / parts;

                if (!in_pocket(flow, x))
                    continue;
                if (pass == 1)
                    s->x[s->points] = x;
                s->points++;
            }
    }
    for (int j = 0; j < s->answer.known; j++)
        for (int i = 0; i < s->points; i++)
            s->eta[(size_t)i + (size_t)s->points * (size_t)j] = th_seed_eta(&s->answer, j, s->x[i]);
    return TH_OK;
}

/* rms amplitude at the loudest of the points, averaged over the oscillation */
static double amplitude(const th_seed *s, const th_seed_answer *a, int j, double *place)
{
    const double square =
        share(&s->mode[j]) * (entry(a, 2 * j, 2 * j) + entry(a, 2 * j + 1, 2 * j + 1));
    double largest = -1.0;

    for (int i = 0; i < s->points; i++) {
        const double eta = cabs(th_seed_eta(a, j, s->x[i]));

        if (eta > largest) {
            largest = eta;
            *place = s->x[i];
        }
    }
    return sqrt(square) * largest;
}

static th_status describe(th_seed *s, const th_seed_answer *rough, th_error *err)
{
    for (int j = 0; j < s->answer.known; j++) {
        const th_seed_answer *a = &s->answer;
        th_seed_mode *mode = &s->mode[j];
        const double rr = entry(a, 2 * j, 2 * j), ii = entry(a, 2 * j + 1, 2 * j + 1);
        double place, other;

        mode->known = true;
        mode->amplitude = amplitude(s, a, j, &mode->place);
        other = amplitude(s, rough, j, &place);
        mode->error = fabs(mode->amplitude - other);
        mode->squeezing = hypot(rr - ii, 2.0 * entry(a, 2 * j, 2 * j + 1)) / (rr + ii);
        if (!(mode->error <= disagreement * mode->amplitude))
            return th_fail(err, TH_EUNDECIDED,
                           "seed: amplitude of omega = %g%+gi is %g or %g on two discretisations",
                           mode->omega_re, mode->omega_im, mode->amplitude, other);
    }
    return TH_OK;
}

static th_status check(const th_flow *flow, const th_solution *solution,
                       const th_seed_options *options, th_error *err)
{
    if (flow == NULL || solution == NULL || options == NULL)
        return th_fail(err, TH_EINVAL, "seed: want a flow, its solution and options");
    if (!(options->density > 0.0 && isfinite(options->density)))
        return th_fail_key(err, TH_EINVAL, "density", "density = %g, want > 0", options->density);
    if (!(options->temperature >= 0.0 && isfinite(options->temperature)))
        return th_fail_key(err, TH_EINVAL, "temperature", "temperature = %g, want >= 0",
                           options->temperature);
    if (th_flow_ends(flow).kind == TH_ENDS_RING)
        return th_fail_key(err, TH_EINVAL, "kind",
                           "seeded growth: ends = ring, want open ends or walls");
    return TH_OK;
}

static th_status list_modes(const th_solution *solution, th_seed *s, th_error *err)
{
    s->mode = th_alloc((size_t)solution->count, sizeof *s->mode);
    if (s->mode == NULL)
        return th_fail(err, TH_ENOMEM, "seed: %d modes", solution->count);
    for (int i = 0; i < solution->count; i++) {
        const th_mode *from = &solution->mode[i];

        if (from->label == TH_LABEL_UNSTABLE)
            s->mode[s->count++] =
                (th_seed_mode){.mode = i, .omega_re = from->omega_re, .omega_im = from->omega_im};
    }
    return TH_OK;
}

th_status th_seed_create(const th_flow *flow, const th_solution *solution,
                         const th_seed_options *options, th_seed **out, th_error *err)
{
    th_status st = TH_EBUG;
    th_seed *s = NULL;
    th_seed_answer rough = {0};
    double complex *omega = NULL;
    double shape_density;
    th_flow_point upstream;
    int edges;

    if (out == NULL)
        return th_fail(err, TH_EINVAL, "seed: want a place for the result");
    *out = NULL;
    st = check(flow, solution, options, err);
    if (st != TH_OK)
        return st;
    s = th_alloc(1, sizeof *s);
    omega = th_alloc((size_t)solution->count, sizeof *omega);
    if (s == NULL || omega == NULL) {
        st = th_fail(err, TH_ENOMEM, "seed: %d modes", solution->count);
        goto done;
    }
    st = list_modes(solution, s, err);
    if (st != TH_OK)
        goto done;
    for (int j = 0; j < s->count; j++)
        omega[j] = omega_of(&s->mode[j]);
    st = th_seed_project(flow, &fine, options->temperature, s->count, omega, &s->answer, err);
    if (st != TH_OK || s->answer.known == 0)
        goto done;
    st = th_seed_project(flow, &coarse, options->temperature, s->answer.known, omega, &rough, err);
    if (st != TH_OK)
        goto done;
    if (rough.known != s->answer.known) { /* of the slowest modes only one of the two has a mesh */
        st = th_fail(err, TH_EUNDECIDED, "seed: %d and %d modes on two discretisations",
                     s->answer.known, rough.known);
        goto done;
    }
    /* Q and the commutator are proportional to n: covariances to 1/n */
    th_flow_eval(flow, -1, th_flow_edges(flow, &edges)[0], &upstream);
    shape_density = upstream.n;
    for (int i = 0; i < 4 * s->answer.known * s->answer.known; i++) {
        s->answer.covariance[i] *= shape_density / options->density;
        rough.covariance[i] *= shape_density / options->density;
    }
    st = lay_points(flow, s, err);
    if (st == TH_OK)
        st = describe(s, &rough, err);
done:
    free(omega);
    th_seed_answer_clear(&rough);
    if (st == TH_OK)
        *out = s;
    else
        th_seed_destroy(s);
    return st;
}

void th_seed_destroy(th_seed *seed)
{
    if (seed == NULL)
        return;
    th_seed_answer_clear(&seed->answer);
    free(seed->mode);
    free(seed->x);
    free(seed->eta);
    free(seed);
}

const th_seed_mode *th_seed_modes(const th_seed *seed, int *count)
{
    *count = seed->count;
    return seed->mode;
}

/* ---- asking --------------------------------------------------------------------------------- */

th_status th_seed_total(const th_seed *seed, double time, double *contrast, double *place,
                        th_error *err)
{
    double largest = 0.0;

    if (seed == NULL || contrast == NULL || place == NULL || !isfinite(time))
        return th_fail(err, TH_EINVAL, "seed: time = %g, want a finite one and places for results",
                       time);
    *place = 0.0;
    for (int i = 0; i < seed->points; i++) {
        const double square =
            mean_square(seed, TH_SEED_AVERAGE, time, seed->eta + i, (size_t)seed->points);

        if (!isfinite(square))
            return th_fail(err, TH_EINVAL, "seed: the contrast at time = %g is beyond numbers",
                           time);
        if (square > largest) {
            largest = square;
            *place = seed->x[i];
        }
    }
    *contrast = sqrt(largest);
    return TH_OK;
}

/* The logarithm of the contrast is smooth: bisection on it is exact to rounding in some 60 steps.
 */
th_status th_seed_time(const th_seed *seed, double contrast, double *time, th_error *err)
{
    double low = 0.0, high, now, place;
    th_status st;

    if (seed == NULL || time == NULL || !(contrast > 0.0 && isfinite(contrast)))
        return th_fail(err, TH_EINVAL, "seed: contrast = %g, want > 0 and a place for the time",
                       contrast);
    if (seed->answer.known == 0)
        return th_fail(err, TH_ENONE, "seed: no growing mode to reach contrast %g", contrast);
    st = th_seed_total(seed, 0.0, &now, &place, err);
    if (st != TH_OK)
        return st;
    *time = 0.0;
    if (now >= contrast)
        return TH_OK;
    /* about when the fastest mode alone has it; later where purely growing ones interfere */
    high = fmax(1.0, log(contrast / seed->mode[0].amplitude) + 1.0) / seed->mode[0].omega_im;
    for (;; high *= 2.0) {
        st = th_seed_total(seed, high, &now, &place, err);
        if (st != TH_OK)
            return st;
        if (now >= contrast)
            break;
    }
    while (high - low > 4.0 * GSL_DBL_EPSILON * high) {
        const double middle = low + 0.5 * (high - low);

        st = th_seed_total(seed, middle, &now, &place, err);
        if (st != TH_OK)
            return st;
        if (now >= contrast)
            high = middle;
        else
            low = middle;
    }
    *time = high;
    return TH_OK;
}

th_status th_seed_contrast(const th_seed *seed, th_seed_kind kind, double time, int count,
                           const double *x, double *rms, th_error *err)
{
    double complex *eta = NULL;
    th_status st = TH_OK;

    if (seed == NULL || x == NULL || rms == NULL || count < 1 || !isfinite(time))
        return th_fail(err, TH_EINVAL,
                       "seed: count = %d, time = %g, want count >= 1, a finite time, positions and "
                       "a place for the contrast",
                       count, time);
    eta = th_alloc((size_t)seed->answer.known, sizeof *eta);
    if (eta == NULL)
        return th_fail(err, TH_ENOMEM, "seed: %d modes", seed->answer.known);
    for (int i = 0; st == TH_OK && i < count; i++) {
        if (!isfinite(x[i])) {
            st = th_fail(err, TH_EINVAL, "seed: x[%d] = %g, want a finite position", i, x[i]);
            break;
        }
        for (int j = 0; j < seed->answer.known; j++)
            eta[j] = th_seed_eta(&seed->answer, j, x[i]);
        rms[i] = sqrt(mean_square(seed, kind, time, eta, 1));
        if (!isfinite(rms[i]))
            st = th_fail(err, TH_EINVAL, "seed: the contrast at time = %g is beyond numbers", time);
    }
    free(eta);
    return st;
}
