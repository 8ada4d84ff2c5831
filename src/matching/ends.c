/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Outgoing waves of a uniform end. In: the end, omega. Out: a frame of two solutions. Calls
 * dispersion.
 * The wave numbers of the outgoing pair enter only through their sum s and product p, so that the
 * frame stays analytic where the two coincide: the quartic is (k^2 - s k + p)(k^2 + s k + q) with
 *     p + q - s^2 = 4 (c^2 - v^2),   s (p - q) = 8 omega v,   p q = -4 omega^2.
 * Above the real axis the waves kept on the right are the two with Im k > 0; on it those with
 * outward group velocity; below it they are followed along an arc |omega| = const.
 * Symbols: k wave number, v speed, c sound speed, n density. Proof: tests/test_matching.c. */
#include "matching/ends.h"

#include <gsl/gsl_math.h>

#include "dispersion.h"

/* dk/domega = -D_omega/D_k with D = (omega - v k)^2 - c^2 k^2 - k^4/4. */
static double complex wave_slope(const th_end *e, double complex omega, double complex k)
{
    const double complex comoving = omega - e->speed * k;
    const double complex by_k =
        -2.0 * e->speed * comoving - 2.0 * e->sound * e->sound * k - k * k * k;

    return -2.0 * comoving / by_k;
}

/* Is a wave kept on the right? For Im omega >= 0. */
static bool decays_right(const th_end *e, double complex omega, double complex k)
{
    const double noise = 1e-9; /* Im k of travelling waves on the real axis is rounding, 1e-15 */

    if (fabs(cimag(k)) > noise * cabs(k))
        return cimag(k) > 0.0;
    return creal(wave_slope(e, omega, k)) > 0.0; /* group velocity */
}

/* Roots at omega with Im omega >= 0; kept[0..1] go to this end's side, the others follow. */
static th_status split_above(const th_end *e, double complex omega, double complex kept[4],
                             th_error *err)
{
    double complex k[4];
    int out = 0, in = 2;
    th_status st = th_dispersion_roots(omega, e->speed, e->sound, k, err);

    for (int i = 0; st == TH_OK && i < 4; i++) {
        const bool right = decays_right(e, omega, k[i]);

        if (right == (e->side > 0) && out < 2)
            kept[out++] = k[i];
        else if (in < 4)
            kept[in++] = k[i];
    }
    if (st == TH_OK && (out != 2 || in != 4))
        st = th_fail(err, TH_ECONVERGE,
                     "matching: the outgoing waves at omega = %g%+gi (scaled) "
                     "cannot be told from the others",
                     creal(omega), cimag(omega));
    return st;
}

/* Carry the split from omega to a near frequency; *ok false when the step is too long to be sure.
 */
static th_status follow(const th_end *e, double complex omega, double complex next,
                        double complex kept[4], bool *ok, th_error *err)
{
    double complex k[4], found[4];
    bool taken[4] = {false};
    th_status st = th_dispersion_roots(next, e->speed, e->sound, k, err);

    *ok = true;
    for (int i = 0; st == TH_OK && i < 4; i++) {
        const double complex guess = kept[i] + wave_slope(e, omega, kept[i]) * (next - omega);
        double nearest = HUGE_VAL, second = HUGE_VAL;
        int best = 0;

        for (int j = 0; j < 4; j++) {
            const double apart = cabs(k[j] - guess);

            if (apart < nearest) {
                second = nearest;
                nearest = apart;
                best = j;
            } else if (apart < second) {
                second = apart;
            }
        }
        *ok = *ok && !taken[best] && nearest < 0.2 * second;
        taken[best] = true;
        found[i] = k[best];
    }
    for (int i = 0; st == TH_OK && *ok && i < 4; i++)
        kept[i] = found[i];
    return st;
}

/* Outgoing waves at omega with Re omega >= 0. */
static th_status split(const th_end *e, double complex omega, double complex kept[4], th_error *err)
{
    const double from = 0.4 * M_PI, to = carg(omega); /* start well above the real axis */
    const double shortest = 1e-6;
    double at = from, step = 0.3;
    th_status st;

    if (cimag(omega) >= 0.0)
        return split_above(e, omega, kept, err);
    st = split_above(e, cabs(omega) * cexp(I * from), kept, err);
    while (st == TH_OK && at > to) {
        const double next = fmax(to, at - step);
        bool ok;

        st = follow(e, cabs(omega) * cexp(I * at),
                    next == to ? omega : cabs(omega) * cexp(I * next), kept, &ok, err);
        if (st == TH_OK && ok)
            at = next;
        step = ok ? fmin(0.3, 2.0 * step) : 0.5 * step;
        if (st == TH_OK && step < shortest)
            return th_fail(err, TH_ECONVERGE,
                           "matching: the outgoing waves cannot be followed to omega = %g%+gi "
                           "(scaled)",
                           creal(omega), cimag(omega));
    }
    return st;
}

/* Derivatives of s, p with respect to omega: the three relations above, differentiated. */
static void pair_slopes(const th_end *e, double complex omega, double complex s, double complex p,
                        double complex q, double complex *ds, double complex *dp)
{
    /* dp = 2 s ds - dq; (p - q) ds + s (dp - dq) = 8 v; q dp + p dq = -8 omega
     * eliminate dp: ds (p - q + 2 s^2) - 2 s dq = 8 v; 2 s q ds + (p - q) dq = -8 omega */
    const double complex a = p - q + 2.0 * s * s, b = -2.0 * s, c = 2.0 * s * q, d = p - q;
    const double complex r1 = 8.0 * e->speed, r2 = -8.0 * omega;
    const double complex determinant = a * d - b * c;
    const double complex dq = (a * r2 - c * r1) / determinant;

    *ds = (r1 * d - b * r2) / determinant;
    *dp = 2.0 * s * *ds - dq;
}

/* Close to a double root each wave number is known to the root of rounding only, but s, p, q are
 * simple zeros of the three relations: one step of Newton's method brings them to rounding. */
static void sharpen(const th_end *e, double complex omega, double complex *s, double complex *p,
                    double complex *q)
{
    const double stiff = 4.0 * (e->sound - e->speed) * (e->sound + e->speed);
    const double complex r1 = *p + *q - *s * *s - stiff;
    const double complex r2 = *s * (*p - *q) - 8.0 * omega * e->speed;
    const double complex r3 = *p * *q + 4.0 * omega * omega;
    /* dp = 2 s ds - dq - r1 eliminated, as in pair_slopes */
    const double complex a = *p - *q + 2.0 * *s * *s, b = -2.0 * *s, c = 2.0 * *s * *q, d = *p - *q;
    const double complex right1 = *s * r1 - r2, right2 = *q * r1 - r3;
    const double complex determinant = a * d - b * c;
    const double complex ds = (right1 * d - b * right2) / determinant;
    const double complex dq = (a * right2 - c * right1) / determinant;

    *p += 2.0 * *s * ds - dq - r1;
    *s += ds;
    *q += dq;
}

th_status th_end_frame(const th_end *end, double complex omega, th_frame *out, th_pair_sum *sum,
                       th_error *err)
{
    const double n = end->density, v = end->speed;
    const double nearly_double = 1e-3; /* wave numbers that differ by more are good to 1e-13 */
    const bool mirrored = creal(omega) < 0.0; /* k -> -k* when omega -> -omega* */
    const double complex at = mirrored ? -conj(omega) : omega;
    double complex k[4], s, p, q, ds, dp, ratio, dratio;
    th_status st = split(end, at, k, err);

    if (st != TH_OK)
        return st;
    s = k[0] + k[1];
    p = k[0] * k[1];
    q = k[2] * k[3];
    if (cabs(k[0] - k[1]) < nearly_double * cabs(k[0]) ||
        cabs(k[2] - k[3]) < nearly_double * cabs(k[2]))
        sharpen(end, at, &s, &p, &q);
    pair_slopes(end, at, s, p, q, &ds, &dp);
    if (mirrored) {
        s = -conj(s);
        p = conj(p);
        ds = conj(ds);
        dp = -conj(dp);
    }
    *sum = (th_pair_sum){s, ds};
    ratio = omega / p;
    dratio = (1.0 - ratio * dp) / p;
    /* divided difference of u over the pair, and the rest of its linear interpolation */
    out->y[0][0] = 1.0;
    out->y[0][1] = I * n * s;
    out->y[0][2] = I * ratio;
    out->y[0][3] = -n * v;
    out->z[0][0] = 0.0;
    out->z[0][1] = I * n * ds;
    out->z[0][2] = I * dratio;
    out->z[0][3] = 0.0;
    out->y[1][0] = 0.0;
    out->y[1][1] = -I * n * p;
    out->y[1][2] = -I * (ratio * s - v);
    out->y[1][3] = n * omega;
    out->z[1][0] = 0.0;
    out->z[1][1] = -I * n * dp;
    out->z[1][2] = -I * (dratio * s + ratio * ds);
    out->z[1][3] = n;
    return TH_OK;
}
