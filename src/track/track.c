/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Modes along a line of lengths. In: a configuration, the ends of the line. Out: certified points,
 * denser where something happens, their modes joined to branches. Calls point, sweep (branches),
 * parallel, flow.
 * Even samples come first, in blocks of neighbours; then passes that halve intervals. What a pass
 * halves depends on the points alone, so results do not depend on threads.
 * Proof: tests/test_track.c, tests/check_ramp.py. */
#include "track/inside.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "alloc.h"
#include "parallel.h"
#include "twinhorizon/sweep.h"
#include "twinhorizon/workspace.h"

/* Samples of a block: each starts from the one before it. */
enum { BLOCK = 16 };
/* Changes of the number of modes are located to this part of the line, bends to this; a growth rate
 * bends when it is off the straight line between its neighbours by this part of the largest one. */
typedef struct {
    double change, bend, size;
} fineness;
static const fineness open_ends = {1e-4, 2e-3, 2e-3};
/* Rings and walls take a full solution, half a second, a point. */
static const fineness closed_ends = {1e-3, 8e-3, 1e-2};
/* Halvings end the passes long before; a bound for what cannot be foreseen. */
enum { PASSES = 20 };
/* A mode may be this far from its continuation, relative to the top of the band; farther away it is
 * another branch. */
static const double branch_reach = 0.1;
/* Between answered points up to this many first spacings apart the modes are taken as known: one
 * sample that falls on a switch-on is undecided. */
static const double joined_spacings = 2.5;

bool th_track_answered(const th_track_node *node)
{
    return node->point.state == TH_POINT_OK;
}

int th_track_next(const th_track *track, int at, int by)
{
    for (; at >= 0 && at < track->count; at += by)
        if (th_track_answered(&track->node[at]))
            return at;
    return -1;
}

bool th_track_joined(const th_track *track, int left, int right)
{
    return track->node[right].length - track->node[left].length <= joined_spacings * track->spacing;
}

/* Modes that do not grow are no part of a line (a full solution lists them too). */
static void keep_growing(th_point *point)
{
    int kept = 0;

    for (int i = 0; i < point->count; i++)
        if (point->mode[i].label == TH_LABEL_UNSTABLE)
            point->mode[kept++] = point->mode[i];
    point->count = kept;
}

th_status th_track_answer(const th_track *track, double length, const th_point *previous,
                          th_workspace *workspace, th_point *point, th_error *err)
{
    const bool follow = previous != NULL && previous->state != TH_POINT_FAILED;
    const th_point *before[2] = {follow ? previous : NULL, NULL};
    th_flow_setup setup = track->setup;
    th_status st;

    setup.value[track->options.key] = length;
    setup.given[track->options.key] = true;
    setup.workspace = workspace;
    st = th_point_follow(&setup, track->options.accuracy, before, point, err);
    keep_growing(point);
    return st;
}

static bool is_open(const th_track *t)
{
    return t->setup.ends.kind == TH_ENDS_OPEN;
}

/* ---- first samples -------------------------------------------------------------------------- */

static th_status answer_block(void *ctx, long block, th_error *err)
{
    th_track *t = ctx;
    const int first = (int)block * BLOCK;
    const int end = first + BLOCK < t->count ? first + BLOCK : t->count;
    th_workspace *workspace = NULL;
    th_status st = th_workspace_create(&workspace, err);

    for (int i = first; st == TH_OK && i < end; i++)
        st = th_track_answer(t, t->node[i].length, i > first ? &t->node[i - 1].point : NULL,
                             workspace, &t->node[i].point, err);
    th_workspace_destroy(workspace);
    return st;
}

static th_status reserve(th_track *t, int room, th_error *err)
{
    th_track_node *more;

    if (room <= t->room)
        return TH_OK;
    more = realloc(t->node, (size_t)room * sizeof *more);
    if (more == NULL)
        return th_fail(err, TH_ENOMEM, "track: %d lengths", room);
    t->node = more;
    t->room = room;
    return TH_OK;
}

static th_status first_samples(th_track *t, th_error *err)
{
    const int points = t->options.points > 0 ? t->options.points
                       : is_open(t)          ? TH_TRACK_POINTS
                                             : TH_TRACK_POINTS_CLOSED;
    const double from = t->options.from, to = t->options.to;
    th_status st = reserve(t, points, err);

    if (st != TH_OK)
        return st;
    memset(t->node, 0, (size_t)points * sizeof *t->node);
    t->count = points;
    t->spacing = (to - from) / (points - 1);
    for (int i = 0; i < points; i++) {
        const double part = i / (points - 1.0);

        t->node[i].length = (1.0 - part) * from + part * to; /* exact at both ends */
    }
    return th_parallel(t->options.threads, (points + BLOCK - 1) / BLOCK, answer_block, t, NULL,
                       err);
}

/* ---- refinement ----------------------------------------------------------------------------- */

static double fastest(const th_track_node *node)
{
    return node->point.count > 0 ? node->point.mode[0].omega_im : 0.0;
}

static bool same_modes(const th_track_node *a, const th_track_node *b)
{
    return a->point.unstable == b->point.unstable && a->point.count == b->point.count;
}

/* Whether the growth rates at b, in falling order, lie on the lines from a to c. */
static bool straight(const th_track_node *a, const th_track_node *b, const th_track_node *c,
                     double off)
{
    const double part = (b->length - a->length) / (c->length - a->length);

    for (int i = 0; i < b->point.count; i++) {
        const double line =
            (1.0 - part) * a->point.mode[i].omega_im + part * c->point.mode[i].omega_im;

        if (fabs(b->point.mode[i].omega_im - line) > off)
            return false;
    }
    return true;
}

/* Mark the intervals [i, i + 1] that are to be halved; returns how many. */
static int mark(const th_track *t, bool *halve)
{
    const fineness *f = is_open(t) ? &open_ends : &closed_ends;
    const double line = t->options.to - t->options.from;
    double scale = 0.0;
    int marked = 0;

    for (int i = 0; i < t->count; i++)
        if (th_track_answered(&t->node[i]))
            scale = fmax(scale, fastest(&t->node[i]));
    for (int i = 0; i + 1 < t->count; i++) {
        const th_track_node *a = &t->node[i], *b = a + 1;
        const int left = th_track_next(t, i, -1), right = th_track_next(t, i + 1, 1);

        /* also beside a point without an answer: it may sit on the change */
        halve[i] = left >= 0 && right >= 0 && (th_track_answered(a) || th_track_answered(b)) &&
                   !same_modes(&t->node[left], &t->node[right]) &&
                   b->length - a->length > f->change * line;
    }
    for (int i = 0; i + 2 < t->count; i++) {
        const th_track_node *a = &t->node[i], *b = a + 1, *c = a + 2;

        if (!th_track_answered(a) || !th_track_answered(b) || !th_track_answered(c) ||
            !same_modes(a, b) || !same_modes(b, c) || straight(a, b, c, f->size * scale))
            continue;
        halve[i] = halve[i] || b->length - a->length > f->bend * line;
        halve[i + 1] = halve[i + 1] || c->length - b->length > f->bend * line;
    }
    for (int i = 0; i + 1 < t->count; i++)
        marked += halve[i];
    return marked;
}

/* New nodes of a pass, each with the one to its left. */
typedef struct {
    const th_track *track;
    th_track_node *fresh;
    const int *left;
} pass;

static th_status answer_fresh(void *ctx, long item, th_error *err)
{
    pass *p = ctx;
    th_workspace *workspace = NULL;
    th_status st = th_workspace_create(&workspace, err);

    if (st == TH_OK)
        st = th_track_answer(p->track, p->fresh[item].length, &p->track->node[p->left[item]].point,
                             workspace, &p->fresh[item].point, err);
    th_workspace_destroy(workspace);
    return st;
}

/* Put the new nodes into their places; they move over. */
static void insert(th_track *t, const th_track_node *fresh, const int *left, int count)
{
    int to = t->count + count - 1, i = t->count - 1;

    for (int k = count - 1; k >= 0; k--) {
        while (i > left[k])
            t->node[to--] = t->node[i--];
        t->node[to--] = fresh[k];
    }
    t->count += count;
}

/* One pass; *more tells whether anything was halved. */
static th_status refine(th_track *t, bool *more, th_error *err)
{
    th_status st = TH_OK;
    bool *halve = th_alloc((size_t)t->count, sizeof *halve);
    pass p = {.track = t};
    int *left = NULL, count = 0, used = 0;

    *more = false;
    if (halve == NULL)
        return th_fail(err, TH_ENOMEM, "track: %d marks", t->count);
    count = mark(t, halve);
    if (count == 0)
        goto done;
    left = th_alloc((size_t)count, sizeof *left);
    p.fresh = th_alloc((size_t)count, sizeof *p.fresh);
    if (left == NULL || p.fresh == NULL) {
        st = th_fail(err, TH_ENOMEM, "track: %d new lengths", count);
        goto done;
    }
    for (int i = 0; i + 1 < t->count; i++)
        if (halve[i]) {
            p.fresh[used].length = (t->node[i].length + t->node[i + 1].length) / 2.0;
            left[used++] = i;
        }
    p.left = left;
    st = reserve(t, t->count + count, err);
    if (st == TH_OK)
        st = th_parallel(t->options.threads, count, answer_fresh, &p, NULL, err);
    if (st == TH_OK)
        insert(t, p.fresh, left, count);
    else
        for (int i = 0; i < count; i++)
            th_point_clear(&p.fresh[i].point);
    *more = st == TH_OK;
done:
    free(halve);
    free(left);
    free(p.fresh);
    return st;
}

/* ---- branches ------------------------------------------------------------------------------- */

/* Join the modes of all answered nodes. The steps of the line are uneven: a mode's last step is
 * shortened to the next one, but never made longer, since frequencies leave a merger as a square
 * root. */
static th_status join(th_track *t, th_error *err)
{
    th_branches line = {.workspace = NULL};
    int *branch = NULL, room = 0;
    double step = 0.0;
    th_status st = TH_OK;

    for (int i = 0; i < t->count; i++)
        room = t->node[i].point.count > room ? t->node[i].point.count : room;
    branch = th_alloc((size_t)room, sizeof *branch);
    if (branch == NULL)
        return th_fail(err, TH_ENOMEM, "track: branches of %d modes", room);
    for (int i = th_track_next(t, 0, 1), before = -1; st == TH_OK && i >= 0;
         before = i, i = th_track_next(t, i + 1, 1)) {
        th_track_node *node = &t->node[i];
        const double next = before >= 0 ? node->length - t->node[before].length : 0.0;

        for (int j = 0; j < line.count; j++) {
            line.dre[j] *= step > 0.0 ? fmin(1.0, next / step) : 0.0;
            line.dim[j] *= step > 0.0 ? fmin(1.0, next / step) : 0.0;
        }
        st = th_branches_next(&line, &node->point, branch_reach * t->omega_top, branch, err);
        step = next;
        if (st == TH_OK)
            node->mode = th_alloc((size_t)node->point.count, sizeof *node->mode);
        if (st == TH_OK && node->mode == NULL)
            st = th_fail(err, TH_ENOMEM, "track: %d modes", node->point.count);
        for (int j = 0; st == TH_OK && j < node->point.count; j++)
            node->mode[j] =
                (th_track_mode){branch[j] - 1, node->point.mode[j].omega_re,
                                node->point.mode[j].omega_im, node->point.mode[j].omega_error};
    }
    t->branches = line.last;
    th_branches_clear(&line);
    free(branch);
    return st;
}

/* ---- making --------------------------------------------------------------------------------- */

static th_status show(th_track *t, th_error *err)
{
    t->shown = th_alloc((size_t)t->count, sizeof *t->shown);
    if (t->shown == NULL)
        return th_fail(err, TH_ENOMEM, "track: %d points", t->count);
    for (int i = 0; i < t->count; i++) {
        const th_track_node *node = &t->node[i];
        const bool failed = node->point.state == TH_POINT_FAILED;

        t->shown[i] = (th_track_point){.length = node->length,
                                       .state = node->point.state,
                                       .unstable = failed ? 0 : node->point.unstable,
                                       .count = node->mode != NULL ? node->point.count : 0,
                                       .mode = node->mode};
    }
    return TH_OK;
}

/* The widest band of a few of the flows that exist: a scale. */
static double band(const th_track *t)
{
    double most = 0.0;

    for (int i = 0; i <= 4; i++) {
        const int at = th_track_next(t, i * (t->count - 1) / 4, i < 2 ? 1 : -1);
        th_flow_setup setup = t->setup;
        th_flow *flow = NULL;

        if (at < 0)
            continue;
        setup.value[t->options.key] = t->node[at].length;
        setup.given[t->options.key] = true;
        if (th_flow_build(&setup, &flow, NULL) == TH_OK)
            most = fmax(most, th_flow_band_limit(flow));
        th_flow_destroy(flow);
    }
    return most;
}

static th_status check(const th_flow_setup *setup, const th_track_options *o, th_error *err)
{
    if (setup == NULL || o == NULL || o->key < 0 || o->key >= setup->shape->keys ||
        !th_shape_key_number(&setup->shape->key[o->key]))
        return th_fail(err, TH_EINVAL, "track: the shape has no length of a pocket");
    if (!(o->from > 0.0) || !(o->from < o->to) || !isfinite(o->to))
        return th_fail(err, TH_EINVAL, "track: lengths from %g to %g, want 0 < from < to", o->from,
                       o->to);
    if (o->points != 0 && o->points < 3)
        return th_fail(err, TH_EINVAL, "track: points = %d, want 3 or more", o->points);
    if (o->threads < 1)
        return th_fail(err, TH_EINVAL, "track: threads = %d, want 1 or more", o->threads);
    return TH_OK;
}

th_status th_track_create(const th_flow_setup *setup, const th_track_options *options,
                          th_track **out, th_error *err)
{
    th_track *t = NULL;
    bool more = true;
    th_status st = out != NULL ? check(setup, options, err)
                               : th_fail(err, TH_EINVAL, "track: no place for the result");

    if (st != TH_OK)
        return st;
    *out = NULL;
    t = th_alloc(1, sizeof *t);
    if (t == NULL)
        return th_fail(err, TH_ENOMEM, "track: a line");
    t->setup = *setup;
    t->setup.workspace = NULL;
    t->options = *options;
    st = first_samples(t, err);
    if (st == TH_OK && th_track_next(t, 0, 1) < 0)
        st = th_fail(err, TH_ENONE, "no length has an answer; at the first: %s",
                     t->node[0].point.message);
    for (int i = 0; st == TH_OK && more && i < PASSES; i++)
        st = refine(t, &more, err);
    if (st == TH_OK) {
        t->omega_top = band(t);
        st = join(t, err);
    }
    if (st == TH_OK)
        st = show(t, err);
    if (st == TH_OK)
        *out = t;
    else
        th_track_destroy(t);
    return st;
}

void th_track_destroy(th_track *track)
{
    if (track == NULL)
        return;
    for (int i = 0; i < track->count; i++) {
        th_point_clear(&track->node[i].point);
        free(track->node[i].mode);
    }
    free(track->node);
    free(track->shown);
    free(track);
}

const th_track_point *th_track_points(const th_track *track, int *count)
{
    *count = track->count;
    return track->shown;
}

int th_track_branches(const th_track *track)
{
    return track->branches;
}
