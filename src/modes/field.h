/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The fluctuations of a mode along the real axis. Private to the library. Depends on mesh,
 * operator, dispersion, matching, flow. */
#ifndef TH_MODES_FIELD_H
#define TH_MODES_FIELD_H

#include <complex.h>
#include <stdbool.h>
#include "mesh/mesh.h"
#include "operator.h"
#include "twinhorizon/flow.h"

/* The fields at one point, and their x-derivatives. */
typedef struct {
    double complex eta, phi, eta_slope, phi_slope;
} th_field_sample;

/* A mode on a mesh. Flow and mesh are borrowed. */
typedef struct {
    const th_flow *flow;
    const th_mesh *mesh;
    double complex omega;
    double complex *eta, *phi;             /* [elements][order + 1] */
    double complex *eta_slope, *phi_slope; /* [elements][order + 1] */
} th_field;

/**
 * @param[in]  omega   frequency of the mode
 * @param[in]  vector  [op->size] scaled unknowns
 * @param[out] out     release with th_field_clear, after a failure too
 * @retval TH_ENOMEM  as it says
 */
TH_MUST_USE th_status th_field_create(const th_flow *flow, const th_mesh *mesh,
                                      const th_operator *op, double complex omega,
                                      const double complex *vector, th_field *out, th_error *err);

/** Release what a field holds. */
void th_field_clear(th_field *field);

/** The fields at x in an inside element e; beyond its ends the value at the end. */
th_field_sample th_field_inside(const th_field *field, int e, double x);

/* A mode beyond an open end: two outgoing waves, so that eta and phi are continuous at the edge.
 * A wave of wave number k has (eta, phi) = (k^2, -i (omega - v k)). */
typedef struct {
    bool known; /* false: omega is beyond the sector that the rotated end uncovers */
    int side;   /* -1 left, +1 right */
    double complex k[2], p[2], amplitude[2];
} th_field_tail;

/**
 * The waves beyond an open end. Subsonic: those that the rotated ray of the mesh damps. Supersonic:
 * those of the matching function.
 *
 * @param[in] side  -1 left end, +1 right end
 * @retval TH_ECONVERGE  the waves cannot be told apart
 */
TH_MUST_USE th_status th_field_tail_find(const th_field *field, int side, th_field_tail *out,
                                         th_error *err);

/** The fields at a distance >= 0 beyond the edge, of a tail that is known. */
th_field_sample th_field_outside(const th_field_tail *tail, double away);

#endif
