/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Roots of the quartic dispersion relation by simultaneous (Ehrlich-Aberth) iteration: all four
 * at once, small roots to full relative accuracy. In: omega, v, c. Out: k[4]. Calls status.
 * Symbols: q(k) = k^4/4 + (c^2 - v^2) k^2 + 2 omega v k - omega^2. Proof: tests/test_mesh.c. */
#include "dispersion.h"

#include <float.h>
#include <gsl/gsl_math.h>

static int before(double complex a, double complex b)
{
    if (cimag(a) != cimag(b))
        return cimag(a) > cimag(b);
    return creal(a) > creal(b);
}

static void sort(double complex k[4])
{
    for (int i = 1; i < 4; i++)
        for (int j = i; j > 0 && before(k[j], k[j - 1]); j--) {
            const double complex swap = k[j];

            k[j] = k[j - 1];
            k[j - 1] = swap;
        }
}

/* Sum of the sizes of the terms of q(x): what its residual and its rounding are measured by. */
static double term_sizes(double complex x, double complex a2, double complex a1, double complex a0)
{
    const double r = cabs(x);

    return ((r * r + cabs(a2)) * r + cabs(a1)) * r + cabs(a0);
}

th_status th_dispersion_roots(double complex omega, double v, double c, double complex k[4],
                              th_error *err)
{
    /* Lengths are scaled so that the largest coefficient is of order one (Fujiwara's bound). */
    const double size =
        2.0 * fmax(sqrt(4.0 * fabs(c * c - v * v)),
                   fmax(cbrt(8.0 * cabs(omega) * fabs(v)), sqrt(2.0 * cabs(omega))));
    const double complex a2 = 4.0 * (c * c - v * v) / (size * size);
    const double complex a1 = 8.0 * omega * v / (size * size * size);
    const double complex a0 = -4.0 * (omega / (size * size)) * (omega / (size * size));
    const int steps = 200; /* cubic convergence: about ten are needed, double roots take fifty */
    const double settled = 1e-10; /* residual; settled roots have 1e-15, others of order one */
    double complex z[4];
    int moving = 4;

    if (omega == 0.0 && isfinite(size) && c > 0.0) { /* closed form */
        k[0] = 2.0 * csqrt((v - c) * (v + c));
        k[1] = k[2] = 0.0;
        k[3] = -k[0];
        sort(k);
        return TH_OK;
    }
    if (!isfinite(size + cabs(omega)) || !(c > 0.0)) /* fmax skips a NaN */
        return th_fail(err, TH_ECONVERGE, "wave numbers: omega = %g%+gi, v = %g, c = %g",
                       creal(omega), cimag(omega), v, c);
    for (int i = 0; i < 4; i++) /* off every axis of symmetry */
        z[i] = 0.45 * cexp(I * (0.4 + M_PI_2 * i)) * (1.0 + 0.07 * i);
    for (int s = 0; s < steps && moving > 0; s++) {
        moving = 0;
        for (int i = 0; i < 4; i++) {
            const double complex x = z[i];
            const double complex q = ((x * x + a2) * x + a1) * x + a0;
            const double complex dq = (4.0 * x * x + 2.0 * a2) * x + a1;
            const double r = cabs(x);
            /* size of the rounding error of q(x): below it the root cannot be improved */
            const double noise = 4.0 * DBL_EPSILON * term_sizes(x, a2, a1, a0);
            double complex repel = 0.0, step;

            if (cabs(q) <= noise)
                continue;
            for (int j = 0; j < 4; j++)
                if (j != i && z[j] != x)
                    repel += 1.0 / (x - z[j]);
            step = q / (dq - q * repel);
            if (!(isfinite(creal(step)) && isfinite(cimag(step))))
                step = 1e-3 * (1.0 + 0.3 * I) * (r + 1e-3); /* stationary point: step aside */
            z[i] = x - step;
            if (cabs(step) > DBL_EPSILON * r)
                moving++;
        }
    }
    for (int i = 0; i < 4; i++) {
        const double complex q = ((z[i] * z[i] + a2) * z[i] + a1) * z[i] + a0;

        /* |omega| below about 1e-110: a root that nearly vanishes is not reached in `steps` */
        if (!(cabs(q) <= settled * term_sizes(z[i], a2, a1, a0)))
            return th_fail(err, TH_ECONVERGE, "wave numbers: omega = %g%+gi, v = %g, c = %g",
                           creal(omega), cimag(omega), v, c);
        k[i] = z[i] * size;
    }
    sort(k);
    return TH_OK;
}
