/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of the switch-on lengths: closed forms of steps, wells, sech pockets and barriers; the
 * census on both sides of those of a smooth pocket; th_solve on both sides of those of a ring and
 * of walls; maps. Random cases have fixed seeds. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "flows.h"
#include "onset/root.h"
#include "refuse.h"
#include "twinhorizon/census.h"
#include "twinhorizon/index.h"
#include "twinhorizon/modes.h"
#include "twinhorizon/onset.h"

void openblas_set_num_threads(int threads);

/* value[] in the order of the shape's keys */
static th_flow_setup setup_of(const char *shape, th_ends ends, const double *value)
{
    th_flow_setup s = {.shape = th_shape_find(shape), .density = 1.7, .ends = ends};

    assert_non_null(s.shape);
    for (int i = 0; i < s.shape->keys; i++) {
        s.value[i] = value[i];
        s.given[i] = ends.kind != TH_ENDS_RING || !s.shape->key[i].fixed_by_ring;
    }
    return s;
}

static th_onset_list find(const th_flow_setup *setup, th_onset_options options)
{
    th_onset_list list = {0};
    th_error err = {0};

    if (th_onset_find(setup, &options, &list, &err) != TH_OK)
        fail_msg("%s", err.text);
    return list;
}

/* Row i of an open flow: order j, length `want`, and the error bar holds. The closed form itself is
 * rounded to 1e-15 of its terms. */
static void check_row(const th_onset_list *list, int i, int j, double want)
{
    const th_onset *o = &list->onset[i];
    char what[64];

    assert_true(i < list->count);
    (void)snprintf(what, sizeof what, "order %d", j);
    assert_int_equal(o->order, j);
    close_to(what, o->gap, want, 1e-12 * fmax(1, want));
    close_to("beyond the error bar", o->gap, want, o->gap_error + 4e-15 * (1 + want));
    assert_true(o->gap_error > 0 && o->gap_error < 1e-11 * fmax(1, want));
    assert_int_equal(o->kind, j % 2 == 0 ? TH_ONSET_GROWING : TH_ONSET_PAIR);
    assert_int_equal(o->change, 1);
    assert_true(o->omega_re == 0);
}

/* ---- the search ------------------------------------------------------------------------------ */

static double kink(double t)
{
    return t < 0 ? 0.1 * t : 10 * t;
}

static double cliff(double t)
{
    return atan(1e6 * t) + 1e-3 * t;
}

static double rise(double t)
{
    return expm1(40 * t);
}

static double flat(double t)
{
    return pow(t, 9);
}

/* Functions on which secants leave the bracket or, on the flat one, crawl: found within the rounds
 * that open.c allows, flat by its bracket alone since no slope at its root tells a step. */
static void test_root(void **state)
{
    double (*const f[5])(double) = {kink, cliff, rise, cbrt, flat};

    (void)state;
    for (int i = 0; i < 5; i++)
        for (double at = 0.1; at < 0.95; at += 0.2) {
            th_root root = {
                .low = 0, .high = 1, .slope = f[i](1 - at) - f[i](-at), .noise = 1e-200};
            double x = 0.5;
            int rounds = 0;

            do {
                const double next = th_root_next(&root, x, f[i](x - at));

                assert_true(root.low <= at && at <= root.high);
                assert_true(next >= root.low && next <= root.high);
                x = next;
                rounds++;
            } while (root.high - root.low > 1e-11 && (f[i] == flat || fabs(root.step) > 1e-12));
            assert_true(rounds < 120);
            if (f[i] != flat) /* a last step by a slope that is ten times off */
                close_to("root", root.x - root.step, at, 2e-11);
        }
}

/* ---- closed forms ---------------------------------------------------------------------------- */

/* L_j = [atan(k_u/k_0) + atan(k_d/k_0) + j pi]/k_0 (static linearised equation; set-up of
 * "Saturation of black hole lasers in Bose-Einstein condensates", Phys. Rev. D 88, 125012 (2013)).
 */
static double step_length(const double *value, int j)
{
    const double v = value[0], k_0 = 2 * sqrt((v - value[2]) * (v + value[2]));
    const double k_u = 2 * sqrt((value[1] - v) * (value[1] + v));
    const double k_d = 2 * sqrt((value[3] - v) * (value[3] + v));

    return (atan(k_u / k_0) + atan(k_d / k_0) + j * pi) / k_0;
}

static void test_step(void **state)
{
    static const double known[4] = {1.1146026466253018, 3.3997750494494936, 5.6849474522736854,
                                    7.9701198550978772}; /* 50 digits of the formula, rounded */
    const double value[5] = {0.75, 1, 0.3, 1, 6};
    th_flow_setup setup = setup_of("step", open_ends(), value);
    th_onset_list list = find(&setup, (th_onset_options){.upto = 9, .threads = 1});

    (void)state;
    assert_int_equal(list.count, 4);
    assert_int_equal(list.before, 0);
    assert_true(list.complete && list.to == 9 && list.from > 0 && list.from < 1e-6);
    for (int j = 0; j < 4; j++)
        check_row(&list, j, j, known[j]);
    th_onset_clear(&list);
    assert_null(list.onset);
    /* the first two only; and a search that ends just below and just above a length */
    list = find(&setup, (th_onset_options){.upto = 9, .orders = 2, .threads = 1});
    assert_int_equal(list.count, 2);
    assert_false(list.complete);
    check_row(&list, 1, 1, known[1]);
    th_onset_clear(&list);
    /* however far it goes, the first ones are not passed over */
    list = find(&setup, (th_onset_options){.upto = 5e5, .orders = 4, .threads = 1});
    for (int j = 0; j < 4; j++)
        check_row(&list, j, j, known[j]);
    th_onset_clear(&list);
    list = find(&setup, (th_onset_options){.upto = known[3] - 1e-11, .threads = 1});
    assert_int_equal(list.count, 3);
    th_onset_clear(&list);
    list = find(&setup, (th_onset_options){.upto = known[3] + 1e-11, .threads = 1});
    assert_int_equal(list.count, 4);
    assert_true(list.complete);
    th_onset_clear(&list);
}

static void test_random_steps(void **state)
{
    uint64_t seed = 11;

    (void)state;
    for (int trial = 0; trial < 300; trial++) {
        const double v = draw(&seed, 0.3, 3);
        const double value[5] = {v, v * draw(&seed, 1.001, 4), v * draw(&seed, 0.01, 0.99),
                                 v * draw(&seed, 1.001, 4), 1};
        const double upto = step_length(value, 0) * draw(&seed, 0.5, 40);
        const th_flow_setup setup = setup_of("step", open_ends(), value);
        th_onset_list list = find(&setup, (th_onset_options){.upto = upto, .threads = 1});
        int count = 0;

        for (; step_length(value, count) < upto; count++)
            check_row(&list, count, count, step_length(value, count));
        assert_int_equal(list.count, count);
        th_onset_clear(&list);
    }
}

/* Well: gap = j pi/(2 sqrt(1/m^2 - m^2)), j = 1, 2, ..., is where the number of growing modes goes
 * from 1 + j to 2 + j: eta is a sine of wave number 2 sqrt(1/m^2 - m^2) on the plateau with zeros
 * at both its ends, where n'/n, the zero mode of each half soliton, vanishes. j = 0 is the whole
 * soliton at gap 0, so that two modes grow from the start. */
static void test_well(void **state)
{
    uint64_t seed = 12;

    (void)state;
    for (int trial = 0; trial < 30; trial++) {
        const double m = draw(&seed, 0.15, 0.95), turn = pi / (2 * sqrt(1 / (m * m) - m * m));
        const double value[3] = {1, m, 1};
        const th_flow_setup setup = setup_of("well", open_ends(), value);
        th_onset_list list = find(&setup, (th_onset_options){.upto = 5.5 * turn, .threads = 1});

        assert_int_equal(list.before, 2);
        assert_int_equal(list.count, 5);
        for (int j = 1; j <= 5; j++)
            check_row(&list, j - 1, j + 1, j * turn);
        th_onset_clear(&list);
    }
}

/* Sech: the length is the width. K = -d^2/dx^2 + K0^2 - 4 D sech^2(x/s) (Poeschl-Teller) has an
 * eigenvalue zero at
 * s_j = [(2j+1) K0 + sqrt((2j+1)^2 K0^2 + 4 (4 D - K0^2)(j^2 + j))]/[2 (4 D - K0^2)],
 * K0 = 2 sqrt(c_u^2 - v^2). */
static void test_sech(void **state)
{
    uint64_t seed = 13;

    (void)state;
    for (int trial = 0; trial < 12; trial++) {
        const double v = draw(&seed, 0.5, 2), c_u = v * draw(&seed, 1.05, 2);
        const double c_p = v * draw(&seed, 0.1, 0.9), depth = c_u * c_u - c_p * c_p;
        const double k = 2 * sqrt(c_u * c_u - v * v), d = 4 * depth - k * k;
        const double value[4] = {v, c_u, depth, 1};
        const th_flow_setup setup = setup_of("sech", open_ends(), value);
        double at[5];
        th_onset_list list;

        for (int j = 0; j < 5; j++) {
            const int odd = 2 * j + 1;

            at[j] = (odd * k + sqrt(odd * odd * k * k + 4 * d * (j * j + j))) / (2 * d);
        }
        list = find(&setup, (th_onset_options){.upto = (at[3] + at[4]) / 2, .threads = 1});
        assert_int_equal(list.count, 4);
        for (int j = 0; j < 4; j++)
            check_row(&list, j, j, at[j]);
        th_onset_clear(&list);
    }
}

/* Barriers: gap = [atan(Z/p) + j pi/2]/p, p = sqrt(v_d^2 - c_d^2), strength of the barriers
 * Z = C^3 T0 (1 - T0^2)/(2 n_d), C^2 = 1 - m^2, C T0 = sqrt(n_d - m^2), n_d = v_d^-1 m the density
 * between them: the solution outside has eta'/eta = 2 Z there (linearised soliton). */
static void test_barriers(void **state)
{
    uint64_t seed = 14;

    (void)state;
    for (int trial = 0; trial < 20; trial++) {
        const double m = draw(&seed, 0.15, 0.9), n_d = m * m / 4 * (1 + sqrt(1 + 8 / (m * m)));
        const double c = sqrt(1 - m * m), t0 = sqrt(n_d - m * m) / c;
        const double z = c * c * c * t0 * (1 - t0 * t0) / (2 * n_d);
        const double p = sqrt(m * m / (n_d * n_d) - n_d);
        const double value[3] = {1, m, 1};
        const th_flow_setup setup = setup_of("barriers", open_ends(), value);
        th_onset_list list =
            find(&setup, (th_onset_options){.upto = (atan(z / p) + 2.2 * pi) / p, .threads = 1});

        assert_int_equal(list.count, 5);
        for (int j = 0; j < 5; j++)
            check_row(&list, j, j, (atan(z / p) + j * pi / 2) / p);
        th_onset_clear(&list);
    }
}

/* ---- against other computations -------------------------------------------------------------- */

/* Growing modes by the argument principle, which knows nothing of K. */
static int census_at(th_flow_setup setup, double gap)
{
    th_flow *flow = NULL;
    th_matching *matching = NULL;
    th_census census = {0};
    th_error err = {0};

    setup.value[th_shape_length(setup.shape)] = gap;
    if (th_flow_build(&setup, &flow, &err) != TH_OK ||
        th_matching_create(flow, th_flow_band_limit(flow), TH_MATCHING_USUAL, &matching, &err) !=
            TH_OK ||
        th_census_count(flow, matching, th_flow_band_limit(flow), &census, &err) != TH_OK)
        fail_msg("gap %.15g: %s", gap, err.text);
    th_matching_destroy(matching);
    th_flow_destroy(flow);
    assert_int_equal(census.slow, 0);
    return census.growing;
}

static void test_smooth(void **state)
{
    const double value[7] = {1, 1.35, 0.55, 1.45, 0.5, 0.7, 1};
    const th_flow_setup setup = setup_of("tanh", open_ends(), value);
    th_onset_list list = find(&setup, (th_onset_options){.upto = 8, .threads = 1});

    (void)state;
    assert_int_equal(list.count, 4);
    for (int j = 0; j < list.count; j++) {
        assert_int_equal(census_at(setup, list.onset[j].gap - 0.03), j);
        assert_int_equal(census_at(setup, list.onset[j].gap + 0.03), j + 1);
    }
    th_onset_clear(&list);
}

static th_solution *solve_at(th_flow_setup setup, double gap)
{
    const th_solve_options options = {.accuracy = 1e-9};
    th_solution *s = NULL;
    th_flow *flow = NULL;
    th_error err = {0};

    setup.value[th_shape_length(setup.shape)] = gap;
    if (th_flow_build(&setup, &flow, &err) != TH_OK || th_solve(flow, &options, &s, &err) != TH_OK)
        fail_msg("gap %.15g: %s", gap, err.text);
    th_flow_destroy(flow);
    assert_int_not_equal(s->verdict, TH_VERDICT_UNDECIDED);
    return s;
}

/* th_solve 1e-6 on either side (1e-4 for purely growing modes, which are slow there and which the
 * census then cannot tell from zero): the number of growing modes changes as the row says, and on
 * the side with more of them the one that came is slow and has the row's frequency: near a
 * collision the growth rate is the square root of the distance. */
static void check_collision(th_flow_setup setup, const th_onset *o)
{
    const double off = o->kind == TH_ONSET_PAIR ? 1e-6 : 1e-4;
    th_solution *low = solve_at(setup, o->gap - off), *high = solve_at(setup, o->gap + off);
    const th_solution *more = o->change > 0 ? high : low;
    const th_mode *slowest = NULL;

    assert_int_equal(high->unstable - low->unstable, o->change);
    assert_int_equal(abs(o->change), o->kind == TH_ONSET_PAIR ? 2 : 1);
    for (int i = 0; i < more->count; i++)
        if (more->mode[i].label == TH_LABEL_UNSTABLE)
            slowest = &more->mode[i];
    assert_non_null(slowest);
    assert_true(slowest->omega_im < 3e-3);
    close_to("frequency", slowest->omega_re, o->omega_re, 1e-5);
    assert_true((o->omega_re == 0) == (o->kind == TH_ONSET_GROWING));
    th_solution_destroy(low);
    th_solution_destroy(high);
}

/* Ring of circumference 50, winding 8, c = 1.4 and 0.6, tanh widths 0.5: gap 9 is stable, at gap 10
 * a purely growing mode and a pair grow (values of the same flow in tests/test_modes.c). Between
 * the samples 6 and 6.5 one pair dies and another is born, four changes lie between 9 and 9.5 or
 * 9.5 and 10. */
static void test_ring(void **state)
{
    const double value[7] = {1, 1.4, 0.6, 1.4, 0.5, 0.5, 10};
    const th_flow_setup setup = setup_of("tanh", ring(50, 8), value);
    th_onset_list list = find(&setup, (th_onset_options){.upto = 10, .samples = 20, .threads = 2});
    int modes = 0, checked = 0;

    (void)state;
    assert_int_equal(list.before, 0);
    assert_int_equal(list.count, 16);
    for (int i = 0; i < list.count; i++) {
        const th_onset *o = &list.onset[i];

        assert_int_equal(o->order, i);
        assert_true(i == 0 || o->gap > list.onset[i - 1].gap);
        assert_true(o->gap_error > 0 && o->gap_error < 1e-10);
        if (o->gap > 9 && checked == 0)
            assert_int_equal(modes, 0); /* gap 9 is stable */
        modes += o->change;
        assert_true(modes >= 0);
        if (o->gap > 9) {
            check_collision(setup, o);
            checked++;
        }
    }
    assert_int_equal(checked, 4);
    assert_int_equal(modes, 3);
    th_onset_clear(&list);
}

/* Other samples, same lengths. Two of the unstable stretches, near 1.8 and 4.4, are so short that
 * no sample falls into them: modes of opposite energy have changed places. th_solve confirms the
 * ends of these. */
static void test_samples(void **state)
{
    static const int samples[2] = {4, 14};
    const double value[5] = {1, 1.2, 0.3, 1.2, 1};
    const th_flow_setup setup = setup_of("step", ring(16, 3), value);
    th_onset_list list = find(&setup, (th_onset_options){.upto = 7, .samples = 9, .threads = 2});
    int confirmed = 0;

    (void)state;
    assert_int_equal(list.count, 17);
    for (int k = 0; k < 2; k++) {
        th_onset_list other =
            find(&setup, (th_onset_options){.upto = 7, .samples = samples[k], .threads = 1});

        assert_int_equal(other.count, list.count);
        for (int i = 0; i < list.count; i++) {
            const th_onset *a = &list.onset[i], *b = &other.onset[i];

            close_to("other samples", b->gap, a->gap, a->gap_error + b->gap_error);
            close_to("frequency", b->omega_re, a->omega_re, 1e-9);
            assert_int_equal(b->change, a->change);
        }
        th_onset_clear(&other);
    }
    for (int i = 0; i + 1 < list.count; i++)
        if (list.onset[i].change == 2 && list.onset[i + 1].change == -2 &&
            list.onset[i + 1].gap - list.onset[i].gap < 0.07) {
            check_collision(setup, &list.onset[i]);
            check_collision(setup, &list.onset[i + 1]);
            confirmed++;
        }
    assert_int_equal(confirmed, 2);
    th_onset_clear(&list);
}

static void test_walls(void **state)
{
    const double value[5] = {1, 1.4, 0.6, 1.4, 6};
    const th_flow_setup setup = setup_of("step", walls(8), value);
    th_onset_list list = find(&setup, (th_onset_options){.upto = 4, .samples = 8, .threads = 2});
    int growing = 0, pairs = 0;

    (void)state;
    assert_true(list.count >= 2);
    for (int i = 0; i < list.count; i++) {
        check_collision(setup, &list.onset[i]);
        growing += list.onset[i].kind == TH_ONSET_GROWING;
        pairs += list.onset[i].kind == TH_ONSET_PAIR;
    }
    assert_true(growing > 0 && pairs > 0);
    th_onset_clear(&list);
}

/* A ring on which longer pockets do not fit is searched as far as they do. */
static void test_ring_reach(void **state)
{
    const double value[5] = {1, 1.4, 0.6, 1.4, 1};
    const th_flow_setup setup = setup_of("step", ring(12, 2), value);
    th_onset_list list = find(&setup, (th_onset_options){.upto = 16, .samples = 4, .threads = 1});
    th_onset_options options = {.upto = 60, .samples = 2, .threads = 1};
    th_error err = {0};

    (void)state;
    close_to("to", list.to, 8, 0); /* of 0.25, 4, 8, 12, 16 */
    th_onset_clear(&list);
    assert_int_equal(th_onset_find(&setup, &options, &list, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "circumference"));
    th_onset_clear(&list);
}

/* ---- maps ------------------------------------------------------------------------------------ */

static th_case *read_case(const char *text)
{
    th_case *c = NULL;
    th_error err = {0};

    if (th_case_read_text("map", text, NULL, 0, &c, &err) != TH_OK)
        fail_msg("%s", err.text);
    return c;
}

static const char smooth_map[] =
    "[units]\nsystem = reduced\n[flow]\nshape = tanh\nspeed = 1\n"
    "sound_upstream = 1.5\nsound_pocket = 0.5\nsound_downstream = 1.4\n"
    "width_black = 0.5\nwidth_white = 0.7\ngap = 2\n"
    "[sweep]\nsound_pocket = 0.3, 0.65\ngap = 1, 7, 2\n"
    "speed = 0.6 to 1.5 in 31\n";

enum { MAP_POINTS = 62, MAP_ORDERS = 8 };

typedef struct {
    th_onset row[MAP_POINTS][MAP_ORDERS];
    int count[MAP_POINTS];
    th_status status[MAP_POINTS];
    double value[MAP_POINTS][2];
    long next, stop_at;
} map;

static th_status collect(void *ctx, const th_onset_point *point, th_error *err)
{
    map *m = ctx;
    const long n = point->number;

    assert_int_equal(n, m->next++);
    assert_int_equal(point->points, MAP_POINTS);
    assert_int_equal(point->axes, 2);
    assert_string_equal(point->axis[1]->name, "speed");
    if (n == m->stop_at)
        return th_fail(err, TH_EIO, "enough");
    m->status[n] = point->status;
    memcpy(m->value[n], point->value, sizeof m->value[n]);
    assert_true((point->list != NULL) == (point->status == TH_OK));
    assert_true((point->message[0] == '\0') == (point->status == TH_OK));
    m->count[n] = point->list != NULL ? point->list->count : 0;
    assert_true(m->count[n] <= MAP_ORDERS);
    for (int i = 0; i < m->count[n]; i++)
        m->row[n][i] = point->list->onset[i];
    return TH_OK;
}

/* Every point as it would be alone; the axis over the length only says how far; points without a
 * subsonic end fail and the map goes on; nothing depends on the number of threads. */
static void test_map(void **state)
{
    static const int threads[3] = {1, 2, 7};
    static map m[3];
    th_case *c = read_case(smooth_map);
    int failed = 0;
    long points = 0;

    (void)state;
    close_to("upto", th_onset_upto(c), 7, 0);
    assert_int_equal(th_onset_points(c, &points, NULL), TH_OK);
    assert_int_equal(points, MAP_POINTS);
    memset(m, 0, sizeof m);
    for (int t = 0; t < 3; t++) {
        m[t].stop_at = -1;
        assert_int_equal(
            th_onset_map(c, &(th_onset_options){.threads = threads[t]}, collect, &m[t], NULL),
            TH_OK);
        assert_int_equal(m[t].next, MAP_POINTS);
        assert_memory_equal(&m[t], &m[0], sizeof m[0]);
    }
    for (int n = 0; n < MAP_POINTS; n++) {
        th_flow_setup setup = c->setup;
        th_onset_options options = {.upto = 7, .threads = 1};
        th_onset_list list = {0};
        th_status st;

        close_to("sound_pocket", m[0].value[n][0], n < 31 ? 0.3 : 0.65, 0);
        close_to("speed", m[0].value[n][1], 0.6 + 0.03 * (n % 31), 1e-15);
        setup.value[2] = m[0].value[n][0];
        setup.value[0] = m[0].value[n][1];
        st = th_onset_find(&setup, &options, &list, NULL);
        assert_int_equal(m[0].status[n], st);
        failed += st != TH_OK;
        assert_int_equal(m[0].count[n], list.count);
        for (int i = 0; i < list.count; i++) {
            const th_onset *o = &m[0].row[n][i], *alone = &list.onset[i];

            assert_int_equal(o->order, alone->order);
            close_to("as alone", o->gap, alone->gap, o->gap_error + alone->gap_error);
        }
        th_onset_clear(&list);
    }
    /* speed >= 1.4 is not below the downstream sound speed, and 0.6, 0.63 not above 0.65 */
    assert_int_equal(failed, 2 * 4 + 2);
    th_case_destroy(c);
}

/* A sink that has enough ends the map. */
static void test_map_stops(void **state)
{
    static map m;
    th_case *c = read_case(smooth_map);
    th_onset_options options = {.threads = 3};
    th_error err = {0};

    (void)state;
    m.stop_at = 40;
    assert_int_equal(th_onset_map(c, &options, collect, &m, &err), TH_EIO);
    assert_string_equal(err.text, "enough");
    assert_int_equal(m.next, 41);
    th_case_destroy(c);
}

static th_status one_point(void *ctx, const th_onset_point *point, th_error *err)
{
    (void)err;
    assert_int_equal(point->points, 1);
    assert_int_equal(point->axes, 0);
    *(int *)ctx += 1 + 10 * (point->list != NULL ? point->list->count : 0);
    return TH_OK;
}

/* No axis but the length's: one point. Without any axis the search goes to four times the base. */
static void test_map_of_one(void **state)
{
    static const char text[] = "[units]\nsystem = reduced\n[flow]\nshape = step\nspeed = 0.75\n"
                               "sound_upstream = 1\nsound_pocket = 0.3\nsound_downstream = 1\n"
                               "gap = 1\n";
    const char *override[] = {"sweep.gap = 1 to 6 in 3"};
    th_onset_options options = {.threads = 2};
    th_case *c = read_case(text);
    int seen = 0;

    (void)state;
    close_to("upto", th_onset_upto(c), 4, 0);
    assert_int_equal(th_onset_map(c, &options, one_point, &seen, NULL), TH_OK);
    assert_int_equal(seen, 21); /* L = 1.11, 3.40 */
    th_case_destroy(c);
    assert_int_equal(th_case_read_text("map", text, override, 1, &c, NULL), TH_OK);
    close_to("upto", th_onset_upto(c), 6, 0);
    seen = 0;
    assert_int_equal(th_onset_map(c, &options, one_point, &seen, NULL), TH_OK);
    assert_int_equal(seen, 31); /* and 5.68 */
    th_case_destroy(c);
}

/* ---- errors ---------------------------------------------------------------------------------- */

static void expect(th_flow_setup setup, th_onset_options options, th_status want, const char *word)
{
    th_onset_list list = {0};
    th_error err = {0};

    assert_int_equal(th_onset_find(&setup, &options, &list, &err), want);
    assert_int_equal(err.status, want);
    if (strstr(err.text, word) == NULL)
        fail_msg("'%s' lacks '%s'", err.text, word);
    assert_int_equal(th_onset_find(&setup, &options, &list, NULL), want);
    th_onset_clear(&list);
}

static void test_errors(void **state)
{
    const double value[5] = {0.75, 1, 0.3, 1, 6}, fast[5] = {1.2, 1, 0.3, 1.5, 6};
    const th_flow_setup setup = setup_of("step", open_ends(), value);
    const th_flow_setup supersonic = setup_of("step", open_ends(), fast);
    const th_shape pointlike = {.name = "pointlike", .keys = 1, .key = {{.key = "speed"}}};
    th_flow_setup none = setup, negative = setup;
    th_onset_list list = {0};

    (void)state;
    none.shape = &pointlike;
    negative.value[1] = -1;
    expect(setup, (th_onset_options){.upto = 0, .threads = 1}, TH_EINVAL, "upto");
    expect(setup, (th_onset_options){.upto = NAN, .threads = 1}, TH_EINVAL, "upto");
    expect(setup, (th_onset_options){.upto = HUGE_VAL, .threads = 1}, TH_EINVAL, "upto");
    expect(setup, (th_onset_options){.upto = 1.1e6, .orders = 1, .threads = 1}, TH_EINVAL,
           "the search ends at 1e+06");
    expect(setup, (th_onset_options){.upto = 1e19, .threads = 1}, TH_EINVAL, "healing lengths");
    expect(setup, (th_onset_options){.upto = 5e5, .threads = 1}, TH_EINVAL, "want at most 100000");
    expect(setup, (th_onset_options){.upto = 1, .orders = -1, .threads = 1}, TH_EINVAL, "orders");
    expect(setup, (th_onset_options){.upto = 1, .samples = 1, .threads = 1}, TH_EINVAL, "samples");
    expect(setup, (th_onset_options){.upto = 1, .threads = 0}, TH_EINVAL, "threads");
    expect(none, (th_onset_options){.upto = 1, .threads = 1}, TH_EINVAL, "pointlike");
    expect(negative, (th_onset_options){.upto = 1, .threads = 1}, TH_EINVAL, "sound_upstream");
    expect(supersonic, (th_onset_options){.upto = 1, .threads = 1}, TH_ENONE, "subsonic");
    assert_int_equal(th_onset_find(NULL, NULL, &list, NULL), TH_EINVAL);
    assert_int_equal(th_onset_map(NULL, NULL, NULL, NULL, NULL), TH_EINVAL);
    assert_int_equal(th_onset_points(NULL, NULL, NULL), TH_EINVAL);
    assert_int_equal(th_shape_length(NULL), -1);
    assert_int_equal(th_shape_length(&pointlike), -1);
    assert_string_equal(th_shape_find("sech")->key[th_shape_length(th_shape_find("sech"))].key,
                        "width");
    assert_string_equal(th_shape_find("tanh")->key[th_shape_length(th_shape_find("tanh"))].key,
                        "gap");
    assert_true(th_onset_upto(NULL) == 0);
    assert_string_equal(th_onset_kind_text(TH_ONSET_GROWING), "growing");
    assert_string_equal(th_onset_kind_text(TH_ONSET_PAIR), "pair");
}

/* The k-th allocation fails, for all k until the call has enough. */
static void test_memory(void **state)
{
    static const char text[] = "[units]\nsystem = reduced\n[flow]\nshape = step\nspeed = 0.75\n"
                               "sound_upstream = 1\nsound_pocket = 0.3\nsound_downstream = 1\n"
                               "gap = 1\n";
    const double on_ring[5] = {1, 1.4, 0.6, 1.4, 1};
    const th_flow_setup closed = setup_of("step", ring(12, 2), on_ring);
    th_onset_options options = {.upto = 3, .samples = 2, .threads = 1};
    th_case *c = read_case(text);
    th_status st;
    long k = 0;

    (void)state;
    for (;; k++) {
        th_onset_list list = {0};

        refuse_from(k);
        st = th_onset_find(&c->setup, &(th_onset_options){.upto = 24, .threads = 1}, &list, NULL);
        th_onset_clear(&list);
        if (refuse_stop())
            break;
        assert_int_equal(st, TH_ENOMEM);
    }
    assert_int_equal(st, TH_OK);
    assert_true(k > 10);
    for (k = 0;; k += 1 + k / 20) { /* a ring allocates too often to try every one */
        th_onset_list list = {0};

        refuse_from(k);
        st = th_onset_find(&closed, &options, &list, NULL);
        th_onset_clear(&list);
        if (refuse_stop())
            break;
        assert_int_equal(st, TH_ENOMEM);
    }
    assert_int_equal(st, TH_OK);
    th_case_destroy(c);
}

static th_status count_points(void *ctx, const th_onset_point *point, th_error *err)
{
    (void)err;
    assert_non_null(point->list);
    ++*(int *)ctx;
    return TH_OK;
}

static void test_map_memory(void **state)
{
    static const char text[] = "[units]\nsystem = reduced\n[flow]\nshape = step\nspeed = 0.75\n"
                               "sound_upstream = 1\nsound_pocket = 0.3\nsound_downstream = 1\n"
                               "gap = 1\n[sweep]\nspeed = 0.7 to 0.8 in 3\ngap = 1, 24\n";
    const th_onset_options options = {.threads = 1};
    th_case *c = read_case(text);

    (void)state;
    for (long k = 0;; k++) {
        int seen = 0;
        th_status st;

        refuse_from(k);
        st = th_onset_map(c, &options, count_points, &seen, NULL);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            assert_int_equal(seen, 3);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_int_equal(seen, 0);
    }
    th_case_destroy(c);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_root),         cmocka_unit_test(test_step),
        cmocka_unit_test(test_random_steps), cmocka_unit_test(test_well),
        cmocka_unit_test(test_sech),         cmocka_unit_test(test_barriers),
        cmocka_unit_test(test_smooth),       cmocka_unit_test(test_ring),
        cmocka_unit_test(test_samples),      cmocka_unit_test(test_walls),
        cmocka_unit_test(test_ring_reach),   cmocka_unit_test(test_map),
        cmocka_unit_test(test_map_stops),    cmocka_unit_test(test_map_of_one),
        cmocka_unit_test(test_errors),       cmocka_unit_test(test_memory),
        cmocka_unit_test(test_map_memory),
    };

    openblas_set_num_threads(1); /* small matrices: more threads only wait for each other */
    return cmocka_run_group_tests(tests, NULL, NULL);
}
