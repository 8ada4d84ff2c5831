/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The modes of a pocket in the semiclassical (WKB) picture: a wave of negative energy goes round
 * between two turning points and gains by pair creation at either horizon. What goes in: a smooth
 * flow and one of its pockets. What comes out: Bohr-Sommerfeld frequencies, round-trip times,
 * growth rates. To be set beside the exact modes, never in their place. Depends on flow, status.
 * Reduced units.
 *
 * Symbols. At a frequency omega in the pocket: k_s < k_l, the two waves of negative energy,
 * omega = v k - sqrt(c^2 k^2 + k^4/4), k > 0, which merge at the turning points; k_p < 0, the
 * short wave of positive energy that moves upstream, omega = v k + sqrt(c^2 k^2 + k^4/4). Horizons
 * b (black-hole) and w (white-hole) at x_b < x_w with surface gravities kappa; e = omega/kappa.
 *
 *   action S = Int (k_l - k_s) dx between the turning points = 2 pi (n + 1/2)
 *   round trip T = -dS/domega
 *   at a horizon |beta|^2 = 1/(exp(2 pi e) - 1), |alpha|^2 = 1 + |beta|^2
 *   once round, the wave is multiplied by alpha_b alpha_w + beta_b beta_w exp(i phase)
 *   phase = Int k_l dx (between the turning points) + Int |k_p| dx (between the horizons)
 *           + (1 + (ln 2)/3) (e_b + e_w)
 *
 * The last term is what the logarithms of k_s and k_p leave at a horizon with v - c linear in x;
 * the constant phases of both horizons cancel. Derived from the connection of the three waves at a
 * horizon in k space; background, from memory: "Black hole lasers, a mode analysis",
 * Phys. Rev. D 81, 084042 (2010); "Black/white hole radiation from dispersive theories",
 * Phys. Rev. D 79, 124008 (2009).
 *
 * How far to trust it, measured against th_solve (tests/test_semiclassics.c prints the tables).
 * Flat: n, v uniform, c varied, v = 1, c = 1.5/0.5/1.5. Matched: n/c uniform.
 *
 * - omega is too high. Above 0.7 omega_max by 0.01 to 0.02 thermal^2 of itself (0.04 in one
 *   pocket), thermal = 3.4 to 0.4; lower levels by 2 to 10 % at e = 0.3, by 10 to 75 % near 0.1.
 * - omega_uniform is better than omega wherever e > 0.14, mostly a third of its error or less: 0.01
 *   to 8 % for e > 0.15. It is no better than omega below e = 0.1.
 * - growth, matched, 0.1 < e < 1.3, not the highest level: follows the ups and downs from level to
 *   level. Off by less than 0.35 growth_high in three pockets, 0.8 in the worst of six: within
 *   35 % where the horizons help each other, of the right order where they do not, and not even
 *   that where they nearly cancel. The highest level, close to omega_max, was off by factors of 4
 *   to 36, and above e = 1.5 rates are not the horizons' own.
 * - growth, flat: a lower estimate only. The trapped wave also emits phonons that move downstream,
 *   on the slopes of n/c, and this falls off more slowly with e than beta. Exact rates were 1 to
 *   4.5 times growth for 0.06 < e < 0.4; for e = 0.4 to 1.2 mostly 4 to 120 times growth, and up to
 *   14 times growth_high; for e = 2 up to 10^4 times.
 *
 * So: trust no level with e below 0.1, no frequency to better than 10 % when thermal is above 3,
 * and growth only when impedance is near 0, or e below 0.4 and then as an order of magnitude.
 */
#ifndef TWINHORIZON_SEMICLASSICS_H
#define TWINHORIZON_SEMICLASSICS_H

#include <twinhorizon/flow.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/* Levels listed at the most, those of highest frequency. */
enum { TH_SEMICLASSICS_MAX = 400 };

/* One level. */
typedef struct {
    int level;            /* n = 0, 1, ... of action = 2 pi (n + 1/2); 0 is the highest frequency */
    double omega;         /* > 0, below the pocket's omega_max */
    double left, right;   /* turning points, inside the pocket (beyond the seam of a ring as
                             th_pocket.right) */
    double round_trip;    /* time for once there and back, |d action/d omega| */
    double omega_uniform; /* omega + (f(e_b) + f(e_w) - g)/T, f(e) = arg Gamma(1 + i e) - e ln e + e
                             - pi/4 and g = arg(1 + exp(-pi (e_b + e_w) + i phase)), both at omega:
                             the horizons' own phases; 0 when they exceed omega T */
    double phase;         /* of the second way round, see above; not reduced to 2 pi */
    double growth;        /* ln |alpha_b alpha_w + beta_b beta_w e^{i phase}| / round_trip */
    double growth_low, growth_high;      /* least and largest over all phases */
    double created_black, created_white; /* |beta|^2 of either horizon */
} th_semiclassical_mode;

typedef struct {
    double levels;       /* action at omega = 0, Int 2 sqrt(v^2 - c^2) dx over the pocket, over
                            2 pi: levels lie at n + 1/2 < levels */
    double omega_max;    /* of the pocket */
    double omega_single; /* equal to omega_max where the top of the band has one maximum; else the
                            lowest dip between two: above it there are more than two turning points
                            and no level is listed, so that mode[0].level > 0 is possible */
    double kappa_black, kappa_white;
    double thermal;   /* larger kappa over omega_max: small when emission is thermal ... */
    double steepness; /* ... and larger kappa over c^2 at its horizon: about 1 when
                         edges are as narrow as a healing length */
    double roughness; /* largest |dk/dx|/k^2 of k_s and k_l of the lowest level, at the two places
                         where the top of the band is half-way between its omega and omega_single
                         (so on the slopes, also when the middle is uniform); 0 without levels. It
                         was about 0.6/e of that level: above 6 that level is not to be trusted; it
                         says nothing about the others */
    double impedance; /* how much ln(n/c) varies between the horizons, largest less smallest: the
                         phonon's impedance. 0: no phonons are reflected, see above */
    int count;
    th_semiclassical_mode *mode; /* [count] by falling frequency */
} th_semiclassics;

/**
 * Levels of one pocket.
 * @param[in]  flow    borrowed
 * @param[in]  pocket  index into th_flow_pockets
 * @param[out] out     zero before the call; th_semiclassics_clear releases; zero after a failure
 * @retval TH_OK      out->count may be 0: the pocket holds less than half a wave
 * @retval TH_EINVAL  pocket out of range, flow or out is NULL
 * @retval TH_ENONE   a horizon of the pocket is sharp or kappa there is 0, or n, v or c jumps
 *                    inside: no surface gravity, no WKB; or there are more than two turning points
 *                    at the frequencies of all levels
 * @retval TH_ENOMEM, TH_ECONVERGE
 * A level below a millionth of omega_max is not listed. Reentrant. Cost: about a millisecond a
 * level.
 * Tests: tests/test_semiclassics.c.
 */
TH_MUST_USE th_status th_semiclassics_find(const th_flow *flow, int pocket, th_semiclassics *out,
                                           th_error *err);

/** Release and set to zero; NULL is allowed. */
void th_semiclassics_clear(th_semiclassics *semiclassics);

#ifdef __cplusplus
}
#endif
#endif
