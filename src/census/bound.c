/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The bound on growth rates that makes the census' region finite. In: a flow. Out: a rate. Calls
 * flow. Derivation: DEVELOPERS.md, "Growth bound". Proof: tests/test_census.c. */
#include <gsl/gsl_math.h>
#include <stddef.h>

#include "twinhorizon/census.h"

enum { SAMPLES = 400 }; /* per piece and per feature */
static const double margin = 1.02;

/* Largest of -v' and v c'/c at a place. */
static double local_rate(const th_flow *flow, int piece, double x)
{
    th_flow_point at;

    th_flow_eval(flow, piece, x, &at);
    return fmax(-at.dv, at.v * at.dc / at.c);
}

static double smooth_rate(const th_flow *flow)
{
    const th_feature *feature;
    const double *edge;
    double top = 0.0;
    int edges, features;

    edge = th_flow_edges(flow, &edges);
    feature = th_flow_features(flow, &features);
    for (int i = 0; i + 1 < edges; i++) {
        if (th_flow_piece_uniform(flow, i))
            continue;
        for (int q = 0; q <= SAMPLES; q++)
            top = fmax(top, local_rate(flow, i, edge[i] + (edge[i + 1] - edge[i]) * q / SAMPLES));
        for (int f = 0; f < features; f++)
            for (int q = 0; q <= SAMPLES; q++) {
                const double x = feature[f].x + feature[f].width * 5.0 * (2.0 * q / SAMPLES - 1.0);

                if (x >= edge[i] && x <= edge[i + 1])
                    top = fmax(top, local_rate(flow, i, x));
            }
    }
    return top;
}

/* Jumps of c^2 that rise along the flow; on a ring the seam is an edge too. */
static double jump_rate(const th_flow *flow)
{
    const th_ends_kind ends = th_flow_ends(flow).kind;
    const double *edge;
    double sum = 0.0;
    int edges;

    edge = th_flow_edges(flow, &edges);
    for (int i = ends == TH_ENDS_OPEN ? 0 : 1; i < edges; i++) {
        th_flow_point l, r;

        if (i == edges - 1 && ends == TH_ENDS_WALLS)
            continue;
        th_flow_eval(flow, i - 1, edge[i], &l);
        if (i == edges - 1 && ends == TH_ENDS_RING)
            th_flow_eval(flow, 0, edge[0], &r);
        else
            th_flow_eval(flow, i, edge[i], &r);
        if (r.c > l.c)
            sum += fmax(l.v, r.v) * (r.c * r.c - l.c * l.c) / (2.0 * l.c);
    }
    return sum;
}

double th_growth_bound(const th_flow *flow)
{
    const double sound = th_flow_sound_max(flow);

    return margin * fmin(sound * sound, smooth_rate(flow) + jump_rate(flow));
}
