/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The static index: how many negative eigenvalues the static operator
 * K eta = -(n eta')' + 4 n (c^2 - v^2) eta of a flow has. What goes in: a flow with open,
 * subsonic ends, a ring or a box. What comes out: the number (for rings and boxes what it leaves
 * for the modes) and with open ends how far the flow is from the nearest change of it. Depends on
 * flow, status. */
#ifndef TWINHORIZON_INDEX_H
#define TWINHORIZON_INDEX_H

#include <twinhorizon/flow.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

typedef struct {
    int count;     /* negative eigenvalues of K */
    double margin; /* radians from the nearest switch, signed: > 0 just after it (count includes
                      its eigenvalue), < 0 just before it. It passes zero linearly when a parameter
                      passes a switch-on value: a root of the margin is one */
    double error;  /* estimate of the error of margin, radians */
} th_index;

/**
 * Static index of a flow with open ends.
 *
 * The solution of K eta = 0 that decays to the left and the one that decays to the right are
 * followed to the middle of the longest pocket and their Pruefer angles compared there: K has as
 * many negative eigenvalues as the difference has passed multiples of pi, and a zero eigenvalue
 * where it is one.
 *
 * @param[in]  flow  open ends, subsonic at both
 * @param[out] out   count, margin, error
 * @param[out] err   message on failure; may be NULL
 *
 * @retval TH_OK         count is certain as far as |margin| > error tells
 * @retval TH_EUNDECIDED |margin| <= error: K has an eigenvalue that may be zero. *out is filled;
 *                       count is the lower of the two candidates, the other is one more
 * @retval TH_ENONE      an end is not subsonic: K has no lowest eigenvalues to count
 * @retval TH_EINVAL     flow or out is NULL, or the ends are not open
 * @retval TH_ECONVERGE  the integration needs more than 200000 steps: the flow is not smooth
 *                       inside a piece. A single jump inside a piece may go unnoticed
 *
 * Notes: (1) The number of modes with Im omega > 0, both signs of Re omega counted, never exceeds
 * count. (2) With two pockets and a wide subsonic stretch between them the margin of the shorter
 * pocket is squeezed exponentially: it is tiny only exponentially near a switch. (3) error is an
 * estimate from halved steps and rounding, carried along; it is not a rigorous enclosure.
 * Reentrant; allocates nothing. Cost: less than a microsecond for uniform pieces, a few tenths of a
 * millisecond for smooth edges of about a healing length, growing with their width.
 *
 * Source: oscillation theorem of Sturm and Liouville; the index bound is the Hamiltonian-Krein
 * index, Physica D 195, 263 (2004).
 *
 * Tests: tests/test_index.c (closed forms of steps, wells and sech pockets; matrix inertia).
 */
TH_MUST_USE th_status th_index_open(const th_flow *flow, th_index *out, th_error *err);

/**
 * Static index of a flow on a ring or between walls: negative directions of the energy form,
 * minimised over the phase, at fixed mass on a ring. Counts growing modes (both signs of
 * Re omega) plus twice the neutral modes of negative energy.
 *
 * @param[out] out  margin: minus the eigenvalue of the form nearest to zero over (largest c)^2, so
 *                  > 0 when the count includes it; error likewise
 * @retval TH_OK, TH_EUNDECIDED as th_index_open; TH_EINVAL for open ends; TH_ENOMEM,
 *         TH_ECONVERGE
 * Cost: one dense symmetric eigenvalue problem of the mesh's nodes.
 */
TH_MUST_USE th_status th_index_closed(const th_flow *flow, th_index *out, th_error *err);

/** th_index_open or th_index_closed, as the ends demand. */
TH_MUST_USE th_status th_index_count(const th_flow *flow, th_index *out, th_error *err);

#ifdef __cplusplus
}
#endif
#endif
