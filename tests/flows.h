/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Flows, random numbers and comparisons that the tests of the numerical core share. Include after
 * cmocka.h. */
#ifndef TESTS_FLOWS_H
#define TESTS_FLOWS_H

#include <math.h>
#include <stdint.h>

#include "twinhorizon/flow.h"

static const double pi = 3.141592653589793238462643383280;

/* Uniform in [low, high): the 48-bit generator of POSIX written out, the same everywhere. */
static inline double draw(uint64_t *seed, double low, double high)
{
    *seed = (*seed * 0x5DEECE66Du + 0xBu) & 0xFFFFFFFFFFFFu;
    return low + (high - low) * (double)*seed / 281474976710656.0;
}

static inline void close_to(const char *what, double got, double want, double tolerance)
{
    if (!(fabs(got - want) <= tolerance))
        fail_msg("%s = %.17g, want %.17g to %g", what, got, want, tolerance);
}

static inline th_ends open_ends(void)
{
    return (th_ends){.kind = TH_ENDS_OPEN};
}

static inline th_ends walls(double padding)
{
    return (th_ends){.kind = TH_ENDS_WALLS, .padding = padding};
}

static inline th_ends ring(double circumference, int winding)
{
    return (th_ends){.kind = TH_ENDS_RING, .circumference = circumference, .winding = winding};
}

/* value[] in the order of the shape's keys; on a ring the winding fixes the speed. */
static inline th_flow *flow_of(const char *shape, th_ends ends, const double *value)
{
    th_flow_setup s = {.shape = th_shape_find(shape), .density = 1.7, .ends = ends};
    th_flow *flow = NULL;
    th_error err = {0};

    assert_non_null(s.shape);
    for (int i = 0; i < s.shape->keys; i++) {
        s.value[i] = value[i];
        s.given[i] = ends.kind != TH_ENDS_RING || !s.shape->key[i].fixed_by_ring;
    }
    if (th_flow_build(&s, &flow, &err) != TH_OK)
        fail_msg("%s: %s", err.key, err.text);
    return flow;
}

static inline th_flow *step_flow(double v, double c_u, double c_p, double c_d, double gap)
{
    const double value[5] = {v, c_u, c_p, c_d, gap};

    return flow_of("step", open_ends(), value);
}

/* A density with two bumps of different width at constant flux 0.6, sound speed 0.9 sqrt(n): all
 * three of n, v, c vary, nothing is symmetric. Callback of th_flow_spec, no context. */
static inline void bumpy_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    const double a = -0.55 * exp(-(x + 1) * (x + 1) / 2), b = -0.3 * exp(-(x - 2) * (x - 2));

    (void)ctx;
    (void)piece;
    *p = (th_flow_point){.n = 1 + a + b, .dn = -(x + 1) * a - 2 * (x - 2) * b};
    p->ddn = ((x + 1) * (x + 1) - 1) * a + (4 * (x - 2) * (x - 2) - 2) * b;
    p->v = 0.6 / p->n;
    p->dv = -p->v * p->dn / p->n;
    p->c = 0.9 * sqrt(p->n);
    p->dc = p->c * p->dn / (2 * p->n);
}

static inline th_flow *bumpy_flow(th_ends ends)
{
    const double edge[2] = {-11, 10};
    const th_feature feature[2] = {{-1, 1}, {2, 0.7}};
    const th_flow_spec spec = {
        .eval = bumpy_eval, .pieces = 1, .edge = edge, .features = 2, .feature = feature};
    th_flow *flow = NULL;
    th_error err = {0};

    if (th_flow_create(&spec, &ends, &flow, &err) != TH_OK)
        fail_msg("%s", err.text);
    return flow;
}

/* Uniform flow on [-length/2, length/2] of density 1. */
typedef struct {
    double v, c;
} uniform_state;

static inline void uniform_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    const uniform_state *s = ctx;

    (void)piece;
    (void)x;
    *p = (th_flow_point){.n = 1, .v = s->v, .c = s->c};
}

/* `state` must outlive the flow; on a ring its speed is set to what the winding demands. */
static inline th_flow *uniform_flow(th_ends ends, double length, uniform_state *state)
{
    const double edge[2] = {-length / 2, length / 2};
    const bool uniform = true;
    const th_flow_spec spec = {
        .eval = uniform_eval, .ctx = state, .pieces = 1, .edge = edge, .uniform = &uniform};
    th_flow *flow = NULL;
    th_error err = {0};

    if (ends.kind == TH_ENDS_RING)
        state->v = 2 * pi * ends.winding / ends.circumference;
    if (th_flow_create(&spec, &ends, &flow, &err) != TH_OK)
        fail_msg("%s", err.text);
    return flow;
}

#endif
