/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Collisions of two modes inside a circle, for ends that conserve energy. Private to onset. Depends
 * on matching, flow, status. */
#ifndef TH_ONSET_COLLISION_H
#define TH_ONSET_COLLISION_H

#include <stdbool.h>

#include "onset/inside.h"
#include "twinhorizon/matching.h"

/* A circle in the complex plane of omega, its centre on the real axis, and the flows that are
 * looked at. */
typedef struct {
    const th_flow_setup *setup;
    int key;
    double omega_top; /* for the matching function */
    double centre, radius;
} th_circle;

/* The two modes w1, w2 inside at one length. */
typedef struct {
    double x;      /* the length */
    double square; /* (w1 - w2)^2: > 0 two neutral modes, < 0 a growing and a decaying one */
    double mean;   /* (w1 + w2)/2 */
    double modes;  /* how many are inside: 2, or the others mean nothing */
} th_duo;

/**
 * The two modes inside a circle at length x.
 * @retval TH_OK  look at out->modes
 */
TH_MUST_USE th_status th_collision_look(const th_circle *circle, double x, th_matching_grain grain,
                                        th_duo *out, th_error *err);

/** Are there two modes inside, as far as rounding tells? */
bool th_collision_isolated(const th_duo *duo);

/**
 * The length between a and b, where `square` has opposite signs, at which it is zero.
 * @param[out] out        gap, gap_error, omega_re
 * @param[out] isolated   false: a third mode entered the circle; out means nothing
 */
TH_MUST_USE th_status th_collision_refine(const th_circle *circle, const th_duo *a, const th_duo *b,
                                          th_onset *out, bool *isolated, th_error *err);

#endif
