/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of th_track: births against the closed form of step pockets ("Saturation of black hole
 * lasers in Bose-Einstein condensates", Phys. Rev. D 88, 125012 (2013)), gains and maxima against
 * denser points of th_point_answer. Time integration is tests/check_ramp.py. */
#include <complex.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "flows.h"
#include "refuse.h"
#include "twinhorizon/track.h"

extern void openblas_set_num_threads(int threads);

static th_flow_setup setup_of(const char *shape, th_ends ends, const double *value)
{
    th_flow_setup s = {.shape = th_shape_find(shape), .density = 1, .ends = ends};

    for (int i = 0; i < s.shape->keys; i++) {
        s.value[i] = value[i];
        s.given[i] = ends.kind != TH_ENDS_RING || !s.shape->key[i].fixed_by_ring;
    }
    return s;
}

static th_flow_setup step(void)
{
    return setup_of("step", open_ends(), (const double[]){0.75, 1, 0.3, 1, 5});
}

static th_flow_setup tanh_pocket(void)
{
    return setup_of("tanh", open_ends(), (const double[]){1, 1.5, 0.5, 1.5, 0.5, 0.5, 5});
}

static th_track *track_of(const th_flow_setup *s, double from, double to, int points, int threads)
{
    const th_track_options options = {.key = th_shape_length(s->shape),
                                      .from = from,
                                      .to = to,
                                      .points = points,
                                      .accuracy = 1e-9,
                                      .threads = threads};
    th_track *t = NULL;
    th_error err = {0};

    if (th_track_create(s, &options, &t, &err) != TH_OK)
        fail_msg("%s", err.text);
    return t;
}

/* L_j of v = 0.75, c = 1/0.3/1. */
static double switch_on(int j)
{
    const double k0 = 2 * sqrt(0.75 * 0.75 - 0.09), k = 2 * sqrt(1 - 0.75 * 0.75);

    return (2 * atan(k / k0) + j * pi) / k0;
}

static th_ramp ramp_of(const th_track *t, double time)
{
    th_ramp r;

    assert_int_equal(th_track_ramp(t, time, &r, NULL), TH_OK);
    return r;
}

static const th_track_gain *gain_of(const th_ramp *r, int branch)
{
    for (int i = 0; i < r->count; i++)
        if (r->gain[i].branch == branch)
            return &r->gain[i];
    fail_msg("branch %d has no gain", branch);
    return NULL;
}

/* Even switch-ons begin branches, odd ones turn them into pairs and go on: from 0.5 to 9 two of
 * each. Points in order, modes fastest first, counts consistent. */
static void test_step(void **state)
{
    th_flow_setup s = step();
    th_track *t = track_of(&s, 0.5, 9, 0, 2);
    const double line = 8.5;
    const th_track_point *p;
    th_track_best best;
    th_ramp r;
    int count;

    (void)state;
    p = th_track_points(t, &count);
    assert_true(count > TH_TRACK_POINTS && p[0].length == 0.5 && p[count - 1].length == 9);
    for (int i = 0; i < count; i++) {
        int unstable = 0, wanted = 0;

        assert_true(i == 0 || p[i].length > p[i - 1].length);
        assert_int_equal(p[i].state, TH_POINT_OK);
        for (int k = 0; k < p[i].count; k++) {
            unstable += p[i].mode[k].omega_re == 0 ? 1 : 2;
            assert_true(k == 0 || p[i].mode[k].omega_im <= p[i].mode[k - 1].omega_im);
        }
        while (switch_on(wanted) < p[i].length)
            wanted++;
        assert_int_equal(p[i].unstable, wanted);
        assert_int_equal(unstable, wanted);
    }
    assert_int_equal(th_track_branches(t), 2);
    r = ramp_of(t, 100);
    assert_int_equal(r.count, 2);
    for (int j = 0; j < 2; j++) {
        close_to("birth", gain_of(&r, j)->from, switch_on(2 * j), 1e-4 * line);
        assert_true(gain_of(&r, j)->to == 9);
    }
    assert_true(r.gain[0].gain >= r.gain[1].gain && r.best >= r.gain[0].gain);
    assert_true(r.best <= r.gain[0].gain + r.gain[1].gain);
    close_to("unanswered", r.unanswered, 0, 1e-12);
    assert_true(r.worst > 0 && r.worst_length > switch_on(2) - line * 1e-4);
    assert_int_equal(th_track_best_find(t, &best, NULL), TH_OK);
    assert_int_equal(best.clean_count, 1);
    close_to("clean from", best.clean[0].from, switch_on(0), 1e-4 * line);
    close_to("clean to", best.clean[0].to, switch_on(2), 1e-4 * line);
    assert_false(best.clean[0].open_below || best.clean[0].open_above || best.at_end);
    assert_true(best.grows && best.length > best.clean[0].from && best.length < best.clean[0].to);
    close_to("fastest of the stretch", best.clean[0].fastest, best.length, 2 * line / 256);
    assert_true(best.clean[0].growth <= best.omega_im);
    th_track_best_clear(&best);
    th_ramp_clear(&r);
    th_track_destroy(t);
}

/* Nine samples become as many as the header says: each growth rate on the straight line between its
 * neighbours to 2e-3 of the largest, or intervals below 2e-3 of the line; the uneven line has the
 * same branches, and within its error bars the same gains, as a fine one. */
static void test_coarse(void **state)
{
    const double from = 0.5, to = 12, line = to - from;
    th_flow_setup s = step();
    th_track *t = track_of(&s, from, to, 9, 1), *fine = track_of(&s, from, to, 2049, 1);
    const th_track_point *p;
    th_ramp r = ramp_of(t, 100), wanted = ramp_of(fine, 100);
    double scale = 0;
    int count;

    (void)state;
    p = th_track_points(t, &count);
    assert_true(count > 50);
    for (int i = 0; i < count; i++)
        scale = fmax(scale, p[i].count > 0 ? p[i].mode[0].omega_im : 0);
    for (int i = 1; i + 1 < count; i++) {
        const double left = p[i].length - p[i - 1].length, right = p[i + 1].length - p[i].length;

        if (p[i - 1].unstable != p[i].unstable || p[i + 1].unstable != p[i].unstable ||
            fmax(left, right) <= 2e-3 * line)
            continue;
        for (int k = 0; k < p[i].count; k++)
            close_to("growth", p[i].mode[k].omega_im,
                     (right * p[i - 1].mode[k].omega_im + left * p[i + 1].mode[k].omega_im) /
                         (left + right),
                     2e-3 * scale);
    }
    assert_true(r.count == 3 && wanted.count == 3);
    for (int j = 0; j < 3; j++) {
        const th_track_gain *g = gain_of(&r, j), *w = gain_of(&wanted, j);

        close_to("birth", g->from, switch_on(2 * j), 1e-4 * line);
        close_to("gain", g->gain, w->gain, g->error + w->error);
        assert_true(g->to == to && g->error < 5e-3 * g->gain);
    }
    th_ramp_clear(&r);
    th_ramp_clear(&wanted);
    th_track_destroy(t);
    th_track_destroy(fine);
}

/* Growth rates of the fastest mode at many even lengths, by th_point_answer alone. */
static void dense(const th_flow_setup *s, double from, double to, int count, double *growth)
{
    th_point point[2] = {{0}, {0}};

    for (int i = 0; i < count; i++) {
        const th_point *previous[2] = {i > 0 ? &point[(i + 1) % 2] : NULL, NULL};
        th_point *p = &point[i % 2];
        th_flow_setup at = *s;

        at.value[th_shape_length(s->shape)] = from + (to - from) * i / (count - 1);
        assert_int_equal(th_point_answer(&at, 1e-9, previous, p, NULL), TH_OK);
        assert_int_equal(p->state, TH_POINT_OK);
        growth[i] = p->unstable > 0 ? p->mode[0].omega_im : 0;
    }
    th_point_clear(&point[0]);
    th_point_clear(&point[1]);
}

/* One branch, through its merger at L_1: gain against a trapezoid of ten times the first points. At
 * a square root k sqrt(d), here k = 0.11, that is off by 0.21 k h^1.5 at most: 2e-5 in the end. The
 * maximum against the parabola through the best three. */
static void test_gain(void **state)
{
    enum { COUNT = 2561 };
    static double growth[COUNT];
    const double from = 1.3, to = 5.4, step_length = (to - from) / (COUNT - 1);
    th_flow_setup s = step();
    th_track *t = track_of(&s, from, to, 0, 1);
    th_ramp r = ramp_of(t, 60), twice = ramp_of(t, 120);
    th_track_best best;
    double sum = 0, top;
    int most = 1;

    (void)state;
    dense(&s, from, to, COUNT, growth);
    for (int i = 0; i < COUNT; i++) {
        sum += growth[i] * (i == 0 || i == COUNT - 1 ? 0.5 : 1);
        most = growth[i] > growth[most] ? i : most;
    }
    sum *= 60.0 / (COUNT - 1);
    assert_int_equal(r.count, 1);
    close_to("gain", r.gain[0].gain, sum, r.gain[0].error + 2e-5);
    assert_true(r.gain[0].error < 2e-3 * sum);
    close_to("best", r.best, sum, r.best_error + 2e-5);
    close_to("twice the time", twice.gain[0].gain / r.gain[0].gain, 2, 1e-12);
    assert_int_equal(th_track_best_find(t, &best, NULL), TH_OK);
    top =
        from + step_length * (most + 0.5 * (growth[most - 1] - growth[most + 1]) /
                                         (growth[most - 1] - 2 * growth[most] + growth[most + 1]));
    close_to("best length", best.length, top, best.error + 1e-3 * step_length);
    assert_true(best.error <= 2e-4 * (to - from));
    close_to("its growth", best.omega_im / growth[most], 1, 1e-5);
    close_to("dominant", r.dominant, best.length, (to - from) / 256);
    th_track_best_clear(&best);
    th_ramp_clear(&r);
    th_ramp_clear(&twice);
    th_track_destroy(t);
}

/* The same bits whatever the threads: points, modes, branches, what is made of them. */
static void test_threads(void **state)
{
    th_flow_setup s = tanh_pocket();
    th_track *t[2] = {track_of(&s, 1, 6, 33, 1), track_of(&s, 1, 6, 33, 3)};
    const th_track_point *p[2];
    th_track_best best[2];
    th_ramp r[2];
    int count[2];

    (void)state;
    for (int i = 0; i < 2; i++) {
        p[i] = th_track_points(t[i], &count[i]);
        r[i] = ramp_of(t[i], 70);
        assert_int_equal(th_track_best_find(t[i], &best[i], NULL), TH_OK);
    }
    assert_int_equal(count[0], count[1]);
    for (int i = 0; i < count[0]; i++) {
        assert_true(p[0][i].length == p[1][i].length && p[0][i].count == p[1][i].count);
        assert_true(p[0][i].state == p[1][i].state && p[0][i].unstable == p[1][i].unstable);
        for (int k = 0; k < p[0][i].count; k++) {
            assert_int_equal(p[0][i].mode[k].branch, p[1][i].mode[k].branch);
            assert_memory_equal(&p[0][i].mode[k].omega_re, &p[1][i].mode[k].omega_re,
                                3 * sizeof(double));
        }
    }
    assert_true(r[0].count == 2 && r[1].count == 2);
    for (int k = 0; k < 2; k++) {
        assert_int_equal(r[0].gain[k].branch, r[1].gain[k].branch);
        assert_memory_equal(&r[0].gain[k].gain, &r[1].gain[k].gain, 7 * sizeof(double));
    }
    assert_true(r[0].best == r[1].best && r[0].worst == r[1].worst);
    assert_true(best[0].length == best[1].length && best[0].omega_im == best[1].omega_im);
    for (int i = 0; i < 2; i++) {
        th_track_best_clear(&best[i]);
        th_ramp_clear(&r[i]);
        th_track_destroy(t[i]);
    }
}

/* Nothing grows below the first switch-on; the end of a range is called one. */
static void test_edges(void **state)
{
    th_flow_setup s = step();
    th_track *t = track_of(&s, 0.2, 1, 9, 1);
    th_track_best best;
    th_ramp r = ramp_of(t, 10);

    (void)state;
    assert_int_equal(th_track_branches(t), 0);
    assert_true(r.count == 0 && r.best == 0 && r.unanswered < 1e-12);
    assert_int_equal(th_track_best_find(t, &best, NULL), TH_OK);
    assert_true(!best.grows && best.clean_count == 0);
    th_track_best_clear(&best);
    th_ramp_clear(&r);
    th_track_destroy(t);
    t = track_of(&s, 1.2, 1.5, 9, 1); /* growth still rises */
    assert_int_equal(th_track_best_find(t, &best, NULL), TH_OK);
    assert_true(best.grows && best.at_end);
    close_to("best at the end", best.length, 1.5, 1e-4);
    assert_true(best.clean_count == 1 && best.clean[0].open_below && best.clean[0].open_above);
    th_track_best_clear(&best);
    th_track_destroy(t);
}

/* A step pocket that exists for lengths within bounds only. */
static double least, most;

static th_status build_picky(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    const double gap = setup->value[th_shape_length(setup->shape)];

    if (!(gap >= least && gap <= most))
        return th_fail_key(err, TH_EINVAL, "gap", "picky: gap = %g", gap);
    return th_shape_find("step")->build(setup, out, err);
}

/* Lengths without a flow are failed points, the others stand. */
static void test_failed(void **state)
{
    th_flow_setup s = step();
    th_shape picky = *s.shape;
    const th_track_options options = {.key = th_shape_length(s.shape),
                                      .from = 1.5,
                                      .to = 2.5,
                                      .points = 41,
                                      .accuracy = 1e-9,
                                      .threads = 1};
    const th_track_point *p;
    th_track *t = NULL;
    int count;
    th_error err = {0};
    th_ramp whole, part;

    (void)state;
    picky.build = build_picky;
    s.shape = &picky;
    least = 0;
    most = 100;
    assert_int_equal(th_track_create(&s, &options, &t, &err), TH_OK);
    whole = ramp_of(t, 10);
    th_track_destroy(t);
    least = 1.69;
    most = 2.31;
    assert_int_equal(th_track_create(&s, &options, &t, &err), TH_OK);
    p = th_track_points(t, &count);
    for (int i = 0; i < count; i++) {
        const bool exists = p[i].length >= least && p[i].length <= most;

        assert_int_equal(p[i].state, exists ? TH_POINT_OK : TH_POINT_FAILED);
        assert_int_equal(p[i].count, exists ? 1 : 0);
        assert_int_equal(p[i].unstable, exists ? 1 : 0);
    }
    part = ramp_of(t, 10);
    close_to("unanswered", part.unanswered, 1 - 0.6, 1e-12); /* 1.7 to 2.3 */
    assert_true(part.best > 0.5 * whole.best && part.best < 0.7 * whole.best);
    assert_true(part.gain[0].from > 1.699 && part.gain[0].to < 2.301);
    th_ramp_clear(&whole);
    th_ramp_clear(&part);
    th_track_destroy(t);
    least = 50;
    assert_int_equal(th_track_create(&s, &options, &t, &err), TH_ENONE);
    assert_non_null(strstr(err.text, "no length has an answer"));
    assert_non_null(strstr(err.text, "picky: gap = 1.5"));
}

/* A flow for some six hundredths of the line: the modes still make one branch. */
static void test_narrow(void **state)
{
    th_flow_setup s = step();
    th_shape picky = *s.shape;
    th_track *t;
    th_ramp r;

    (void)state;
    picky.build = build_picky;
    s.shape = &picky;
    least = 1.85;
    most = 1.92;
    t = track_of(&s, 1.5, 2.5, 101, 1);
    assert_int_equal(th_track_branches(t), 1);
    r = ramp_of(t, 10);
    assert_true(r.count == 1 && r.gain[0].from >= least && r.gain[0].to <= most);
    close_to("gain", r.gain[0].gain, r.best, 1e-12);
    th_ramp_clear(&r);
    th_track_destroy(t);
}

/* A sample on a switch-on to the last bit is undecided; the change is found beside it all the same.
 */
static void test_on_switch(void **state)
{
    const double birth = switch_on(2), line = 2;
    th_flow_setup s = step();
    th_track *t = track_of(&s, birth - 1, birth + 1, 65, 1);
    const th_track_point *p;
    th_track_best best;
    th_ramp r = ramp_of(t, 100);
    int count, at = 0;

    (void)state;
    p = th_track_points(t, &count);
    while (at < count && p[at].state == TH_POINT_OK)
        at++;
    assert_true(at > 0 && at + 1 < count && p[at].count == 0);
    close_to("undecided", p[at].length, birth, 1e-12);
    assert_true(p[at + 1].length - p[at - 1].length <= 2e-4 * line);
    close_to("birth", gain_of(&r, 1)->from, birth, 1e-4 * line);
    assert_int_equal(th_track_best_find(t, &best, NULL), TH_OK);
    assert_true(best.clean_count == 1 && best.clean[0].open_below && !best.clean[0].open_above);
    close_to("clean to", best.clean[0].to, birth, 1e-4 * line);
    th_track_best_clear(&best);
    th_ramp_clear(&r);
    th_track_destroy(t);
}

/* How fast modes mix at a merger depends on the speed of the ramp, not on how finely the line, here
 * one of 3.5 and one of 0.5, resolves the square root (a tenth: the slope is taken over whole
 * intervals). */
static void test_worst(void **state)
{
    const double merger = switch_on(3), speed = 0.03;
    th_flow_setup s = step();
    double worst[2];

    (void)state;
    for (int i = 0; i < 2; i++) {
        const double from = merger - (i == 0 ? 2 : 0.27), to = merger + (i == 0 ? 1.5 : 0.24);
        th_track *t = track_of(&s, from, to, 0, 1);
        th_ramp r = ramp_of(t, (to - from) / speed);

        worst[i] = r.worst;
        close_to("where", r.worst_length, merger, 0.2);
        th_ramp_clear(&r);
        th_track_destroy(t);
    }
    assert_true(worst[0] > 0);
    close_to("worst", worst[1] / worst[0], 1, 0.1);
}

/* A ring on which an oscillating pair dies as it collides with one of opposite energy. There the
 * square of the difference of both frequencies, and so (Im omega)^2, is analytic in the length and
 * passes zero: three samples farther off say where. The first point against th_point_answer. */
static void test_ring(void **state)
{
    const double from = 9.70, to = 9.73, line = to - from;
    th_flow_setup s =
        setup_of("tanh", ring(50, 8), (const double[]){0, 1.4, 0.6, 1.4, 0.5, 0.5, 10});
    th_track *t = track_of(&s, from, to, 5, 2);
    const th_point *none[2] = {NULL, NULL};
    th_point point = {0};
    const th_track_point *p;
    const th_track_gain *dies;
    th_ramp r = ramp_of(t, 10);
    double x[3], square[3], zero, slope, bend;
    int count, samples = 0, after = 0, last = -1;

    (void)state;
    p = th_track_points(t, &count);
    assert_int_equal(th_track_branches(t), 3);
    dies = gain_of(&r, 2); /* the slowest at the short end */
    for (int i = 0; i < count; i++) {
        assert_int_equal(p[i].state, TH_POINT_OK);
        assert_int_equal(p[i].count, p[i].length <= dies->to ? 3 : 2);
        assert_int_equal(p[i].unstable, p[i].length <= dies->to ? 5 : 3);
        after += p[i].length > dies->to;
        if (p[i].length <= dies->to)
            last = i;
        if (samples < 3 && p[i].length <= from + 0.51 * line) { /* 9.7, 9.7075, 9.715 */
            x[samples] = p[i].length;
            square[samples] = p[i].mode[2].omega_im * p[i].mode[2].omega_im;
            samples++;
        }
    }
    assert_true(samples == 3 && after > 0 && dies->from == from);
    assert_true(p[last].length == dies->to && p[last + 1].length - dies->to <= 1e-3 * line);
    close_to("spacing", x[2] - x[1], x[1] - x[0], 1e-12);
    slope = (square[2] - square[1]) / (x[2] - x[1]);
    bend = (square[2] - 2 * square[1] + square[0]) / (x[2] - x[1]) / (x[2] - x[1]);
    zero = x[2];
    for (int i = 0; i < 20; i++) /* of the parabola: contracts by bend/slope times 2e-3 */
        zero = x[2] - (square[2] + 0.5 * bend * (zero - x[2]) * (zero - x[1])) / slope;
    close_to("collision", 0.5 * (dies->to + p[last + 1].length), zero, 2e-3 * line);
    s.value[th_shape_length(s.shape)] = from;
    assert_int_equal(th_point_answer(&s, 1e-9, none, &point, NULL), TH_OK);
    assert_int_equal(point.unstable, p[0].unstable);
    close_to("fastest", p[0].mode[0].omega_im, point.mode[0].omega_im, 1e-12);
    th_point_clear(&point);
    th_ramp_clear(&r);
    th_track_destroy(t);
}

static void test_errors(void **state)
{
    th_flow_setup s = step();
    const th_track_options good = {.key = th_shape_length(s.shape),
                                   .from = 1,
                                   .to = 2,
                                   .points = 3,
                                   .accuracy = 1e-9,
                                   .threads = 1};
    th_track_options bad[7];
    th_track *t = NULL;
    th_ramp r;

    (void)state;
    for (int i = 0; i < 7; i++)
        bad[i] = good;
    bad[0].key = -1;
    bad[1].key = s.shape->keys;
    bad[2].from = 0;
    bad[3].to = 1;
    bad[4].to = HUGE_VAL;
    bad[5].points = 2;
    bad[6].threads = 0;
    for (int i = 0; i < 7; i++)
        assert_int_equal(th_track_create(&s, &bad[i], &t, NULL), TH_EINVAL);
    assert_int_equal(th_track_create(NULL, &good, &t, NULL), TH_EINVAL);
    assert_int_equal(th_track_create(&s, NULL, &t, NULL), TH_EINVAL);
    assert_int_equal(th_track_create(&s, &good, NULL, NULL), TH_EINVAL);
    assert_int_equal(th_track_create(&s, &good, &t, NULL), TH_OK);
    assert_int_equal(th_track_ramp(t, 1, NULL, NULL), TH_EINVAL);
    assert_int_equal(th_track_ramp(t, 0, &r, NULL), TH_EINVAL);
    assert_int_equal(th_track_ramp(t, NAN, &r, NULL), TH_EINVAL);
    assert_int_equal(th_track_best_find(t, NULL, NULL), TH_EINVAL);
    th_track_destroy(t);
    th_track_destroy(NULL);
}

static void test_memory(void **state)
{
    th_flow_setup s = step();
    const th_track_options options = {.key = th_shape_length(s.shape),
                                      .from = 1.3,
                                      .to = 1.7,
                                      .points = 3,
                                      .accuracy = 1e-9,
                                      .threads = 1};
    long k;

    (void)state;
    for (k = 0;; k++) {
        th_track *t = NULL;
        th_track_best best = {0};
        th_ramp r = {0};
        th_status st;

        refuse_from(k);
        st = th_track_create(&s, &options, &t, NULL);
        if (st == TH_OK)
            st = th_track_ramp(t, 10, &r, NULL);
        if (st == TH_OK)
            st = th_track_best_find(t, &best, NULL);
        th_track_best_clear(&best);
        th_ramp_clear(&r);
        th_track_destroy(t);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
    }
    assert_true(k > 20);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_step),   cmocka_unit_test(test_coarse),
        cmocka_unit_test(test_gain),   cmocka_unit_test(test_threads),
        cmocka_unit_test(test_edges),  cmocka_unit_test(test_failed),
        cmocka_unit_test(test_narrow), cmocka_unit_test(test_on_switch),
        cmocka_unit_test(test_worst),  cmocka_unit_test(test_ring),
        cmocka_unit_test(test_errors), cmocka_unit_test(test_memory),
    };

    openblas_set_num_threads(1);
    return cmocka_run_group_tests(tests, NULL, NULL);
}
