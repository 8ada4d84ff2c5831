/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Settings of the two discretisations. In: a flow and the accuracy wanted. Out: mesh and matrix.
 * Calls mesh and operator. Proof: tests/test_modes.c. */
#include "modes/level.h"

#include <gsl/gsl_math.h>

/* The base level aims this much below the accuracy asked for, the check level this much below the
 * base: their disagreement then measures the base, and stays within what was asked for. */
static const double base_margin = 1e-3;
static const double check_margin = 1e-2;
static const double finest = 1e-15; /* mesh.h: no better than rounding */
/* Orders: high enough for 10 digits on two elements a wavelength, low enough for narrow bands.
 * Different, so that no error is common to both. */
static const int base_order = 14, check_order = 19;
/* Angles, 0.5 .. 0.8: both well inside; the rotated continua differ by 0.15 rad. */
static const double base_angle = 0.60, check_angle = 0.45;
/* Absorbing layers of different onset, so that modes of the layer itself do not agree. */
static const double base_layer = 1.0, check_layer = 1.4;

double th_level_angle(th_level_kind kind)
{
    return kind == TH_LEVEL_BASE ? base_angle : check_angle;
}

th_status th_level_create(const th_flow *flow, th_level_kind kind, double accuracy,
                          double omega_top, double omega_low, th_level *out, th_error *err)
{
    const bool base = kind == TH_LEVEL_BASE;
    const th_mesh_options options = {
        .order = base ? base_order : check_order,
        .accuracy = fmax(finest, accuracy * base_margin * (base ? 1.0 : check_margin)),
        .omega_top = omega_top,
        .omega_low = base ? omega_low : 0.2 * omega_low,
        .angle = th_level_angle(kind),
        .layer = base ? base_layer : check_layer};
    th_status st;

    *out = (th_level){NULL, NULL};
    st = th_mesh_create(flow, &options, &out->mesh, err);
    if (st == TH_OK)
        st = th_operator_create(out->mesh, &out->op, err);
    if (st != TH_OK)
        th_level_clear(out);
    return st;
}

void th_level_clear(th_level *level)
{
    th_operator_destroy(level->op);
    th_mesh_destroy(level->mesh);
    *level = (th_level){NULL, NULL};
}
