/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Seeded growth: how large the density ripple of the growing modes is when it starts from the
 * fluctuations of the condensate itself. What goes in: a flow, its modes, the absolute density, a
 * temperature. What comes out: root-mean-square density contrast against time. Depends on modes,
 * flow, status.
 *
 * Units: the flow's reduced ones (hbar = m = 1). With psi = sqrt(n) e^{i theta} (1 + eta/2 + i phi)
 * the contrast delta n/n is eta; [n(x) eta(x), phi(x')] = i delta(x - x'), n the absolute number
 * per reduced length.
 *
 * Initial state: density matrix exp(-Q/T), at T = 0 the ground state, of the energy in the frame
 * that moves with the condensate, Q = 1/2 Int n (phi'^2 + c^2 eta^2 + eta'^2/4) dx. It is the state
 * of a condensate in equilibrium with itself that is given its flow at t = 0, fast compared with
 * the growth. Each growing mode j takes its share of it and then goes as e^{-i omega_j t}. */
#ifndef TWINHORIZON_SEED_H
#define TWINHORIZON_SEED_H

#include <stdbool.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/modes.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

typedef struct {
    double density;     /* line density far upstream (of walls: at the upstream wall), atoms per
                           reduced length, > 0; the flow's own density only gives its shape */
    double temperature; /* k_B T, reduced energy, >= 0; 0: quantum fluctuations alone */
} th_seed_options;

/* One growing mode; with Re omega > 0 it stands for both signs, whose sum is real. */
typedef struct {
    int mode; /* index in th_solution.mode */
    double omega_re, omega_im;
    bool known;       /* false: too slow to be projected, left out of all sums; the rest is 0 */
    double amplitude; /* a: rms contrast at `place` is a e^{omega_im t}, averaged over the
                         oscillation when omega_re > 0 */
    double error;     /* of a, absolute: from two discretisations */
    double place;     /* where in the pockets the mode is loudest */
    double squeezing; /* |<b^2>|/<|b|^2> of its complex amplitude b, 0..1: at a given time the mean
                         square lies within 1 +- this of the average; 1 when omega_re = 0 */
} th_seed_mode;

typedef struct th_seed th_seed;

/* A mode slower than the fastest needs a longer stretch of the flow around it to be projected; the
 * slowest are left out when they would need more than this many unknowns. Measured with two modes:
 * 1 s of one core for every 1e4. */
enum { TH_SEED_UNKNOWNS_MAX = 80000 };

/**
 * Project the initial state on every growing mode.
 *
 * Open ends and walls. (On a ring the state of the total number and of the circulation is a matter
 * of preparation: not done.)
 *
 * @param[in]  flow      borrowed during the call only
 * @param[in]  solution  of th_solve for this flow; borrowed during the call only
 * @param[out] out       owned by the caller; NULL on failure
 *
 * @retval TH_OK          out may hold no mode (a stable flow) or modes that are not `known`
 * @retval TH_EINVAL      an option breaks its rule, the flow is a ring
 * @retval TH_EUNDECIDED  a mode of the solution is not found on the elements used here, or the two
 *                        discretisations disagree by more than a tenth
 * @retval TH_ENOMEM, TH_ECONVERGE
 *
 * Reentrant, deterministic. Cost: in proportion to the unknowns that the slowest mode needs; 0.1 s
 * of one core when all are fast, 5 s at 57000. Error: from a second, coarser discretisation.
 *
 * What success does not prove: linear theory ends where the contrast comes near 1. A real
 * preparation (a ramp, a step that sweeps through the gas) leaves more excitations than Q's
 * equilibrium. Thermal phase fluctuations of one dimension are taken as small on the length of the
 * mode: it must be shorter than 2 n/T (reduced), the length on which <e^{i phi}> falls by e.
 *
 * Source: "Sonic analog of gravitational black holes in Bose-Einstein condensates", Phys. Rev.
 * Lett. 85, 4643 (2000), and "Black hole lasers in Bose-Einstein condensates", New J. Phys. 12,
 * 095015 (2010), for modes of complex frequency and their partners; "Theory of Bose-Einstein
 * condensation in trapped gases", Rev. Mod. Phys. 71, 463 (1999), for Q and the commutator (all
 * from memory).
 *
 * Tests: tests/test_seed.c, tests/check_seed.py.
 */
TH_MUST_USE th_status th_seed_create(const th_flow *flow, const th_solution *solution,
                                     const th_seed_options *options, th_seed **out, th_error *err);

/** Release; NULL is allowed. */
void th_seed_destroy(th_seed *seed);

/** The growing modes in the order of the solution. @param[out] count  >= 0 */
const th_seed_mode *th_seed_modes(const th_seed *seed, int *count);

/**
 * Largest rms contrast of the sum of all known growing modes in the pockets at a time, averaged
 * over oscillations (interference of modes of different Re omega averages out; that of two purely
 * growing ones is kept).
 * @param[in]  time      reduced, since the flow began
 * @param[out] contrast  0 when no mode is known
 * @param[out] place     where; 0 when no mode is known
 * @retval TH_EINVAL  time is not finite, or the contrast is beyond the range of numbers
 */
TH_MUST_USE th_status th_seed_total(const th_seed *seed, double time, double *contrast,
                                    double *place, th_error *err);

/**
 * First time >= 0 at which th_seed_total reaches a contrast.
 * @param[in]  contrast  > 0; a value near or above 1 is beyond linear theory
 * @param[out] time      0 when it is there from the start
 * @retval TH_EINVAL  contrast is not > 0 and finite
 * @retval TH_ENONE   no mode is known
 */
TH_MUST_USE th_status th_seed_time(const th_seed *seed, double contrast, double *time,
                                   th_error *err);

/* Averaged over oscillations, or at this very instant with all interference. */
typedef enum { TH_SEED_AVERAGE, TH_SEED_INSTANT } th_seed_kind;

/**
 * The rms contrast of the sum of all known growing modes at positions. It is the growing part only:
 * the contrast of a real picture also holds what does not grow.
 * @param[in]  x    [count] finite positions; far outside the pockets and beyond walls the modes are
 * 0
 * @param[out] rms  [count]
 * @retval TH_EINVAL  an argument breaks its rule, or a value is beyond the range of numbers
 */
TH_MUST_USE th_status th_seed_contrast(const th_seed *seed, th_seed_kind kind, double time,
                                       int count, const double *x, double *rms, th_error *err);

#ifdef __cplusplus
}
#endif
#endif
