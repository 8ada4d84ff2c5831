/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A flow cut into steps on which its coefficients are polynomials. Private to matching. Depends
 * on flow, dispersion, status.
 *
 * Scaled units inside matching: speeds over the largest sound speed c0, lengths times c0, omega
 * over c0^2, density over its value at edge[0]. */
#ifndef TH_MATCHING_STEPS_H
#define TH_MATCHING_STEPS_H

#include <stdbool.h>
#include "twinhorizon/flow.h"
#include "twinhorizon/matching.h"
#include "twinhorizon/status.h"

enum { TH_STEP_TERMS = 32 };

/* Coefficients on a step, powers of t in [-1, 1], x = middle + half t. */
typedef struct {
    double half; /* half length, > 0 */
    int repeat;  /* so many equal steps follow each other (uniform flow) */
    int inverse_terms, density_terms, pressure_terms;
    double inverse[TH_STEP_TERMS];  /* 1/n */
    double density[TH_STEP_TERMS];  /* n */
    double pressure[TH_STEP_TERMS]; /* n c^2 */
} th_step;

/* Steps from left to right. */
typedef struct {
    th_workspace *workspace; /* the flow's */
    th_step *step;           /* [count] */
    int count;
    int match; /* solutions from the left meet those from the right before step[match] */
    int room;
    double flux;             /* J */
    double speed0, density0; /* scale: largest sound speed, density at edge[0] */
} th_steps;

/**
 * @param[in] match_at  position where the solutions meet (a step ends there)
 * @retval TH_ECONVERGE  a step would be shorter than rounding allows
 * @retval TH_ENOMEM
 */
TH_MUST_USE th_status th_steps_create(const th_flow *flow, double omega_top,
                                      th_matching_grain grain, double match_at, th_steps *out,
                                      th_error *err);

void th_steps_clear(th_steps *steps);

#endif
