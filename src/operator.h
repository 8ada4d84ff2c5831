/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The Bogoliubov matrix of a flow on a mesh. Depends on mesh, status.
 *
 * Fluctuations psi = sqrt(n) e^{i phase} (1 + eta/2 + i phi), e^{-i omega t}. The unknowns are
 * eta and phi at the nodes times sqrt(mass), so that the matrix A of d_t z = A z reads
 *     A = [ -V - D     S     ]      S stiffness, V advection (antisymmetric), C sound speed
 *         [ -C - S/4  -V - D ]      squared, D damping of absorbing layers, all scaled by
 * mass^(-1/2) on both sides. Without D, A = J H with H symmetric (complex symmetric on rotated
 * ends) and J = [0 1; -1 0]: the discrete system is Hamiltonian exactly, to the last bit.
 * Eigenvalues lambda of A give omega = i lambda. */
#ifndef TH_OPERATOR_H
#define TH_OPERATOR_H

#include <complex.h>
#include <stdbool.h>
#include <stdio.h>
#include "mesh/mesh.h"
#include "twinhorizon/status.h"

/* A in compressed rows. Unknown 2 s + f is field f (0: eta, 1: phi) at slot s; slots are nodes
 * along x, except on a ring, where nodes are folded (first, last, second, last but one, ...) so
 * that the band stays narrow. */
typedef struct {
    int nodes;             /* per field */
    int size;              /* 2 nodes = rows of A */
    bool real;             /* every entry is real (ring, walls) */
    bool ring;             /* the phase zero mode exists */
    int lower, upper;      /* bandwidths */
    int *start;            /* [size + 1] */
    int *column;           /* [start[size]] ascending inside a row */
    double complex *value; /* [start[size]] */
    double complex *mass;  /* [nodes] by slot */
    int *slot;             /* [elements][order + 1] slot of a mesh node, -1 where the fluctuation is
                              held at zero */
} th_operator;

/**
 * @retval TH_ENOMEM  as it says
 * Cost: proportional to elements x order^2.
 */
TH_MUST_USE th_status th_operator_create(const th_mesh *mesh, th_operator **out, th_error *err);

/** Release; NULL is allowed. */
void th_operator_destroy(th_operator *op);

/** y = A x, or A^T x when transposed. x, y [size], distinct. */
void th_operator_apply(const th_operator *op, bool transposed, const double complex *x,
                       double complex *y);

/** Sum over entries |y_i| |A_ij| |x_j|: the size of what rounding of A can do to y^T A x. */
double th_operator_bound(const th_operator *op, const double complex *y, const double complex *x);

/** Largest row sum of |A_ij|. */
double th_operator_norm(const th_operator *op);

/** Write A into a [size, size] column-major array. */
void th_operator_dense(const th_operator *op, double complex *a);

/** As th_operator_dense for a real operator. */
void th_operator_dense_real(const th_operator *op, double *a);

/** Write A - lambda into LAPACK band form [2 lower + upper + 1, size]. */
void th_operator_band(const th_operator *op, double complex lambda, double complex *band);

/**
 * Write A in Matrix Market coordinate form ("real general" or "complex general"); comments tell
 * the meaning of the eigenvalues and carry `title`.
 * @retval TH_EIO  the stream refused
 * Source of the format: "The Matrix Market exchange formats: initial design", NISTIR 5935 (1996).
 */
TH_MUST_USE th_status th_operator_write(const th_operator *op, const char *title, FILE *stream,
                                        th_error *err);

#endif
