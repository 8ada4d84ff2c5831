/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What a mode looks like: norm, share of the pockets, nodes. Private to modes. Depends on mesh,
 * operator, dispersion, flow. */
#ifndef TH_MODES_SHAPE_H
#define TH_MODES_SHAPE_H

#include <complex.h>
#include "mesh/mesh.h"
#include "operator.h"
#include "twinhorizon/flow.h"

typedef struct {
    int norm;
    double pocket_share;
    int nodes;
} th_mode_shape;

/**
 * @param[in]  omega   frequency of the mode
 * @param[in]  vector  [op->size] scaled unknowns
 * @retval TH_ENOMEM, TH_ECONVERGE
 */
TH_MUST_USE th_status th_mode_shape_find(const th_flow *flow, const th_mesh *mesh,
                                         const th_operator *op, double complex omega,
                                         const double complex *vector, th_mode_shape *out,
                                         th_error *err);

#endif
