/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Modes of one flow: complex frequencies with error bars, labels, and how they were confirmed.
 * All quantities in the flow's reduced units. Depends on flow, index, status. */
#ifndef TWINHORIZON_MODES_H
#define TWINHORIZON_MODES_H

#include <stdbool.h>
#include <stdio.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/* unstable: Im omega > 0 beyond its error bar. trapped: not growing, more than half of it in the
 * pocket, negative norm: it would lase if it found a partner. stable: the rest. undecided: the
 * error bar straddles zero and no symmetry settles the matter. */
typedef enum { TH_LABEL_UNSTABLE, TH_LABEL_TRAPPED, TH_LABEL_STABLE, TH_LABEL_UNDECIDED } th_label;

/** The label as written in tables: "unstable", ... */
const char *th_label_text(th_label label);

/* Computations that can stand behind a mode; th_mode.confirmed is a sum of these. */
enum { TH_BY_MATRIX = 1, TH_BY_MATCHING = 2, TH_BY_CENSUS = 4, TH_BY_INDEX = 8 };

enum { TH_CONFIRMED_SIZE = 64 };

/** Names of the computations in a sum of TH_BY_..., joined by "+": "matrix+matching+census+index".
 * @param[out] buffer  [TH_CONFIRMED_SIZE] */
void th_confirmed_text(unsigned confirmed, char *buffer);

typedef struct {
    double omega_re, omega_im; /* fluctuations go as e^{-i omega t} */
    double omega_error;        /* bound on |error of omega|: from the matching function its last
                                  step and the difference of two integrations; without it twice
                                  the disagreement of two matrices plus rounding times condition */
    double shift;              /* |matrix - matching function|, 0 when only one of them knows it */
    th_label label;
    int norm;            /* sign of 2 Int n Im(eta phi*) dx: +1 ordinary phonon, -1 negative
                            energy at positive frequency, 0 growing or without sign */
    double pocket_share; /* share of the pockets in the comoving energy
                            1/2 Int n (|phi'|^2 + c^2 |eta|^2 + |eta'|^2/4) dx, 0..1. Open ends: of
                            the window that extends the pockets by their own extent on each side */
    int nodes;           /* zeros of the density fluctuation inside the pockets, at its phase of
                            largest amplitude */
    double condition;    /* of the eigenvalue, >= 1 */
    double residual;     /* of the eigenpair, relative to the norm of the matrix */
    unsigned confirmed;  /* TH_BY_... that agree on this mode */
} th_mode;

typedef enum { TH_VERDICT_STABLE, TH_VERDICT_UNSTABLE, TH_VERDICT_UNDECIDED } th_verdict;

/* Unknowns up to which open flows are also solved with the dense matrix. Measured on one core: 1600
 * complex unknowns take 2 to 4 s, and the time grows with the cube. */
enum { TH_ORDINARY_SIZE = 1600 };

typedef struct {
    double accuracy; /* wanted relative to the top of the negative-energy band, 1e-12 .. 1e-3 */
} th_solve_options;

/* The answer for one flow. Modes with Re omega >= 0 only; omega -> -omega* is implied, and for
 * rings and walls the decaying partner omega*. By falling Im omega, then rising Re omega. */
typedef struct {
    int count;
    th_mode *mode;     /* [count] */
    int unstable;      /* modes with Im omega > 0, both signs of Re omega counted */
    bool index_known;  /* false where no static count exists (a supersonic end) */
    int index;         /* what the static index says `unstable` should be; for rings and walls
                          it counts unstable + 2 neutral modes of negative energy */
    bool census_known; /* false when the argument principle could not decide */
    int census;        /* growing modes it counts, both signs of Re omega */
    double census_re_max, census_im_max; /* it certifies |Re omega| and Im omega up to these */
    double census_step;                  /* its worst phase step, radians */
    double disagreement;                 /* largest shift of a growing mode */
    int negative;   /* rings, walls: neutral modes of negative energy with Re omega > 0 */
    int zero_modes; /* rings: 2, the phase and its partner, deflated; else 0 */
    th_verdict verdict;
    char reason[256]; /* why undecided; "" otherwise */
    int unknowns;     /* of the coarse matrix, which yields the candidates */
    bool dense;       /* all its eigenvalues were computed; false above TH_ORDINARY_SIZE, where
                         growing modes come from the matching function, the matrix is only asked
                         for the eigenvalue next to each, and damped modes are not listed */
    double omega_top; /* listed: modes with |Re omega| up to this, and all that grow */
    bool absorbing;   /* a supersonic end carries an absorbing layer */
} th_solution;

/**
 * Solve one flow by four computations that check each other.
 *
 * Matrix: all eigenvalues of a coarse Bogoliubov matrix, each refined on two finer discretisations
 * that differ in order, elements and angle of the complex scaling. Matching: each of these polished
 * as a zero of the matching function, twice. Census: growing modes counted by the argument
 * principle; with open ends they are also found that way. Index: the static count. Any conflict
 * makes the verdict undecided and says why.
 *
 * @param[in]  flow      borrowed
 * @param[in]  options   accuracy
 * @param[out] out       owned by the caller; NULL on failure
 *
 * @retval TH_OK          out->verdict may still be TH_VERDICT_UNDECIDED, with the reason
 * @retval TH_EINVAL      an option breaks its rule
 * @retval TH_EUNDECIDED  the flow needs a larger matrix than can be solved
 * @retval TH_ENOMEM, TH_ECONVERGE
 *
 * Reentrant. Cost: one dense eigenvalue problem without vectors of out->unknowns, more when slow
 * modes need farther ends, and some hundred to thousand matching functions.
 * What success does not prove: anything about flows that differ from the one given by more than
 * its error bars, or beyond linear, one-dimensional, mean-field theory.
 * Tests: tests/test_modes.c.
 */
TH_MUST_USE th_status th_solve(const th_flow *flow, const th_solve_options *options,
                               th_solution **out, th_error *err);

/** Release; NULL is allowed. */
void th_solution_destroy(th_solution *solution);

/**
 * Write the matrix whose eigenvalues th_solve refines, at the accuracy asked for, in Matrix Market
 * form. (The dense eigensolver gets a coarser one: it only has to find candidates.)
 * @param[in] title  one line for the file's comment
 * @retval TH_EIO  the stream refused
 */
TH_MUST_USE th_status th_matrix_write(const th_flow *flow, const th_solve_options *options,
                                      const char *title, FILE *stream, th_error *err);

#ifdef __cplusplus
}
#endif
#endif
