/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Wave numbers of single branches of the dispersion relation. In: omega, v, c. Out: k_s, k_l, |k_p|
 * and group velocities. Calls flow (th_band_top).
 *
 * Each branch is convex or concave in k, and Newton's method from the side where the tangent stays
 * between the curve and zero comes monotonically and needs no bracket, also at a double root.
 * th_dispersion_roots has all four roots but loses half of the digits where two merge, that is at
 * turning points, and does not tell branches apart. Proof: tests/test_semiclassics.c. */
#include "inside.h"

#include <float.h>
#include <math.h>

/* A double root halves its distance in a step: 53 steps to rounding, then it stands still. */
enum { STEPS = 100 };

/* A branch, sign = -1 of negative energy and 1 of positive: value of v k + sign sqrt(c^2 k^2 +
 * k^4/4) - omega and slope (the group velocity). k and v may be negative, k != 0. */
static double branch(double omega, double v, double c, double sign, double k, double *slope)
{
    const double p = sqrt(c * c + k * k / 4);

    *slope = v + sign * (c * c + k * k / 2) / p;
    return k * (v + sign * p) - omega;
}

/* From k towards the root; stops when a step goes back or is below the rounding of k. */
static double newton(double omega, double v, double c, double sign, double k, double *slope)
{
    double direction = 0;

    for (int i = 0; i < STEPS; i++) {
        const double value = branch(omega, v, c, sign, k, slope), step = -value / *slope;

        if (!(step * direction >= 0) || !(fabs(step) > DBL_EPSILON * k))
            break;
        direction = step;
        k += step;
    }
    return k;
}

void th_trapped_waves(double omega, const th_flow_point *p, th_trapped *out)
{
    const double v = p->v, c = p->c, b = v * v / 4 - c * c, r = v * sqrt(v * v / 16 + c * c / 2);
    /* k^2 at the top of the band, as in th_band_top */
    const double top = sqrt(b > 0 ? 2 * (b + r) : 2 * c * c * (v - c) * (v + c) / (r - b));

    if (!(omega < th_band_top(v, c))) {
        *out = (th_trapped){.k_s = top, .k_l = top};
        return;
    }
    /* Concave: below its tangent (v - c) k - omega at 0, and negative at k^2 = 4 (v^2 - c^2). */
    out->k_s = newton(omega, v, c, -1, omega / (v - c), &out->speed_s);
    out->k_l = newton(omega, v, c, -1, 2 * sqrt((v - c) * (v + c)), &out->speed_l);
    if (!(out->k_s < top && top < out->k_l)) /* closer to the double root than rounding */
        *out = (th_trapped){.k_s = top, .k_l = top};
}

double th_partner_wave(double omega, const th_flow_point *p)
{
    /* With k = -q: q (sqrt(c^2 + q^2/4) - v) = omega, convex where it is positive. Right of the
     * root: q^2/2 - v q > omega. */
    const double v = p->v;
    double slope;

    return newton(omega, -v, p->c, 1, v + sqrt(v * v + 2 * omega), &slope);
}

double th_trapped_force(double k, const th_flow_point *p)
{
    return k * (p->dv - p->c * p->dc / sqrt(p->c * p->c + k * k / 4));
}
