/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The shapes, private to src/flow: one th_shape a file, all listed in shapes.c, and the rules that
 * several of them share. */
#ifndef TH_FLOW_SHAPES_H
#define TH_FLOW_SHAPES_H

#include "workspace.h"

extern const th_shape th_shape_step;
extern const th_shape th_shape_tanh;
extern const th_shape th_shape_sech;
extern const th_shape th_shape_well;
extern const th_shape th_shape_barriers;
extern const th_shape th_shape_continuity;
extern const th_shape th_shape_potential;
extern const th_shape th_shape_table;

/* A tail may be cut where it has fallen to this part of the value it sits on: adding it then
 * changes nothing, since half a unit of the last place is 1.1e-16. */
#define TH_TAIL_CUT 1e-17

/* What is left of the tails at the seam of a ring may jump by this much, relatively: far above
 * rounding, far below the 1e-9 that anyone asks of a growth rate. */
#define TH_SEAM_TOLERANCE 1e-12

/**
 * Where a tail relative * exp(-2 x/width) may be cut: x >= 0 such that the tail, and its change in
 * a healing length 1/sound, are TH_TAIL_CUT. 0 when relative = 0.
 */
double th_tail_reach(double relative, double width, double sound);

/** On a ring the sound speeds that meet at the seam must agree (key sound_downstream) and the
 * pocket must be shorter than the ring (key gap); nothing is asked of other ends. */
TH_MUST_USE th_status th_shape_fits_ring(const th_ends *ends, double sound_upstream,
                                         double sound_downstream, double gap, th_error *err);

/**
 * What a shape's build ends in: th_flow_create in the workspace of the setup. spec->ctx is a block
 * of it (th_take), which the flow gives back in the end if this succeeds; spec->release is NULL.
 */
TH_MUST_USE th_status th_shape_flow(const th_flow_setup *setup, const th_flow_spec *spec,
                                    th_flow **out, th_error *err);

#endif
