/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What the samples of the tolerances and the estimates made of them share. Private to
 * src/tolerance. Depends on flow, point, status. */
#ifndef TH_TOLERANCE_INSIDE_H
#define TH_TOLERANCE_INSIDE_H

#include <stdbool.h>

#include "twinhorizon/point.h"
#include "twinhorizon/tolerance.h"

/* The answer of one sample, as far as it is used. */
typedef struct {
    th_point_state state;
    int unstable;             /* growing modes, both signs of Re omega */
    double growth, frequency; /* of the fastest mode; 0 where nothing grows */
    double error;             /* bar of its omega */
    bool visible;
} th_sample;

/* Samples lie shift by shift: sample s * each + i is point i of the sequence, moved by shift s. */
typedef struct {
    int samples, each;                /* each = samples / TH_TOLERANCE_SHIFTS */
    int keys, key[TH_SHAPE_KEYS_MAX]; /* those with a tolerance */
    double *point;                    /* [each][keys] of the sequence, 0 <= . < 1 */
    double shift[TH_TOLERANCE_SHIFTS][TH_SHAPE_KEYS_MAX];
    th_sample *sample; /* [samples] */
} th_draw;

/** Coordinate of a sample along its k-th key, 0 <= u < 1. */
double th_draw_coordinate(const th_draw *draw, int sample, int k);

/**
 * Everything of the result but slopes and the order of keys. out->key has draw->keys elements, that
 * of draw->key[k] at place k.
 * @retval TH_ENONE  fewer than two shifts have an answer; no text
 */
TH_MUST_USE th_status th_draw_estimate(const th_draw *draw, th_tolerance *out, th_error *err);

#endif
