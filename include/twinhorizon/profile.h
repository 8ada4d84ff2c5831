/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The shape of a mode in space: its density and phase fluctuation at any points. Reduced units.
 * Depends on modes, flow, status.
 *
 * The condensate is psi = sqrt(n) e^{i theta} (1 + eta_t/2 + i phi_t) with the real fields
 *     eta_t = eta e^{-i omega t} + conj(eta e^{-i omega t}),   phi_t likewise.
 * Collecting what goes as e^{-i omega t} and the conjugate of what goes as its conjugate gives the
 * Bogoliubov amplitudes,
 *     psi = e^{i theta} (sqrt(n) + u e^{-i omega t} + conj(v e^{-i omega t})),
 *     u = sqrt(n) (eta/2 + i phi),   v = sqrt(n) (eta/2 - i phi).
 * Then |u|^2 - |v|^2 = 2 n Im(eta phi*), the norm per length, whose integral vanishes for a growing
 * mode of open ends. */
#ifndef TWINHORIZON_PROFILE_H
#define TWINHORIZON_PROFILE_H

#include <twinhorizon/flow.h>
#include <twinhorizon/modes.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/**
 * eta and phi of the mode at a frequency.
 *
 * Scale: the largest |eta| on the positions is 1. Phase: eta is real and positive at the first
 * position, in the order given, where |eta| is largest to a relative 1e-6.
 *
 * @param[in]  flow      borrowed
 * @param[in]  options   as for th_solve
 * @param[in]  omega_re, omega_im  frequency of a mode, as th_solve gives it; not zero
 * @param[in]  x         [count] positions, finite, in any order. Beyond open ends the mode is the
 * sum of its outgoing waves, so that a damped mode rises outwards; on a ring x is wrapped; at and
 * beyond walls the mode is zero
 * @param[in]  count     >= 1
 * @param[out] eta_re, eta_im, phi_re, phi_im  [count]
 *
 * @retval TH_EINVAL     an argument breaks its rule
 * @retval TH_ENONE      the matrix has no eigenvalue next to omega; or on these positions the mode
 *                       is zero everywhere, or somewhere beyond the range of numbers
 * @retval TH_EUNDECIDED omega is so strongly damped that its waves beyond an open end are not known
 * @retval TH_ENOMEM, TH_ECONVERGE  as th_solve
 *
 * After a failure the arrays hold nothing usable. Reentrant. Cost: one band factorisation a step of
 * the iteration for one eigenvalue, some milliseconds, and a few hundred operations a position.
 * What success does not prove: that omega is a mode; eigenvalues of rotated continua and of
 * absorbing layers have shapes too. The shape is as good as the matrix: with subsonic ends, rings
 * and walls it satisfies the equations of motion to the accuracy asked for; the absorbing layer of
 * a supersonic end spoils it by some 1e-5, and its slope at that end by 1e-4. Tests:
 * tests/test_profile.c, tests/check_modes_file.py.
 */
TH_MUST_USE th_status th_mode_profile(const th_flow *flow, const th_solve_options *options,
                                      double omega_re, double omega_im, int count, const double *x,
                                      double *eta_re, double *eta_im, double *phi_re,
                                      double *phi_im, th_error *err);

#ifdef __cplusplus
}
#endif
#endif
