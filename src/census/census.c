/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Census by the argument principle. In: a flow and its matching function F. Out: counts. Calls
 * path, bound, matching.
 * F(-omega*) = F(omega)* (up to a constant) makes half of the contour enough: along the right half
 * the phase gains pi for each mode inside, counted with both signs of Re omega. With open ends the
 * bottom runs on the real axis, from 0 outwards on a logarithmic scale. With ends that conserve
 * energy neutral modes lie on the real axis: the bottom is raised to Im omega = floor, and the
 * strip below it is counted by itself; F(omega*) = F(omega)* makes a quarter of it enough.
 * Proof: tests/test_census.c. */
#include "census/region.h"

#include <gsl/gsl_math.h>

#include "flow/workspace.h"

/* The region's width over the top of the negative-energy band: a growing mode needs a wave of
 * negative energy at its frequency, and there is none beyond the top. The rest is the probe. */
static const double beyond = 3.0;
/* Smallest |omega| of the contour, relative to the top. F = E/omega is known there to rounding
 * over this: a millionth leaves nine digits. */
static const double innermost = 1e-6;
/* F is known to rounding relative to c^2, so a band narrower than this share of c^2 is taken this
 * wide: 1e-10 c^2 is the innermost |omega| at least. */
static const double narrowest_band = 1e-4;
/* Rings and walls: what grows slower than this, relative to the top, counts as neutral. F =
 * E/omega^2 is known there to rounding over its square. */
static const double neutral_floor = 1e-5;

/* Below the real axis F is analytic up to the nearest place where two wave numbers of an end
 * coincide; the contour around the slow modes stays this share of the way to it. */
static const double inside_branch = 0.3;
/* A circle narrower than this share of the usual one is lost in rounding. */
static const double narrowest_circle = 1e-4;

/* Distance from omega = 0 to that place: the top of its band for a supersonic end, 0 for a sonic
 * one; for a subsonic one the closed form of d omega/d k = 0,
 *     kappa^2 = 2 (c^2 - v^2/4 - sqrt(v^4/16 + v^2 c^2/2)),
 *     omega = -i kappa (sqrt(c^2 - kappa^2/4) - v),
 * written so that nothing cancels when v is close to c. */
static double branch_distance(const th_flow *flow, int piece, double x)
{
    th_flow_point at;
    double v2, c2, kappa2, root;

    th_flow_eval(flow, piece, x, &at);
    if (!(at.v < at.c))
        return th_band_top(at.v, at.c);
    v2 = at.v * at.v;
    c2 = at.c * at.c;
    kappa2 = 2.0 * c2 * (at.c - at.v) * (at.c + at.v) /
             (c2 - 0.25 * v2 + sqrt(v2 * v2 / 16.0 + 0.5 * v2 * c2));
    root = sqrt(c2 - 0.25 * kappa2);
    return sqrt(kappa2) * ((at.c - at.v) * (at.c + at.v) - 0.25 * kappa2) / (root + at.v);
}

/* Radius of the contour around the slow modes of open ends. */
static th_status slow_radius(const th_flow *flow, double top, double *radius, th_error *err)
{
    const double *edge;
    double branch[2];
    int edges;

    edge = th_flow_edges(flow, &edges);
    branch[0] = branch_distance(flow, -1, edge[0]);
    branch[1] = branch_distance(flow, edges - 1, edge[edges - 1]);
    *radius = fmin(innermost * top, inside_branch * fmin(branch[0], branch[1]));
    if (*radius >= narrowest_circle * innermost * top)
        return TH_OK;
    return th_fail(err, TH_EUNDECIDED,
                   "the %s end is so close to sonic (v = c) that the matching function branches "
                   "within %.1e of zero frequency, where modes cannot be counted",
                   branch[0] <= branch[1] ? "upstream" : "downstream", fmin(branch[0], branch[1]));
}

static th_status whole(double turns, const char *what, int *count, th_error *err)
{
    const double nearest = floor(turns + 0.5);

    *count = (int)nearest;
    if (fabs(turns - nearest) <= 0.05 && nearest >= 0.0)
        return TH_OK;
    return th_fail(err, TH_EUNDECIDED,
                   "census: the phase of the matching function adds up to %.3f "
                   "%s modes, not to a whole number",
                   turns, what);
}

/* Along the bottom to re_max + i floor: from i slowest around the slow modes, or from i floor. */
static th_status bottom(th_region *r, const th_matching *matching, th_error *err)
{
    const double edge = r->census.re_max, height = r->census.floor;
    const double start = fmax(r->census.slowest, height);
    th_path *path = &r->bottom;
    th_status st = th_path_start(path, matching, true, I * start, err);

    for (int q = 1; st == TH_OK && height == 0.0 && q <= 4; q++)
        st = th_path_go(path, start * cexp(I * M_PI_2 * (4 - q) / 4.0), err);
    for (double at = 10.0 * start; st == TH_OK && at < 0.01 * edge; at *= 10.0)
        st = th_path_go(path, at + I * height, err);
    for (int q = 1; st == TH_OK && q <= 32; q++)
        st = th_path_go(path, edge * q / 32.0 + I * height, err);
    return st;
}

/* Modes with |omega| < slowest: the right half of the circle, clockwise from the top. */
static th_status count_slow(th_region *r, const th_matching *matching, th_error *err)
{
    th_path circle = {.workspace = r->workspace};
    th_status st = th_path_start(&circle, matching, true, I * r->census.slowest, err);

    for (int q = 1; st == TH_OK && q <= 8; q++)
        st = th_path_go(&circle, r->census.slowest * cexp(I * M_PI_2 * (4 - q) / 4.0), err);
    if (st == TH_OK)
        st = whole(-th_path_phase(&circle) / M_PI, "slow", &r->census.slow, err);
    r->census.worst_step = fmax(r->census.worst_step, circle.worst);
    r->census.evaluations += circle.evaluations;
    th_path_clear(&circle);
    return st;
}

/* Modes on the real axis, 0 < Re omega < re_max: phase up the side of the strip less the bottom. */
static th_status count_neutral(th_region *r, const th_matching *matching, th_error *err)
{
    th_path side = {.workspace = r->workspace};
    int strip = 0;
    th_status st = th_path_start(&side, matching, true, r->census.re_max, err);

    if (st == TH_OK)
        st = th_path_go(&side, r->census.re_max + I * r->census.floor, err);
    if (st == TH_OK)
        st = whole(2.0 * (th_path_phase(&side) - th_path_phase(&r->bottom)) / M_PI, "neutral",
                   &strip, err);
    r->census.neutral = strip / 2;
    r->census.worst_step = fmax(r->census.worst_step, side.worst);
    r->census.evaluations += side.evaluations;
    th_path_clear(&side);
    return st;
}

/* Up the right side and back along the top. */
static th_status lid(th_region *r, const th_matching *matching, th_error *err)
{
    th_path *path = &r->lid;
    const double w = r->census.re_max, h = r->census.im_max;
    th_status st = th_path_start(path, matching, false, w + I * r->census.floor, err);

    for (int q = 1; st == TH_OK && q <= 8; q++)
        st = th_path_go(path, w + I * (r->census.floor + (h - r->census.floor) * q / 8.0), err);
    for (int q = 7; st == TH_OK && q >= 0; q--)
        st = th_path_go(path, w * q / 8.0 + I * h, err);
    return st;
}

th_status th_region_count(const th_flow *flow, const th_matching *matching, double omega_top,
                          th_region *r, th_error *err)
{
    const bool open = th_flow_ends(flow).kind == TH_ENDS_OPEN;
    const double sound = th_flow_sound_max(flow);
    th_workspace *memory = th_flow_workspace(flow);
    double top;
    th_status st;

    *r = (th_region){.workspace = memory, .bottom.workspace = memory, .lid.workspace = memory};
    if (!(omega_top > 0.0))
        return th_fail(err, TH_EINVAL, "census: omega_top = %g, want > 0", omega_top);
    top = fmax(omega_top, narrowest_band * sound * sound);
    r->census.re_max = beyond * top;
    r->census.floor = open ? 0.0 : neutral_floor * top;
    r->census.im_max = fmax(th_growth_bound(flow), 10.0 * neutral_floor * top);
    st = open ? slow_radius(flow, top, &r->census.slowest, err) : TH_OK;
    if (st == TH_OK)
        st = bottom(r, matching, err);
    if (st == TH_OK)
        st = lid(r, matching, err);
    if (st == TH_OK)
        st = whole((th_path_phase(&r->bottom) + th_path_phase(&r->lid)) / M_PI, "growing",
                   &r->census.growing, err);
    r->census.worst_step = fmax(r->bottom.worst, r->lid.worst);
    r->census.evaluations = r->bottom.evaluations + r->lid.evaluations;
    if (st == TH_OK)
        st = open ? count_slow(r, matching, err) : count_neutral(r, matching, err);
    return st;
}

void th_region_clear(th_region *r)
{
    th_path_clear(&r->bottom);
    th_path_clear(&r->lid);
}

th_status th_census_count(const th_flow *flow, const th_matching *matching, double omega_top,
                          th_census *out, th_error *err)
{
    th_region region;
    th_status st;

    if (flow == NULL || matching == NULL || out == NULL)
        return th_fail(err, TH_EINVAL,
                       "census: want a flow, its matching function and a place for "
                       "the result");
    st = th_region_count(flow, matching, omega_top, &region, err);
    *out = region.census;
    th_region_clear(&region);
    return st;
}
