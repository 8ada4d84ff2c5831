/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Settings of the discretisations. In: a flow and the accuracy wanted. Out: mesh and matrix.
 * Calls mesh and operator. Proof: tests/test_modes.c. */
#include "modes/level.h"

#include <gsl/gsl_math.h>

typedef struct {
    int order;       /* different, so that no error is common to two levels */
    double share;    /* of the accuracy asked for */
    double coarsest; /* accuracy is not set below this */
    double reach;    /* of omega_low */
    double angle;    /* 0.3 .. 0.78; the rotated continua of fine and check differ by 0.15 rad */
    double layer;    /* onset of absorbing layers: different, so that their own modes disagree */
} setting;

/* Candidates need to be good enough to be told from their neighbours only; five digits are. The
 * fine level aims a thousand times below the accuracy asked for, the check level a hundred times
 * below that: their disagreement stays within what was asked for. */
static const setting settings[TH_LEVELS] = {
    [TH_LEVEL_BASE] = {12, 1.0, 1e-5, 1.0, 0.60, 1.0},
    [TH_LEVEL_FINE] = {14, 1e-3, 0.0, 1.0, 0.60, 1.0},
    [TH_LEVEL_CHECK] = {19, 1e-5, 0.0, 0.2, 0.45, 1.4},
};
static const double finest = 1e-15; /* mesh.h: no better than rounding */

double th_level_angle(th_level_kind kind)
{
    return settings[kind].angle;
}

th_status th_level_create(const th_flow *flow, th_level_kind kind, double accuracy,
                          double omega_top, double omega_low, th_level *out, th_error *err)
{
    const setting *s = &settings[kind];
    const th_mesh_options options = {.order = s->order,
                                     .accuracy =
                                         fmax(fmax(finest, s->coarsest), accuracy * s->share),
                                     .omega_top = omega_top,
                                     .omega_low = omega_low * s->reach,
                                     .angle = s->angle,
                                     .layer = s->layer};
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
