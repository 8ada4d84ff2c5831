/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The density ripple of a growing mode. In: flow, mode. Out: wave numbers, what tells it from the
 * static undulation. Calls profile, dispersion, flow.
 * Symbols: eta density fluctuation; k wave number; A(k) = Int eta e^{-i k x} dx over a pocket of
 * length L. By the Cauchy-Schwarz inequality |A|^2 <= L Int |eta|^2, equal for a single wave.
 * Proof: tests/test_pattern.c. */
#include "twinhorizon/pattern.h"

#include <complex.h>
#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "alloc.h"
#include "dispersion.h"
#include "twinhorizon/profile.h"

/* Samples for each period of the shortest wave looked for, and in all at least and at most: with
 * them the trapezoidal rule is good to a thousandth, and the longest flows that can be solved have
 * fewer waves than the most allow. */
enum { PER_WAVE = 24, LEAST = 200, MOST = 60000, OUTSIDE = 200 };
/* Waves up to this many times the undulation are looked for; at the band's top the shorter trapped
 * wave has about as many. */
static const double beyond_undulation = 1.5;
/* Wave numbers tried for each 2 pi/L, before refinement. */
enum { FINENESS = 8, REFINE = 40 };

typedef struct {
    int count;
    double *x, *eta_re, *eta_im, *phi_re, *phi_im;
} field;

static void clear(field *f)
{
    free(f->x);
    *f = (field){0};
}

/* Room for positions and four fields in one block. */
static th_status make(int count, field *f, th_error *err)
{
    const size_t n = (size_t)count;
    double *all = th_alloc(5 * n, sizeof *all);

    if (all == NULL)
        return th_fail(err, TH_ENOMEM, "pattern: %d positions", count);
    *f = (field){count, all, all + n, all + 2 * n, all + 3 * n, all + 4 * n};
    return TH_OK;
}

static double complex eta_at(const field *f, int i)
{
    return f->eta_re[i] + I * f->eta_im[i];
}

/* Int eta e^{-i k x} dx over samples [from, from + count), even, by the trapezoidal rule. */
static double complex transform(const field *f, int from, int count, double k)
{
    const double h = f->x[from + 1] - f->x[from];
    const double complex turn = cexp(-I * k * h);
    double complex wave = cexp(-I * k * f->x[from]), sum = 0.0;

    for (int i = 0; i < count; i++) {
        sum += (i == 0 || i == count - 1 ? 0.5 : 1.0) * eta_at(f, from + i) * wave;
        wave *= turn;
    }
    return sum * h;
}

static double power(const field *f, int from, int count)
{
    const double h = f->x[from + 1] - f->x[from];
    double sum = 0.0;

    for (int i = 0; i < count; i++) {
        const double size = cabs(eta_at(f, from + i));

        sum += (i == 0 || i == count - 1 ? 0.5 : 1.0) * size * size;
    }
    return sum * h;
}

/* The wave number of the largest |A|: scan, then ternary search about the best. A purely growing
 * mode is real, and k and -k alike: the positive one is taken. */
static double loudest(const field *f, int from, int count, double length, double most, bool real)
{
    const double step = 2.0 * M_PI / length / FINENESS;
    const int last = (int)ceil(most / step);
    double best = 0.0, size = -1.0, low, high;

    for (int i = real ? 0 : -last; i <= last; i++) {
        const double now = cabs(transform(f, from, count, i * step));

        if (now > size) {
            size = now;
            best = i * step;
        }
    }
    low = best - step;
    high = best + step;
    for (int i = 0; i < REFINE; i++) {
        const double a = low + (high - low) / 3.0, b = high - (high - low) / 3.0;

        if (cabs(transform(f, from, count, a)) < cabs(transform(f, from, count, b)))
            low = a;
        else
            high = b;
    }
    best = (low + high) / 2.0;
    return real ? fabs(best) : best;
}

/* Largest |eta| of samples. */
static double peak(const field *f, int from, int count, double *place)
{
    double most = 0.0;

    for (int i = from; i < from + count; i++)
        if (cabs(eta_at(f, i)) > most) {
            most = cabs(eta_at(f, i));
            if (place != NULL)
                *place = f->x[i];
        }
    return most;
}

/* The propagating one of the two waves kept at an end: of a growing mode both decay outwards, the
 * evanescent one much faster. */
static th_status end_wave(const th_flow *flow, bool downstream, double complex omega,
                          th_pattern_side *out, th_error *err)
{
    const int piece = downstream ? th_flow_pieces(flow) : -1;
    double complex k[4], slow;
    th_flow_point p;
    int edges;
    const double *edge = th_flow_edges(flow, &edges);
    th_status st;

    th_flow_eval(flow, piece, downstream ? edge[edges - 1] : edge[0], &p);
    if (th_flow_ends(flow).kind != TH_ENDS_OPEN || p.v >= p.c)
        return TH_OK;
    st = th_dispersion_roots(omega, p.v, p.c, k, err); /* by falling Im k: two decay either way */
    if (st != TH_OK)
        return st;
    slow = downstream ? k[1] : k[2];
    out->known = true;
    out->wavenumber = creal(omega) == 0.0 ? 0.0 : creal(slow);
    out->decay = 1.0 / fabs(cimag(slow));
    return TH_OK;
}

static int samples_for(double length, double most)
{
    const double wanted = PER_WAVE * length * most / (2.0 * M_PI);

    return (int)fmin(MOST, fmax(LEAST, ceil(wanted)));
}

/* Even samples over [from, to], both ends included. */
static void lay(field *f, int first, int count, double from, double to)
{
    for (int i = 0; i < count; i++)
        f->x[first + i] = from + (to - from) * i / (count - 1);
}

/* What is looked at outside the pockets: beyond open ends a quarter of the flow more; on a ring all
 * of the subsonic part, on either side. */
static void surroundings(const th_flow *flow, double *from, double *to)
{
    int edges, pockets;
    const double *edge = th_flow_edges(flow, &edges);
    const th_pocket *pocket = th_flow_pockets(flow, &pockets);
    const double length = edge[edges - 1] - edge[0];
    const th_ends_kind kind = th_flow_ends(flow).kind;
    const double margin = kind == TH_ENDS_OPEN ? 0.25 * length : 0.0;

    *from = kind == TH_ENDS_RING ? pocket[pockets - 1].right - length : edge[0] - margin;
    *to = kind == TH_ENDS_RING ? pocket[0].left + length : edge[edges - 1] + margin;
}

th_status th_pattern_find(const th_flow *flow, const th_solve_options *options, double omega_re,
                          double omega_im, th_pattern *out, th_error *err)
{
    const double complex omega = omega_re + I * omega_im;
    const th_pocket *pocket = NULL;
    int pockets = 0, total = 2 * OUTSIDE, first = 2 * OUTSIDE;
    int *count = NULL;
    double from, to, most = 0.0, length, largest = -1.0, in_pocket;
    field f = {0};
    th_status st = TH_EBUG;

    if (flow == NULL || options == NULL || out == NULL || !(omega_im > 0.0))
        return th_fail(err, TH_EINVAL, "pattern: want a flow, options and a growing mode");
    *out = (th_pattern){0};
    pocket = th_flow_pockets(flow, &pockets);
    if (pockets == 0)
        return th_fail(err, TH_ENONE, "pattern: the flow has no pocket");
    count = th_alloc((size_t)pockets, sizeof *count);
    if (count == NULL)
        return th_fail(err, TH_ENOMEM, "pattern: %d pockets", pockets);
    for (int i = 0; i < pockets; i++)
        most = fmax(most, beyond_undulation * pocket[i].undulation);
    for (int i = 0; i < pockets; i++)
        total += count[i] = samples_for(pocket[i].right - pocket[i].left, most);
    st = make(total, &f, err);
    if (st != TH_OK)
        goto done;
    surroundings(flow, &from, &to);
    lay(&f, 0, OUTSIDE, from, pocket[0].left);
    lay(&f, OUTSIDE, OUTSIDE, pocket[pockets - 1].right, to);
    for (int i = 0, at = first; i < pockets; at += count[i++])
        lay(&f, at, count[i], pocket[i].left, pocket[i].right);
    st = th_mode_profile(flow, options, omega_re, omega_im, f.count, f.x, f.eta_re, f.eta_im,
                         f.phi_re, f.phi_im, err);
    if (st != TH_OK)
        goto done;
    for (int i = 0, at = first; i < pockets; at += count[i++])
        if (power(&f, at, count[i]) > largest) {
            largest = power(&f, at, count[i]);
            out->pocket = i;
            first = at;
        }
    pocket += out->pocket;
    length = pocket->right - pocket->left;
    out->undulation = pocket->undulation;
    out->resolution = 2.0 * M_PI / length;
    out->wavenumber = loudest(&f, first, count[out->pocket], length, most, omega_re == 0.0);
    out->share = pow(cabs(transform(&f, first, count[out->pocket], out->wavenumber)), 2.0) /
                 (length * largest) * (omega_re == 0.0 && out->wavenumber != 0.0 ? 2.0 : 1.0);
    out->share = fmin(1.0, out->share);
    in_pocket = peak(&f, first, count[out->pocket], &out->place);
    st = end_wave(flow, false, omega, &out->upstream, err);
    if (st == TH_OK)
        st = end_wave(flow, true, omega, &out->downstream, err);
    out->upstream.loudness = peak(&f, 0, OUTSIDE, NULL) / in_pocket;
    out->downstream.loudness = peak(&f, OUTSIDE, OUTSIDE, NULL) / in_pocket;
done:
    clear(&f);
    free(count);
    return st;
}

th_pattern_tell th_pattern_judge(const th_pattern *pattern, double omega_re, double omega_im,
                                 double hold, double resolution)
{
    /* a wave number below that of one period in the pocket has the pocket for its period */
    const double k = fmax(fabs(pattern->wavenumber), pattern->resolution);
    const bool seen = 2.0 * M_PI / k >= resolution;
    const bool static_seen = 2.0 * M_PI / pattern->undulation >= resolution;
    const double apart = fabs(fabs(pattern->wavenumber) - pattern->undulation);

    return (th_pattern_tell){.imaged = seen,
                             .frequency = omega_re * hold >= 2.0 * M_PI,
                             .wavenumber = seen && static_seen && apart > pattern->resolution,
                             .growth = omega_im * hold >= 2.0};
}
