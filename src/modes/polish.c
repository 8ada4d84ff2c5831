/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A mode to the last digits. In: two grains of the matching function, a start. Out: root and error
 * bar. Calls matching. Proof: tests/check_precision.py (20-digit roots lie within the bars). */
#include "modes/polish.h"

#include <float.h>
#include <math.h>

/* Rounding of the root, in units of the largest frequency at hand. Measured on 320 growing modes of
 * random flows against 20-digit roots (tests/check_precision.py --random): up to 14. */
static const double rounding = 32.0 * DBL_EPSILON;

th_status th_polish(const th_matching *usual, const th_matching *fine, double scale,
                    double complex from, double reach, double complex *root, double *error)
{
    double re[2] = {creal(from), creal(from)}, im[2] = {cimag(from), cimag(from)}, last[2];
    th_status st = th_matching_polish(usual, reach, &re[0], &im[0], &last[0], NULL);

    if (st == TH_OK) {
        re[1] = re[0]; /* the other grain starts next to its root: one or two steps are left */
        im[1] = im[0];
        st = th_matching_polish(fine, reach, &re[1], &im[1], &last[1], NULL);
    }
    if (st != TH_OK)
        return st;
    *root = re[1] + I * im[1];
    *error = 2.0 * (hypot(re[0] - re[1], im[0] - im[1]) + fmax(last[0], last[1])) +
             rounding * fmax(cabs(from), scale);
    return TH_OK;
}

double th_polish_scale(const th_flow *flow, double omega_top)
{
    const double sound = th_flow_sound_max(flow);

    return fmax(omega_top, 0.25 * sound * sound);
}
