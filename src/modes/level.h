/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The discretisations that th_solve compares. Private to modes. Depends on mesh, operator. */
#ifndef TH_MODES_LEVEL_H
#define TH_MODES_LEVEL_H

#include "mesh/mesh.h"
#include "operator.h"
#include "twinhorizon/flow.h"

/* A mesh and its matrix. */
typedef struct {
    th_mesh *mesh;
    th_operator *op;
} th_level;

/* base: coarse, diagonalised densely for candidates. fine: has the accuracy asked for. check: finer
 * still, with other elements and another angle. Candidates are refined on the last two by
 * iteration; their disagreement measures the fine one. */
typedef enum { TH_LEVEL_BASE, TH_LEVEL_FINE, TH_LEVEL_CHECK } th_level_kind;

enum { TH_LEVELS = 3 };

/**
 * @param[in] accuracy   of th_solve_options
 * @param[in] omega_top  largest frequency to resolve, > 0
 * @param[in] omega_low  slowest mode to resolve on open ends, > 0
 * Errors as th_mesh_create and th_operator_create; on failure `out` is empty.
 */
TH_MUST_USE th_status th_level_create(const th_flow *flow, th_level_kind kind, double accuracy,
                                      double omega_top, double omega_low, th_level *out,
                                      th_error *err);

/** Release what a level holds. */
void th_level_clear(th_level *level);

/** Angle of the complex scaling of a level. */
double th_level_angle(th_level_kind kind);

#endif
