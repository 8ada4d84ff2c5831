/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The matching function of a flow, also called its Evans function: analytic in omega, zero exactly
 * at the modes, with exact ends and no box. What goes in: a flow. What comes out: the function and
 * its derivative at any omega. Shares nothing with the elements and the matrix. Depends on flow,
 * status. All quantities in the flow's reduced units. */
#ifndef TWINHORIZON_MATCHING_H
#define TWINHORIZON_MATCHING_H

#include <stdbool.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

typedef struct th_matching th_matching;

/* F = (re + i im) 2^exponent and dF/domega = (slope_re + i slope_im) 2^exponent. */
typedef struct {
    double re, im;
    double slope_re, slope_im; /* 0 unless asked for */
    long exponent;
} th_matching_value;

/* How finely smooth pieces are cut. The two agree to rounding where both are right; their
 * difference is part of an error bar. */
typedef enum { TH_MATCHING_USUAL, TH_MATCHING_FINE } th_matching_grain;

/**
 * Prepare the matching function of a flow: cut its pieces into steps and expand n, 1/n and n c^2
 * on each. Everything that does not depend on omega is done here.
 *
 * @param[in]  flow       borrowed during the call only, its workspace for as long as the result
 * @param[in]  omega_top  |omega| up to which steps are chosen; larger ones are allowed, less exact
 * @param[in]  grain      step length
 * @retval TH_EINVAL      flow or out is NULL, omega_top is not > 0
 * @retval TH_ECONVERGE   the flow is too rough to be expanded
 * @retval TH_EUNDECIDED  the flow is too long for its shortest waves (more than 500 steps)
 * Tests: tests/test_matching.c.
 */
TH_MUST_USE th_status th_matching_create(const th_flow *flow, double omega_top,
                                         th_matching_grain grain, th_matching **out, th_error *err);

/** Release; NULL is allowed. */
void th_matching_destroy(th_matching *matching);

/**
 * Evaluate F.
 *
 * Open ends: F = E/omega, or E itself where both ends are supersonic (E(0) is then not zero: no
 * solution that is constant far upstream leaves there); E the determinant of the two solutions that
 * leave to the left and the two that leave to the right, end vectors divided by (k1 - k2) so that E
 * is analytic, and the plane-wave factors of the tails between ends and horizons taken out. Walls:
 * F = E with the fluctuation zero at both. Ring: F = E/omega^2, E = det(M - 1) with M the transfer
 * matrix once around, evaluated in cyclic form.
 *
 * @param[in]  slope  also compute dF/domega (exact, carried through all steps)
 * @retval TH_EINVAL     omega is zero or not finite
 * @retval TH_ECONVERGE  no series converged: |omega| is far beyond omega_top
 *
 * F(-omega*) = F(omega)* up to a constant factor. Below the real axis the outgoing waves of open
 * ends are followed by continuity from above, so that damped modes are zeros too.
 * Reentrant; a matching may be evaluated by many threads at once. Allocates nothing for open ends
 * and walls. Source: "A topological invariant arising in the stability analysis of travelling
 * waves", J. reine angew. Math. 410, 167 (1990).
 */
TH_MUST_USE th_status th_matching_eval(const th_matching *matching, double omega_re,
                                       double omega_im, bool slope, th_matching_value *out,
                                       th_error *err);

/**
 * Newton's method on F from a guess.
 *
 * @param[in]     reach  give up when the iterate strays farther than this from the guess
 * @param[in,out] omega_re, omega_im  guess, then root
 * @param[out]    last   size of the last step: a measure of the root's rounding error
 * @retval TH_ECONVERGE  no root within reach
 */
TH_MUST_USE th_status th_matching_polish(const th_matching *matching, double reach,
                                         double *omega_re, double *omega_im, double *last,
                                         th_error *err);

#ifdef __cplusplus
}
#endif
#endif
