/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Stationary flows in an external potential, private to src/flow. What goes in: a trap, the state
 * far upstream, a first guess. What comes out: a(x) = sqrt(n/n_u) on elements, to rounding.
 *
 * The stationary Gross-Pitaevskii equation at fixed flux (hbar = m = 1), rho = a^2 = n/n_u:
 *     a'' = 2 (V + H(rho)) a,    H = h(n) - h(n_u) + (v_u^2/2) (1/rho^2 - 1).                  (1)
 * A uniform state V + H = 0 is a saddle of (1) where v < c, reached as exp(-k |x|) with
 * k = 2 sqrt(c^2 - v^2), and a centre where v > c. Proved by tests/test_potential.c. */
#ifndef TH_FLOW_STATIONARY_H
#define TH_FLOW_STATIONARY_H

#include "../gll.h"
#include "state.h"
#include "trap.h"

/* Far upstream. */
typedef struct {
    th_state_eq state;
    double v_u; /* < state.c_u */
} th_upstream;

/** H(rho) of (1). */
double th_upstream_excess(const th_upstream *up, double rho);
/** c^2 - v^2 at rho; rho H'(rho). */
double th_upstream_room(const th_upstream *up, double rho);
/** (a')^2 on the two orbits that leave the upstream state where V = 0, over (rho - 1)^2; < 0
 * below the bottom of the grey soliton. */
double th_upstream_orbit(const th_upstream *up, double rho);
/** Density of the bottom of the grey soliton: zero of th_upstream_orbit below 1; m^2 for contact.
 */
double th_upstream_bottom(const th_upstream *up);
/** Density < 1 of the supersonic uniform state with V = v, 0 when there is none; the subsonic one
 * when `subsonic`. */
double th_upstream_uniform(const th_upstream *up, double v, bool subsonic);

typedef struct {
    const th_trap *trap;
    th_upstream up;
    double depth;
    bool half;       /* solved up to the plateau only, the rest is its mirror image or uniform */
    bool free_depth; /* depth is found: V + H = 0 at the plateau */
    double end;      /* rho far downstream */
    double scale;    /* of the elements, see th_stationary_create */
    const th_gll *rule;
    int elements;
    double *at;      /* [elements + 1] */
    int *piece;      /* [elements] of the trap */
    double *a;       /* [elements * order + 1] at the nodes */
    double *da;      /* [elements][order + 1] a' */
    double residual; /* largest |change of a' - Int 2 (V + H) a| over half an element, over c_u */
} th_stationary;

/**
 * Place elements: cut at edges, as fine as features and the solution's own length ask for.
 * @param[in] scale  shortest length of the solution between the features
 */
TH_MUST_USE th_status th_stationary_create(const th_trap *trap, const th_upstream *up, bool half,
                                           double end, double scale, const th_gll *rule,
                                           th_stationary *out, th_error *err);
void th_stationary_clear(th_stationary *s);

/** x of node j of element e. */
double th_stationary_node(const th_stationary *s, int e, int j);

/** Values of one solution at the nodes of another. */
void th_stationary_carry(const th_stationary *from, th_stationary *to);

/**
 * Newton's method on (1) from the values in a (and depth), on finer elements while the residual is
 * above TH_STATIONARY_RESIDUAL.
 * @retval TH_ECONVERGE  it does not settle on a positive solution, or not to this residual
 */
#define TH_STATIONARY_RESIDUAL 1e-11
TH_MUST_USE th_status th_stationary_solve(th_stationary *s, th_error *err);

/** a, a', a'' at x, by the elements and (1); uniform beyond them. `piece` of the trap decides at
 * edges. */
void th_stationary_eval(const th_stationary *s, int piece, double x, double a[3]);

#endif
