/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What the parts of th_seed share. Private to seed. Depends on mesh, operator, flow, status. */
#ifndef TH_SEED_INSIDE_H
#define TH_SEED_INSIDE_H

#include <complex.h>
#include "mesh/mesh.h"
#include "operator.h"
#include "twinhorizon/seed.h"

/* How finely the projection is discretised. */
typedef struct {
    int order;        /* of the elements */
    double accuracy;  /* as th_mesh_options */
    double efoldings; /* decay of the slowest mode at the end of the resolved stretch */
    double far;       /* the line goes on to this many times that stretch */
    double step;      /* of the quadrature over imaginary frequencies, in their logarithm */
} th_seed_level;

/* A frequency and its mode's shape on the real axis. */
typedef struct {
    th_mesh *mesh;
    int known;           /* modes projected */
    double complex *eta; /* [nodes of the mesh, known] eta of each mode */
    double *covariance;  /* [2 known, 2 known] of the real and imaginary parts of their amplitudes,
                            at the flow's own density; mode j has 2 j and 2 j + 1 */
} th_seed_answer;

/* ---- line.c: elements on the real axis ------------------------------------------------------- */

/**
 * Elements of the flow on the real axis: with open ends uniform flow is added until the modes have
 * died on both sides, and more in elements that double.
 * @param[in]  omega  [count] frequencies of the modes, Im > 0
 * @param[out] out    NULL when more than TH_SEED_UNKNOWNS_MAX unknowns are needed
 * Errors as th_mesh_create.
 */
TH_MUST_USE th_status th_seed_line(const th_flow *flow, const th_seed_level *level, int count,
                                   const double complex *omega, th_mesh **out, th_error *err);

/* ---- state.c: the initial state -------------------------------------------------------------- */

/**
 * Covariance of r_a^T z in the state exp(-Q/T), z the scaled unknowns of the operator.
 * @param[in]  op           real, from walls
 * @param[in]  temperature  >= 0
 * @param[in]  slow, fast   rates between which the r_a vary in time under Q, roughly
 * @param[in]  step         as th_seed_level
 * @param[in]  r            [op->size, count]
 * @param[out] covariance   [count, count] symmetric
 * @retval TH_ENOMEM, TH_ECONVERGE
 */
TH_MUST_USE th_status th_seed_state(const th_operator *op, double temperature, double slow,
                                    double fast, double step, int count, const double *r,
                                    double *covariance, th_error *err);

/* ---- project.c: modes and their share of the state ------------------------------------------- */

/**
 * @param[in]  omega  [count] frequencies of the modes, by falling imaginary part
 * @param[out] out    the first out->known of them are projected; release with th_seed_answer_clear
 * Errors as th_seed_create.
 */
TH_MUST_USE th_status th_seed_project(const th_flow *flow, const th_seed_level *level,
                                      double temperature, int count, const double complex *omega,
                                      th_seed_answer *out, th_error *err);

void th_seed_answer_clear(th_seed_answer *answer);

/** eta of mode j at x, 0 beyond the elements. */
double complex th_seed_eta(const th_seed_answer *answer, int j, double x);

#endif
