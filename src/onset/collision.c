/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Where two modes collide. In: a circle around both, for a length of the pocket. Out: the square of
 * their difference, which is analytic in the length and zero at the collision, and that zero. May
 * call: matching, root, flow, status.
 *
 * Symbols: F matching function, w modes, c and r centre and radius, S_k = sum over the modes inside
 * of ((w - c)/r)^k = (1/2 pi i) contour integral of ((w - c)/r)^k F'/F dw. The trapezoidal rule in
 * the angle converges geometrically; F(omega*) is F(omega)* up to a constant, so half the circle is
 * enough. (w1 - w2)^2 = r^2 (2 S_2 - S_1^2).
 * Proved by tests/test_onset.c (ring: th_solve on both sides of each length). */
#include "onset/collision.h"

#include <complex.h>
#include <float.h>
#include <gsl/gsl_math.h>

#include "onset/root.h"

/* Points on half the circle. Modes at half the radius inside and twice the radius outside leave
 * 2^-48 of the sums, rounding. */
enum { HALF_POINTS = 24 };
/* S_0 is whole to about 1e-13 then; a mode near the circle spoils it long before it matters. */
#define WHOLE_TOLERANCE 1e-6
/* A length is found when the next step is below this part of it. */
#define STEP_SMALL 1e-12
/* Error of the square of the difference over the square of the radius: the sums are right to some
 * 1e-14. */
#define SQUARE_NOISE 1e-13
/* Rounds of the search: twelve secants, and a hundred of which every second one halves (root.c). */
enum { ROUNDS = 120 };

bool th_collision_isolated(const th_duo *duo)
{
    return fabs(duo->modes - 2) <= WHOLE_TOLERANCE;
}

static th_status sums(const th_circle *circle, const th_matching *matching, th_duo *out,
                      th_error *err)
{
    double sum[3] = {0};

    for (int k = 0; k < HALF_POINTS; k++) {
        const double complex u = cexp(I * M_PI * (k + 0.5) / HALF_POINTS);
        th_matching_value f;
        double complex term;
        th_status st = th_matching_eval(matching, circle->centre + circle->radius * creal(u),
                                        circle->radius * cimag(u), true, &f, err);

        if (st != TH_OK)
            return st;
        term = circle->radius * u * (f.slope_re + I * f.slope_im) / (f.re + I * f.im);
        for (int p = 0; p < 3; p++, term *= u)
            sum[p] += creal(term) / HALF_POINTS;
    }
    out->modes = sum[0];
    out->mean = circle->centre + circle->radius * sum[1] / 2;
    out->square = circle->radius * circle->radius * (2 * sum[2] - sum[1] * sum[1]);
    return TH_OK;
}

th_status th_collision_look(const th_circle *circle, double x, th_matching_grain grain, th_duo *out,
                            th_error *err)
{
    const th_flow_setup at = th_onset_setup(circle->setup, circle->key, x);
    th_matching *matching = NULL;
    th_flow *flow = NULL;
    th_status st = th_flow_build(&at, &flow, err);

    out->x = x;
    if (st == TH_OK)
        st = th_matching_create(flow, circle->omega_top, grain, &matching, err);
    if (st == TH_OK)
        st = sums(circle, matching, out, err);
    th_matching_destroy(matching);
    th_flow_destroy(flow);
    return st;
}

th_status th_collision_refine(const th_circle *circle, const th_duo *a, const th_duo *b,
                              th_onset *out, bool *isolated, th_error *err)
{
    const double sign = b->square > 0 ? 1 : -1, rise = sign * (b->square - a->square);
    th_root root = {.low = a->x, .high = b->x, .slope = rise / (b->x - a->x)};
    double x = b->x - sign * b->square / root.slope;
    th_duo now, fine;
    th_status st;

    root.noise = SQUARE_NOISE * circle->radius * circle->radius;
    *isolated = false;
    for (int round = 0; round < ROUNDS; round++) {
        double next;

        st = th_collision_look(circle, x, TH_MATCHING_USUAL, &now, err);
        if (st != TH_OK || !th_collision_isolated(&now))
            return st;
        next = th_root_next(&root, x, sign * now.square);
        if (fabs(root.step) <= STEP_SMALL * x || fabs(now.square) <= root.noise)
            break;
        x = next;
    }
    st = th_collision_look(circle, x, TH_MATCHING_FINE, &fine, err);
    if (st != TH_OK || !th_collision_isolated(&fine))
        return st;
    *isolated = true;
    *out = (th_onset){.gap = x - root.step,
                      .gap_error = (fabs(fine.square - now.square) + root.noise) / root.slope +
                                   fabs(root.step) + DBL_EPSILON * x,
                      .omega_re = fine.mean};
    return TH_OK;
}
