/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Gauss-Lobatto-Legendre nodes, weights and differentiation on [-1, 1]. Depends on status. */
#ifndef TH_GLL_H
#define TH_GLL_H

#include "twinhorizon/status.h"

enum { TH_GLL_ORDER_MAX = 40 };

/* One rule of polynomial order `order` with order + 1 nodes, both ends included. */
typedef struct {
    int order;
    double node[TH_GLL_ORDER_MAX + 1];   /* ascending */
    double weight[TH_GLL_ORDER_MAX + 1]; /* sum 2 */
    /* slope[i][j] = derivative of Lagrange polynomial j at node i */
    double slope[TH_GLL_ORDER_MAX + 1][TH_GLL_ORDER_MAX + 1];
    /* to_legendre[l][j]: coefficient l of the Legendre series of Lagrange polynomial j */
    double to_legendre[TH_GLL_ORDER_MAX + 1][TH_GLL_ORDER_MAX + 1];
} th_gll;

/**
 * @param[in] order  2 .. TH_GLL_ORDER_MAX
 * @retval TH_EINVAL  order out of range
 * Source: Handbook of Mathematical Functions (NBS AMS 55, 1964), 25.4.32 (Lobatto's formula).
 */
TH_MUST_USE th_status th_gll_make(int order, th_gll *rule, th_error *err);

/** Value at z in [-1, 1] of the interpolant through value[order + 1]; barycentric form. */
double th_gll_interpolate(const th_gll *rule, const double *value, double z);

#endif
