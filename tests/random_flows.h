/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Seeded random flows with open, subsonic ends, of all shapes, and the gaps at which their static
 * index changes. Include after cmocka.h. A new shape is one line of `random_shape` and one branch
 * of draw_values. Used by tests/test_random.c and tests/test_census.c. */
#ifndef TESTS_RANDOM_FLOWS_H
#define TESTS_RANDOM_FLOWS_H

#include <stdio.h>
#include <string.h>

#include "flows.h"
#include "twinhorizon/index.h"

typedef struct {
    const char *shape;
    int gap; /* place of the key that sets the length of the pocket */
    double value[TH_SHAPE_KEYS_MAX];
} random_flow;

static const struct {
    const char *name;
    int gap;
} random_shape[] = {{"step", 4}, {"tanh", 6},     {"sech", 3},
                    {"well", 2}, {"barriers", 2}, {"continuity", 6}};

enum { RANDOM_SHAPES = sizeof random_shape / sizeof random_shape[0] };

/* Evenly distributed on a logarithmic scale. */
static inline double draw_log(uint64_t *seed, double low, double high)
{
    return exp(draw(seed, log(low), log(high)));
}

/* A width: mostly about a healing length, sometimes steep or wide. */
static inline double draw_width(uint64_t *seed)
{
    return draw(seed, 0, 1) < 0.2 ? draw_log(seed, 0.01, 3) : draw_log(seed, 0.1, 1.5);
}

/* An end's sound speed: subsonic, now and then barely so. */
static inline double draw_end(uint64_t *seed, double v)
{
    return v * (draw(seed, 0, 1) < 0.1 ? 1 + draw_log(seed, 1e-3, 0.1) : draw(seed, 1.1, 2));
}

/* A pocket's: supersonic, now and then barely or far so. */
static inline double draw_pocket(uint64_t *seed, double v)
{
    const double kind = draw(seed, 0, 1);

    if (kind < 0.05)
        return v * (1 - draw_log(seed, 1e-2, 0.1));
    return v * (kind < 0.1 ? draw(seed, 0.12, 0.25) : draw(seed, 0.25, 0.9));
}

static inline void draw_values(random_flow *f, uint64_t *seed)
{
    const double v = draw(seed, 0.6, 1.3), c_u = draw_end(seed, v), c_d = draw_end(seed, v);
    const double c_p = draw_pocket(seed, v);
    const double width_black = draw_width(seed), width_white = draw_width(seed);
    double *x = f->value;

    if (strcmp(f->shape, "step") == 0 || strcmp(f->shape, "tanh") == 0) {
        x[0] = v;
        x[1] = c_u;
        x[2] = c_p;
        x[3] = c_d;
        x[4] = width_black;
        x[5] = width_white;
        x[f->gap] = draw(seed, 0.3, 16);
    } else if (strcmp(f->shape, "sech") == 0) {
        x[0] = v;
        x[1] = c_u;
        x[2] = c_u * c_u - c_p * c_p;
        x[f->gap] = draw(seed, 0.2, 5);
    } else if (strcmp(f->shape, "continuity") == 0) {
        x[0] = draw(seed, 0.2, 0.95);
        x[1] = draw(seed, 1.05, 2);
        x[2] = draw(seed, 0.2, 0.95);
        x[3] = 1;
        x[4] = width_black;
        x[5] = width_white;
        x[f->gap] = draw(seed, 0.3, 10);
        x[7] = draw(seed, 0, 1) < 0.5; /* transverse */
        x[8] = x[7] > 0 ? draw_log(seed, 0.01, 10) : 0;
    } else { /* well, barriers: x[0] is the sound speed upstream, 1 in a reduced case */
        x[0] = 1;
        x[1] = draw(seed, 0.25, 0.9);
        x[f->gap] = draw(seed, 0.3, 10);
    }
}

/* NULL where the values make no flow: smooth edges can overlap too far. */
static inline th_flow *random_build(const random_flow *f)
{
    th_flow_setup s = {.shape = th_shape_find(f->shape), .density = 1.7, .ends = open_ends()};
    th_flow *flow = NULL;
    th_error err = {0};

    assert_non_null(s.shape);
    for (int i = 0; i < s.shape->keys; i++) {
        s.value[i] = f->value[i];
        s.given[i] = th_shape_key_number(&s.shape->key[i])
                         ? !s.shape->key[i].optional || f->value[i] != 0
                         : true;
    }
    return th_flow_build(&s, &flow, &err) == TH_OK ? flow : NULL;
}

/* The values to the last digit, for messages. */
static inline const char *random_text(const random_flow *f, char *buffer, size_t size)
{
    size_t used = (size_t)snprintf(buffer, size, "%s", f->shape);
    const int keys = th_shape_find(f->shape)->keys;

    for (int i = 0; i < keys && used < size; i++)
        used += (size_t)snprintf(buffer + used, size - used, " %.17g", f->value[i]);
    return buffer;
}

/* A flow of shape `shape` (0 .. RANDOM_SHAPES - 1) that can be built. */
static inline random_flow random_draw(int shape, uint64_t *seed)
{
    random_flow f = {.shape = random_shape[shape].name, .gap = random_shape[shape].gap};
    th_flow *flow = NULL;

    for (int tries = 0; flow == NULL && tries < 100; tries++) {
        draw_values(&f, seed);
        flow = random_build(&f);
    }
    assert_non_null(flow);
    th_flow_destroy(flow);
    return f;
}

/* Static index of the flow with another gap; -1 where there is none. */
static inline int random_index(random_flow f, double gap)
{
    th_flow *flow;
    th_index index = {0};
    th_error err = {0};
    th_status st;

    f.value[f.gap] = gap;
    flow = random_build(&f);
    if (flow == NULL)
        return -1;
    st = th_index_open(flow, &index, &err);
    th_flow_destroy(flow);
    return st == TH_OK || st == TH_EUNDECIDED ? index.count : -1;
}

/* The gap near the drawn one where the static index rises by one, by bisection to rounding;
 * 0 when it does not change. Found without the census, which is what it tests. */
static inline double random_switch(const random_flow *f, int *before)
{
    double low = 0.5 * f->value[f->gap], high = 1.5 * f->value[f->gap];
    const int last = random_index(*f, high);

    *before = random_index(*f, low);
    if (*before < 0 || last <= *before)
        return 0;
    while (high - low > 1e-14 * high) {
        const double middle = 0.5 * (low + high);

        *(random_index(*f, middle) > *before ? &high : &low) = middle;
    }
    return high;
}

/* L_j of a step: gaps at which mode j switches on. Closed form of the static linearised equation at
 * fixed current, [atan(k_u/k_0) + atan(k_d/k_0) + j pi]/k_0; set-up of Phys. Rev. D 88, 125012
 * (2013). */
static inline double step_switch(double v, double c_u, double c_p, double c_d, int j)
{
    const double k_0 = 2 * sqrt(v * v - c_p * c_p), k_u = 2 * sqrt(c_u * c_u - v * v);
    const double k_d = 2 * sqrt(c_d * c_d - v * v);

    return (atan(k_u / k_0) + atan(k_d / k_0) + j * pi) / k_0;
}

#endif
