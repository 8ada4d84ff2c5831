/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The bound on growth rates that makes the census' region finite. In: a flow. Out: a rate. Calls
 * flow. Derivation and symbols: DEVELOPERS.md, "Growth bound". Proof: tests/test_census.c. */
#include <gsl/gsl_math.h>
#include <stdbool.h>
#include <stddef.h>

#include "twinhorizon/census.h"

enum { SAMPLES = 400 }; /* per piece and per feature */
static const double margin = 1.02;
/* v differs by more than this, relatively, on the sides of an edge: it jumps. */
static const double speed_jump = 1e-8;

typedef struct {
    double rate;  /* largest of -v' and v c'/c */
    double c, nc; /* smallest c and n c */
    double rise;  /* sum of the rises of c^2 at jumps, along the flow */
    bool breaks;  /* v jumps somewhere */
} findings;

static void take(const th_flow *flow, int piece, double x, findings *f)
{
    th_flow_point at;

    th_flow_eval(flow, piece, x, &at);
    f->rate = fmax(f->rate, fmax(-at.dv, at.v * at.dc / at.c));
    f->c = fmin(f->c, at.c);
    f->nc = fmin(f->nc, at.n * at.c);
}

static void take_pieces(const th_flow *flow, findings *f)
{
    const th_feature *feature;
    const double *edge;
    int edges, features;

    edge = th_flow_edges(flow, &edges);
    feature = th_flow_features(flow, &features);
    for (int i = 0; i + 1 < edges; i++) {
        const int samples = th_flow_piece_uniform(flow, i) ? 1 : SAMPLES;

        for (int q = 0; q <= samples; q++)
            take(flow, i, edge[i] + (edge[i + 1] - edge[i]) * q / samples, f);
        for (int j = 0; samples > 1 && j < features; j++)
            for (int q = 0; q <= SAMPLES; q++) {
                const double x = feature[j].x + feature[j].width * 5.0 * (2.0 * q / SAMPLES - 1.0);

                if (x >= edge[i] && x <= edge[i + 1])
                    take(flow, i, x, f);
            }
    }
}

/* Edges; on a ring the seam is one too. */
static void take_edges(const th_flow *flow, findings *f)
{
    const bool open = th_flow_ends(flow).kind == TH_ENDS_OPEN;
    const double *edge;
    int edges;

    edge = th_flow_edges(flow, &edges);
    for (int i = open ? 0 : 1; i < edges; i++) {
        const bool seam = !open && i == edges - 1;
        th_flow_point l, r;

        th_flow_eval(flow, i - 1, edge[i], &l);
        th_flow_eval(flow, seam ? 0 : i, edge[seam ? 0 : i], &r);
        f->c = fmin(f->c, fmin(l.c, r.c));
        f->nc = fmin(f->nc, fmin(l.n * l.c, r.n * r.c));
        f->rise += fmax(0.0, r.c * r.c - l.c * l.c);
        f->breaks = f->breaks || fabs(r.v - l.v) > speed_jump * l.v;
    }
}

double th_growth_bound(const th_flow *flow)
{
    const double sound = th_flow_sound_max(flow);
    const th_ends ends = th_flow_ends(flow);
    findings f = {.c = sound, .nc = HUGE_VAL};
    double jumps;

    take_pieces(flow, &f);
    take_edges(flow, &f);
    if (ends.kind == TH_ENDS_WALLS || f.breaks) /* the energy estimate does not hold */
        return margin * sound * sound;
    jumps = th_flow_flux(flow) * f.rise / (2.0 * f.nc);
    if (ends.kind == TH_ENDS_RING)
        jumps /= tanh(f.c * ends.circumference);
    return margin * fmin(sound * sound, f.rate + jumps);
}
