/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A profile with two tanh edges, private to src/flow:
 *   f(x) = f_p + (f_u - f_p) B(x) + (f_d - f_p) W(x),
 *   B = (1 - tanh((x - x_b)/w_b))/2, W = (1 + tanh((x - x_w)/w_w))/2,
 * cut into the pieces of a flow. An edge with equal values on both sides is absent. What goes in:
 * the three values, widths, the places where each edge alone has a given value. What comes out:
 * f and derivatives, pieces, features. The shapes tanh (f = c) and continuity (f = v) use it. */
#ifndef TH_FLOW_EDGES_H
#define TH_FLOW_EDGES_H

#include "shapes.h"

enum { TH_EDGES_PIECES_MAX = 5 };

/* One edge. In the direction `side` (-1 black, 1 white) f goes from the pocket's value to
 * `outer`. */
typedef struct {
    double side, x, width, outer;
    bool present;
} th_edge;

typedef struct {
    const char *name; /* of f in messages, such as "sound speed" */
    double pocket;    /* f_p */
    th_edge edge[2];  /* black, white; outer = f_u, f_d */
    double sound[3];  /* sound speed upstream, in the pocket, downstream */
    int pieces;
    double at[TH_EDGES_PIECES_MAX + 1];
    bool uniform[TH_EDGES_PIECES_MAX];
    double value[TH_EDGES_PIECES_MAX]; /* f on the uniform pieces */
} th_edges;

/** Centre an edge so that alone it has f = `value` at x; false when value does not lie between
 * its two sides. An absent edge is centred at x. */
bool th_edges_place(th_edges *edges, int which, double x, double value);

/**
 * Cut the profile into pieces: [uniform on a ring] edge [uniform plateau] edge [uniform on a ring].
 * half: where a uniform flow ends. On a ring the edges must fit: TH_EINVAL, key gap or
 * circumference.
 */
TH_MUST_USE th_status th_edges_cut(th_edges *edges, const th_ends *ends, double half,
                                   th_error *err);

/** f, f', f'' on a piece; -1 and pieces are the uniform outside. */
void th_edges_eval(const th_edges *edges, int piece, double x, double f[3]);

/** The pieces and features in a spec; feature has room for two. */
void th_edges_spec(const th_edges *edges, th_flow_spec *spec, th_feature *feature);

#endif
