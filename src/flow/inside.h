/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The inside of a flow, private to src/flow: the object, its samples, and what is computed from
 * them once. Whoever adds a quantity that th_flow_create computes adds a member here, a function
 * in its own file that takes the flow and its samples, and one line in th_flow_create. */
#ifndef TH_FLOW_INSIDE_H
#define TH_FLOW_INSIDE_H

#include "workspace.h"

struct th_flow {
    th_ends ends;
    void (*eval)(const void *ctx, int piece, double x, th_flow_point *point);
    void (*release)(void *ctx);
    void *ctx;
    th_workspace *workspace; /* of every array below; may be NULL */
    void *owned;             /* ctx, when it is a block of the workspace */
    int pieces;
    int shift; /* uniform pieces added on the left for walls: piece p is the callback's p - shift */
    double *edge;  /* [pieces + 1] */
    bool *uniform; /* [pieces] */
    int features;
    th_feature *feature;  /* [features] */
    th_flow_point end[2]; /* uniform states outside, left and right; unused on a ring */
    double flux;          /* J = n v */
    char note[TH_FLOW_NOTE_MAX];
    int directions; /* of th_flow_spec, with vary */
    th_status (*vary)(const void *ctx, int direction, double sigmas, const th_ends *ends,
                      th_flow **out, th_error *err);
    double scattering; /* a of the transverse equation of state; 0 contact */
    double mu;         /* chemical potential that makes the potential 0 at edge[0] */
    double sound_max;
    int horizons;
    th_horizon *horizon; /* [horizons] */
    int pockets;
    th_pocket *pocket; /* [pockets] */
};

/* One probed place of a flow. */
typedef struct {
    int piece; /* -1 and pieces: the uniform outside of open ends */
    double x;
    th_flow_point point;
} th_flow_sample;

/* A property of the flow at one point, to be maximised. */
typedef double (*th_flow_measure)(const th_flow_point *point);

/* +1 supersonic, -1 subsonic, 0 when v = c to rounding: a layer with v = c is one stretch of zeros,
 * not a row of horizons. */
int th_flow_side(const th_flow_point *point);

/** th_flow_create with the flow's own memory from a workspace; NULL: plain. */
TH_MUST_USE th_status th_flow_create_in(const th_flow_spec *spec, const th_ends *ends,
                                        th_workspace *workspace, th_flow **out, th_error *err);

/* Probe the whole flow, dense around its features: samples in ascending order, one on either side
 * of every edge, and the peaks of v - c that cross to the other sign between two others; with open
 * ends the outside states come first and last. *out is a block of the flow's workspace. */
TH_MUST_USE th_status th_flow_sample_all(const th_flow *flow, th_flow_sample **out, int *count,
                                         th_error *err);

/* Largest value of a measure between the neighbours of sample i (never less than its value at the
 * sample), inside the sample's piece. */
double th_flow_refine(const th_flow *flow, const th_flow_sample *sample, int count, int i,
                      th_flow_measure measure);

/* Integral of v dx over all pieces, adaptive Gauss-Legendre between the samples. */
double th_flow_integrate_speed(const th_flow *flow, const th_flow_sample *sample, int count);

/* Fill horizon, pocket and their counts. */
TH_MUST_USE th_status th_flow_find_horizons(th_flow *flow, const th_flow_sample *sample, int count,
                                            th_error *err);

/* The rules of th_ends; err->key names the key of [ends] that breaks one. */
TH_MUST_USE th_status th_ends_check(const th_ends *ends, th_error *err);

#endif
