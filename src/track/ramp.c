/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What a ramp along the line gains. In: a line, a time. Out: Int Im omega dt of each branch, where
 * following it is doubtful. Calls track, alloc.
 * Symbols: x length, s = dx/dt its speed; g = Im omega. The trapezoidal rule on the points of the
 * line, which are dense where g bends. Proof: tests/test_track.c, tests/check_ramp.py. */
#include "track/inside.h"

#include <complex.h>
#include <gsl/gsl_heapsort.h>
#include <math.h>
#include <stdlib.h>

#include "alloc.h"

/* From this ratio on of |d omega/dt| to the square of the distance to another growing mode, modes
 * mix: measured, a ramp on which it is 0.25 ends an e-folding away from the gain of either. */
static const double doubt = 0.1;
/* From this ratio on of |d omega/dt| to |omega|^2 a mode changes before it grows: measured, ramps
 * of a single mode on which it is 2.5 gain what they should to 1.5 %. */
static const double sudden = 3.0;

static double complex omega_of(const th_track_mode *m)
{
    return m->omega_re + I * m->omega_im;
}

static const th_track_mode *find(const th_track_node *node, int branch)
{
    for (int i = 0; i < node->point.count; i++)
        if (node->mode[i].branch == branch)
            return &node->mode[i];
    return NULL;
}

/* Distance of a mode to the nearest other growing one or mirror image of one; infinite without. */
static double distance(const th_track_node *node, const th_track_mode *m)
{
    double least = HUGE_VAL;

    for (int i = 0; i < node->point.count; i++) {
        const th_track_mode *other = &node->mode[i];

        if (other == m)
            continue;
        least = fmin(least, cabs(omega_of(m) - omega_of(other)));
        least = fmin(least, cabs(omega_of(m) + conj(omega_of(other))));
    }
    return least;
}

/* |d omega/dt| of a branch from node a to node b. */
static double change(const th_track *t, int branch, int a, int b, double speed)
{
    const th_track_node *left = &t->node[a], *right = &t->node[b];

    return cabs(omega_of(find(right, branch)) - omega_of(find(left, branch))) /
           (right->length - left->length) * speed;
}

/* The next answered node with the branch from `at` on, in steps of `by`; -1 where the branch or
 * what is known ends. */
static int along(const th_track *t, int branch, int at, int by)
{
    const int next = th_track_next(t, at + by, by);

    if (next < 0 || find(&t->node[next], branch) == NULL ||
        !th_track_joined(t, next < at ? next : at, next < at ? at : next))
        return -1;
    return next;
}

/* The mixing parameter of a branch on the interval of nodes a, b: |d omega/dt|/d^2, with the slope
 * over the time 1/d that a beat of the two modes takes. At a square root the slope on a short
 * interval is as large as one likes, but passes before modes can mix. */
static double mixing(const th_track *t, int branch, int a, int b, double speed)
{
    const th_track_node *node = t->node;
    const double middle = 0.5 * (node[a].length + node[b].length);
    const double d = fmin(distance(&node[a], find(&node[a], branch)),
                          distance(&node[b], find(&node[b], branch)));
    const double half = d > 0.0 ? 0.5 * speed / d : 0.0;

    for (int next; middle - node[a].length < half && (next = along(t, branch, a, -1)) >= 0;)
        a = next;
    for (int next; node[b].length - middle < half && (next = along(t, branch, b, 1)) >= 0;)
        b = next;
    return d > 0.0 ? change(t, branch, a, b, speed) / (d * d) : HUGE_VAL;
}

static bool doubtful(const th_track *t, int branch, int a, int b, double speed)
{
    const double size =
        fmin(cabs(omega_of(find(&t->node[a], branch))), cabs(omega_of(find(&t->node[b], branch))));

    return mixing(t, branch, a, b, speed) > doubt ||
           change(t, branch, a, b, speed) > sudden * size * size;
}

static double fastest(const th_track_node *node)
{
    return node->point.count > 0 ? node->mode[0].omega_im : 0.0;
}

/* One interval of a branch; a mode that is missing at one end began or ended in between. */
static void add(const th_track *t, th_track_gain *g, int a, int b, double speed)
{
    const th_track_mode *at_a = find(&t->node[a], g->branch), *at_b = find(&t->node[b], g->branch);
    const double time = (t->node[b].length - t->node[a].length) / speed;
    const double start = at_a != NULL ? at_a->omega_im : 0.0;
    const double end = at_b != NULL ? at_b->omega_im : 0.0;
    double part;

    if (at_a == NULL && at_b == NULL)
        return;
    /* it began anywhere between: half of the interval, give or take the other half */
    part = (at_a != NULL && at_b != NULL ? 0.5 : 0.25) * (start + end) * time;
    g->gain += part;
    if (at_a == NULL || at_b == NULL) {
        g->error += part;
        g->doubtful += part;
        return;
    }
    g->error += 0.5 * (at_a->omega_error + at_b->omega_error) * time;
    if (doubtful(t, g->branch, a, b, speed))
        g->doubtful += part;
}

static void meet(th_track_gain *g, const th_track_node *node)
{
    const th_track_mode *m = find(node, g->branch);

    if (m == NULL)
        return;
    if (g->growth == 0.0)
        g->from = node->length;
    g->to = node->length;
    if (m->omega_im > g->growth) {
        g->growth = m->omega_im;
        g->dominant = node->length;
    }
}

/* Error of the trapezoidal rule: from pairs of neighbouring intervals without their middle. */
static double coarse_error(const th_track *t, int branch, double speed)
{
    double sum = 0.0;
    int a = th_track_next(t, 0, 1), b = a >= 0 ? th_track_next(t, a + 1, 1) : -1, c;

    while (b >= 0 && (c = th_track_next(t, b + 1, 1)) >= 0) {
        const th_track_mode *m[3] = {find(&t->node[a], branch), find(&t->node[b], branch),
                                     find(&t->node[c], branch)};
        const double left = t->node[b].length - t->node[a].length;
        const double right = t->node[c].length - t->node[b].length;

        if (m[0] != NULL && m[1] != NULL && m[2] != NULL && th_track_joined(t, a, b) &&
            th_track_joined(t, b, c))
            sum += fabs(0.5 * (m[0]->omega_im + m[1]->omega_im) * left +
                        0.5 * (m[1]->omega_im + m[2]->omega_im) * right -
                        0.5 * (m[0]->omega_im + m[2]->omega_im) * (left + right)) /
                   speed;
        a = c;
        b = th_track_next(t, a + 1, 1);
    }
    return sum;
}

static int by_gain(const void *a, const void *b)
{
    const th_track_gain *x = a, *y = b;

    if (x->gain != y->gain)
        return x->gain > y->gain ? -1 : 1;
    return (x->branch > y->branch) - (x->branch < y->branch);
}

/* Where the leading branch mixes most. */
static void find_worst(const th_track *t, double speed, th_ramp *out)
{
    const int branch = out->gain[0].branch;

    for (int a = th_track_next(t, 0, 1), b; a >= 0; a = b) {
        double e;

        b = th_track_next(t, a + 1, 1);
        if (b < 0)
            break;
        if (find(&t->node[a], branch) == NULL || along(t, branch, a, 1) < 0)
            continue;
        e = mixing(t, branch, a, b, speed);
        if (e > out->worst) {
            out->worst = e;
            out->worst_length = 0.5 * (t->node[a].length + t->node[b].length);
        }
    }
}

th_status th_track_ramp(const th_track *track, double time, th_ramp *out, th_error *err)
{
    const th_track *t = track;
    const double line = t != NULL ? t->options.to - t->options.from : 0.0, speed = line / time;
    double known = 0.0;

    if (t == NULL || out == NULL)
        return th_fail(err, TH_EINVAL, "track: want a line and a place for a ramp");
    if (!(time > 0.0) || !isfinite(speed))
        return th_fail(err, TH_EINVAL, "track: a ramp in a time of %g, want > 0", time);
    *out = (th_ramp){.count = t->branches};
    out->gain = th_alloc((size_t)t->branches, sizeof *out->gain);
    if (out->gain == NULL)
        return th_fail(err, TH_ENOMEM, "track: gains of %d branches", t->branches);
    for (int k = 0; k < t->branches; k++)
        out->gain[k].branch = k;
    for (int i = 0; i < t->count; i++)
        for (int k = 0; th_track_answered(&t->node[i]) && k < t->branches; k++)
            meet(&out->gain[k], &t->node[i]);
    for (int a = th_track_next(t, 0, 1), b; a >= 0; a = b) {
        const th_track_node *left = &t->node[a], *right;

        b = th_track_next(t, a + 1, 1);
        if (b < 0)
            break;
        if (!th_track_joined(t, a, b))
            continue;
        right = &t->node[b];
        known += right->length - left->length;
        out->best +=
            0.5 * (fastest(left) + fastest(right)) * (right->length - left->length) / speed;
        for (int k = 0; k < t->branches; k++)
            add(t, &out->gain[k], a, b, speed);
    }
    for (int k = 0; k < t->branches; k++) {
        th_track_gain *g = &out->gain[k];

        g->error += coarse_error(t, k, speed);
        g->doubtful = g->gain > 0.0 ? fmin(1.0, g->doubtful / g->gain) : 0.0;
        out->best_error += g->error;
    }
    out->unanswered = fmax(0.0, 1.0 - known / line);
    if (t->branches > 0) {
        gsl_heapsort(out->gain, (size_t)t->branches, sizeof *out->gain, by_gain);
        out->dominant = out->gain[0].dominant;
        find_worst(t, speed, out);
    }
    return TH_OK;
}

void th_ramp_clear(th_ramp *ramp)
{
    free(ramp->gain);
    *ramp = (th_ramp){0};
}
