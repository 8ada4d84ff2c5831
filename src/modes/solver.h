/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What the parts of th_solve share. Private to modes. Depends on level, matching, census. */
#ifndef TH_MODES_SOLVER_H
#define TH_MODES_SOLVER_H

#include <complex.h>
#include <stdbool.h>
#include "modes/level.h"
#include "twinhorizon/census.h"
#include "twinhorizon/matching.h"
#include "twinhorizon/modes.h"

typedef struct {
    const th_flow *flow;
    const th_solve_options *options;
    th_solution *s;
    int room;                  /* capacity of s->mode */
    th_level level[TH_LEVELS]; /* matrix.c */
    int neutral;               /* rings, walls: dense eigenvalues in the census' strip */
    th_matching *usual, *fine;
    th_census census;
    double (*root)[2]; /* [roots] growing modes found by the census, open ends */
    int roots;
} th_solver;

/** Ends that conserve energy: rings and walls. */
bool th_solver_conserving(const th_solver *w);

/** Frequency of a listed mode. */
double complex th_mode_omega(const th_mode *mode);

/* ---- matrix.c: modes from the matrices ------------------------------------------------------- */

/** Fill the list from scratch with ends that resolve modes down to omega_low. Errors as th_solve.
 */
TH_MUST_USE th_status th_matrix_modes(th_solver *w, double omega_low, th_error *err);

/** Put modes that the census found and the list lacks into it, with the matrix's eigenvalue next
 * to each. */
TH_MUST_USE th_status th_matrix_complete(th_solver *w, th_error *err);

/** Smallest omega_low of attempt i, relative to omega_top; 0 when there is no such attempt. */
double th_matrix_reach(int attempt);

/* ---- certify.c: polishing, census, verdict --------------------------------------------------- */

/** Matching functions, census and static index. */
TH_MUST_USE th_status th_certify_prepare(th_solver *w, th_error *err);

/** Polish the listed modes, put them on axes, label and count them. */
TH_MUST_USE th_status th_certify_modes(th_solver *w, th_error *err);

/** Compare all counts and say the verdict. */
void th_certify_decide(th_solver *w);

#endif
