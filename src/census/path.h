/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The phase of the matching function along a path, with every sample kept. Private to census.
 * Depends on matching. */
#ifndef TH_CENSUS_PATH_H
#define TH_CENSUS_PATH_H

#include <complex.h>
#include "twinhorizon/matching.h"
#include "workspace.h"

typedef struct {
    double complex omega;
    double complex value; /* F without its power of two */
    long exponent;        /* that power */
    double complex rate;  /* F'/F */
    double phase;         /* of F, continuous from 0 at the first node */
} th_node;

typedef struct {
    th_workspace *workspace; /* set before the start, kept by th_path_clear; may be NULL */
    const th_matching *matching;
    th_node *node; /* [count] */
    int count, room;
    double worst; /* largest phase step accepted */
    long evaluations;
    bool near_modes; /* modes may lie close to the path: refine on |F'/F| too */
} th_path;

/** Start a path at a frequency. Errors as th_matching_eval. */
TH_MUST_USE th_status th_path_start(th_path *path, const th_matching *matching, bool near_modes,
                                    double complex omega, th_error *err);

/**
 * Go straight on to a frequency, refining until every phase step is below pi/4 and log F
 * moves as F'/F at both ends predicts. Near modes |F'/F| times the step must be below one too: two
 * modes between samples would leave no trace in the phase.
 * @retval TH_EUNDECIDED  a step cannot be made short enough: a mode lies on the path
 */
TH_MUST_USE th_status th_path_go(th_path *path, double complex to, th_error *err);

/** Phase gained from the first node to the last. */
double th_path_phase(const th_path *path);

/** Release; the counters stay. */
void th_path_clear(th_path *path);

#endif
