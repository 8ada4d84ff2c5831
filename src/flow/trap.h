/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * External potentials V(x) = depth f(x), private to src/flow: a form f between edges, constant
 * outside them. What goes in: the profile's name and lengths, or a table. What comes out: V at any
 * x. A piece lies between neighbouring edges; f may jump at an edge and is smooth between.
 * Lengths in reduced units. Proved by tests/test_potential.c. */
#ifndef TH_FLOW_TRAP_H
#define TH_FLOW_TRAP_H

#include "smooth.h"
#include "twinhorizon/flow.h"

/* The words of the key `profile`, in the order of the enum. */
typedef enum {
    TH_TRAP_WELL,     /* -1 between -gap/2 and gap/2 */
    TH_TRAP_STEP,     /* -1 beyond 0 */
    TH_TRAP_BARRIER,  /* a Gaussian at 0 */
    TH_TRAP_BARRIERS, /* Gaussians at -gap/2 and gap/2 */
    TH_TRAP_TABLE     /* a smooth curve through the rows of a table, depth 1 */
} th_trap_kind;
extern const char *const th_trap_word[];

enum { TH_TRAP_PIECES_MAX = 3 };

typedef struct {
    th_trap_kind kind;
    double half;  /* gap/2 */
    double width; /* of tanh edges, 0 sharp; of Gaussians exp(-x^2/width^2) */
    int pieces;
    double edge[TH_TRAP_PIECES_MAX + 1]; /* f is constant to rounding beyond the outer ones */
    double core[2];                      /* f is constant to a millionth beyond these */
    int features;
    th_feature feature[2];
    th_smooth fit;      /* of a table, 0 intervals else; smooth between its knots */
    double first, last; /* value of a table at its left end, and how much more at its right one */
} th_trap;

/**
 * @param[in] table  of TH_TRAP_TABLE: columns x and potential; NULL else
 * @retval TH_EINVAL  err->key is width (a barrier needs one) or file (no such column, not constant
 *                    at an end)
 * Release with th_trap_clear, after failures too.
 */
TH_MUST_USE th_status th_trap_make(th_trap_kind kind, double gap, double width,
                                   const th_data *table, th_trap *out, th_error *err);
void th_trap_clear(th_trap *trap);

/** f at x on a piece; -1 and pieces are the constant outside. */
double th_trap_value(const th_trap *trap, int piece, double x);

/** The first place > x where f is not smooth, an edge or a knot; HUGE_VAL: none. */
double th_trap_next_cut(const th_trap *trap, double x);

/** The piece that holds x, the right one at an edge. */
int th_trap_piece(const th_trap *trap, double x);

/** Where a plateau is: 0 between two edges, beyond the only one. */
double th_trap_plateau(const th_trap *trap);

#endif
