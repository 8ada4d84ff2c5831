/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The elements on which fluctuations are discretised: where they lie, how they are stretched
 * into the complex plane, and the flow on their nodes. Depends on flow, dispersion, status. */
#ifndef TH_MESH_H
#define TH_MESH_H

#include <complex.h>
#include <stdbool.h>
#include "gll.h"
#include "twinhorizon/flow.h"
#include "twinhorizon/status.h"

/* What the mesh must resolve. Frequencies in the flow's reduced unit. */
typedef struct {
    int order;        /* polynomial order of an element, 4 .. TH_GLL_ORDER_MAX */
    double accuracy;  /* relative error aimed at for resolved modes, 1e-15 .. 1e-2 */
    double omega_top; /* largest |Re omega| to resolve, > 0 */
    double omega_low; /* open ends: smallest |omega| to resolve, > 0; sets the reach outwards */
    double angle;     /* open ends: angle theta of the complex scaling, 0.3 .. 0.78 */
    double layer;     /* supersonic open ends: onset of the absorbing layer relative to the usual */
} th_mesh_options;

/* One element. Its nodes are at x = left + length (z + 1)/2; outside an open end x is the
 * distance along the ray y, and the physical coordinate is edge + (y - edge) e^{i theta}. */
typedef struct {
    int piece;              /* of the flow; -1 and pieces are the open ends */
    double left, length;    /* length > 0 */
    double complex stretch; /* dx/dy: 1 inside, e^{i theta} on a complex-scaled end */
} th_element;

typedef struct {
    th_gll rule;
    th_ends_kind ends;
    int elements;
    int first_inside, last_inside; /* elements that are not outside an open end */
    th_element *element;           /* [elements] ascending */
    double *x;       /* [elements][order + 1] node positions (along the ray outside) */
    double *density; /* [elements][order + 1] n */
    double *sound2;  /* [elements][order + 1] c^2 */
    double *damping; /* [elements][order + 1] absorbing rate, 0 except on supersonic open ends */
    double flux;     /* J */
    double angle;    /* theta */
    bool absorbing;  /* an open end is supersonic and carries an absorbing layer */
} th_mesh;

/**
 * Make a mesh that resolves a flow's fluctuations.
 *
 * Inside: elements end at every edge of the flow; each is split until (1) the shortest wave at
 * omega_top spans few enough wavelengths for the order and accuracy (evanescent waves only near
 * the places where they start), (2) it is no longer than a
 * few times the width of, or distance to, every feature, (3) the Legendre series of n, v and c^2 on
 * it have converged. Outside a subsonic open end: complex scaling on elements that grow by
 * a factor of three until waves of omega_low have died. Outside a supersonic open end, where no
 * rotation damps all outgoing waves and no incoming one: an absorbing layer with a smooth onset on
 * unrotated elements.
 *
 * @retval TH_EINVAL     an option breaks its rule
 * @retval TH_ECONVERGE  the flow is too rough: an element would be shorter than rounding allows
 * @retval TH_EUNDECIDED more than TH_MESH_ELEMENTS_MAX elements needed
 * What success does not prove: that a mode is resolved; compare two meshes.
 */
TH_MUST_USE th_status th_mesh_create(const th_flow *flow, const th_mesh_options *options,
                                     th_mesh **out, th_error *err);

/** Release a mesh; NULL is allowed. */
void th_mesh_destroy(th_mesh *mesh);

/* More would need matrices beyond the reach of a dense eigensolver by far (order 14: 112 000
 * unknowns). */
enum { TH_MESH_ELEMENTS_MAX = 4000 };

#endif
