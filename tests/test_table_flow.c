/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape table: tables sampled from shapes with closed forms give those shapes' modes back, better
 * the closer the rows; with noise the error bars of growth rates cover the true ones; and the one
 * sentence for each way in which a table can be wrong. The references are the closed forms of the
 * other shapes and the statistics of seeded noise. With a number as argument the coverage is tried
 * on so many tables of each kind. */
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>
#include <cmocka.h>

#include "flow/table.h"
#include "flows.h"
#include "refuse.h"
#include "twinhorizon/matching.h"
#include "twinhorizon/uncertainty.h"

static const char *const path = "test_table_flow.csv.tmp";

/* Tables of the coverage test in a usual run. */
static int trials = 50;

/* Columns of a table. */
enum { SPEED = 1, SOUND = 2, DENSITY = 4, ERRORS = 8, BACKWARDS = 16 };

/* Standard normal: "A note on the generation of random normal deviates", Ann. Math. Stat. 29, 610
 * (1958). */
static double normal(uint64_t *seed)
{
    return sqrt(-2 * log(1 - draw(seed, 0, 1))) * cos(2 * pi * draw(seed, 0, 1));
}

typedef struct {
    const char *shape;
    double value[TH_SHAPE_KEYS_MAX];
    double half;        /* the table goes from -half to half */
    double omega[2][2]; /* two growing modes: tests/test_modes.c and test_matching.c hold them to
                           other computations; here they are polished on the shape itself */
} kind;

static kind kinds[] = {
    {"tanh", {1, 1.5, 0.5, 1.5, 0.5, 0.5, 8}, 15, {{0.066477, 0.037135}, {0.24076, 0.0098606}}},
    {"well", {1, 0.6, 1.5}, 12, {{0, 0.098970}, {0.645374, 0.002437}}},
    {"continuity", {0.6, 1.4, 0.6, 1, 0.7, 0.7, 6}, 15, {{0.12881, 0.035768}, {0.47434, 0.001078}}},
};

static th_flow *flow_of_kind(const kind *k)
{
    th_flow_setup s = {.shape = th_shape_find(k->shape), .density = 1};
    th_flow *flow = NULL;
    th_error err = {0};

    for (int i = 0; i < s.shape->keys; i++) {
        s.value[i] = k->value[i];
        s.given[i] = k->value[i] != 0;
    }
    if (th_flow_build(&s, &flow, &err) != TH_OK)
        fail_msg("%s", err.text);
    return flow;
}

static void write_table(const th_flow *flow, double half, double spacing, double noise, int columns,
                        uint64_t seed)
{
    FILE *file = fopen(path, "wb");
    const int rows = (int)lround(2 * half / spacing) + 1;
    const double sign = columns & BACKWARDS ? -1 : 1;

    assert_non_null(file);
    fputs("x", file);
    for (int c = 0; c < 3; c++)
        if (columns & (1 << c)) {
            static const char *const name[3] = {"speed", "sound", "density"};

            fprintf(file, ",%s", name[c]);
            if (columns & ERRORS)
                fprintf(file, ",%s_error", name[c]);
        }
    for (int i = 0; i < rows; i++) {
        const double x = -half + spacing * i;
        th_flow_point p;

        th_flow_at(flow, x, &p);
        fprintf(file, "\n%.17g", sign * x);
        for (int c = 0; c < 3; c++) {
            const double v = c == 0 ? p.v : c == 1 ? p.c : p.n;

            if (!(columns & (1 << c)))
                continue;
            fprintf(file, ",%.17g",
                    (c == 0 ? sign : 1) * v * (noise > 0 ? 1 + noise * normal(&seed) : 1));
            if (columns & ERRORS)
                fprintf(file, ",%.17g", noise * v);
        }
    }
    assert_int_equal(fclose(file), 0);
}

static int key_of(const char *name)
{
    const th_shape *shape = th_shape_find("table");

    for (int i = 0; i < shape->keys; i++)
        if (strcmp(shape->key[i].key, name) == 0)
            return i;
    fail_msg("no key %s", name);
    return -1;
}

static void set(th_flow_setup *s, const char *key, double value)
{
    s->value[key_of(key)] = value;
    s->given[key_of(key)] = true;
}

/* The setup of the table that was written; free with drop. */
static th_flow_setup read_table(void)
{
    th_flow_setup s = {.shape = th_shape_find("table"), .density = 1};
    th_data *data = NULL;
    th_error err = {0};

    if (th_data_read(path, TH_SYSTEM_REDUCED, &data, &err) != TH_OK)
        fail_msg("%s", err.text);
    s.data = data;
    return s;
}

static void drop(th_flow_setup *s)
{
    th_data_destroy((th_data *)(uintptr_t)s->data);
}

static th_flow *build(const th_flow_setup *s)
{
    th_flow *flow = NULL;
    th_error err = {0};

    if (th_flow_build(s, &flow, &err) != TH_OK)
        fail_msg("%s: %s", err.key, err.text);
    return flow;
}

static void refused(const th_flow_setup *s, const char *key, const char *words)
{
    th_flow *flow = NULL;
    th_error err = {0};

    if (th_flow_build(s, &flow, &err) != TH_EINVAL)
        fail_msg("status %d, want a sentence with \"%s\"", (int)err.status, words);
    assert_null(flow);
    assert_string_equal(err.key, key);
    if (strstr(err.text, words) == NULL)
        fail_msg("\"%s\" does not say \"%s\"", err.text, words);
}

static th_omega root(const th_flow *flow, double top, th_omega guess)
{
    th_matching *m = NULL;
    double last;
    th_error err = {0};

    assert_int_equal(th_matching_create(flow, top, TH_MATCHING_USUAL, &m, &err), TH_OK);
    if (th_matching_polish(m, 0.3 * top, &guess.re, &guess.im, &last, &err) != TH_OK)
        fail_msg("%s", err.text);
    th_matching_destroy(m);
    return guess;
}

static void true_modes(const kind *k, const th_flow *flow, th_omega out[2])
{
    for (int i = 0; i < 2; i++) {
        out[i] = root(flow, th_flow_band_limit(flow), (th_omega){k->omega[i][0], k->omega[i][1]});
        close_to("mode", out[i].im, k->omega[i][1], 1e-5);
    }
}

/* Errors of growth rates for spacings 0.2, 0.1, 0.05, and the bars of the noise-free tables. The
 * well's density kinks in the second derivative: its errors fall more slowly. */
static void test_converges(void **state)
{
    static const double last[3] = {1e-10, 1e-6, 1e-10};

    (void)state;
    for (int which = 0; which < 3; which++)
        for (int columns = SPEED | SOUND; columns <= (SPEED | DENSITY); columns += 2) {
            const kind *k = &kinds[which];
            const bool derived = !(columns & SOUND);
            th_flow *flow = flow_of_kind(k);
            double before[2] = {HUGE_VAL, HUGE_VAL};
            th_omega want[2];
            th_flow_point up;

            if (derived && which == 0) { /* c does not follow from n there */
                th_flow_destroy(flow);
                continue;
            }
            true_modes(k, flow, want);
            th_flow_at(flow, -k->half, &up);
            for (double spacing = 0.2; spacing > 0.04; spacing /= 2) {
                th_flow_setup s;
                th_flow *table;
                th_omega got[2], sigma[2];

                write_table(flow, k->half, spacing, 0, columns, 1);
                s = read_table();
                if (derived)
                    set(&s, "sound_upstream", up.c);
                table = build(&s);
                for (int i = 0; i < 2; i++) {
                    double error;

                    got[i] = root(table, th_flow_band_limit(flow), want[i]);
                    error = hypot(got[i].re - want[i].re, got[i].im - want[i].im);
                    if (!(error < before[i] / 3))
                        fail_msg("%s, spacing %g, mode %d: error %.3g after %.3g", k->shape,
                                 spacing, i, error, before[i]);
                    before[i] = error;
                }
                assert_int_equal(
                    th_flow_uncertainty(table, th_flow_band_limit(flow), got, 2, sigma, NULL),
                    TH_OK);
                for (int i = 0; i < 2; i++) /* lack of rows counts as noise, generously */
                    assert_true(before[i] < 2 * hypot(sigma[i].re, sigma[i].im) + 1e-12);
                th_flow_destroy(table);
                drop(&s);
            }
            assert_true(before[0] < last[which] && before[1] < last[which]);
            th_flow_destroy(flow);
        }
}

/* The bars of growth rates cover the true ones. Of N independent trials those within 1 and 2 bars
 * are binomial with 68.3 % and 95.4 %; the bounds are 3.5 standard deviations of that, and for 95.4
 * % one trial more because its tail is not a normal one. */
static void coverage(const kind *k, int columns, double noise, double spacing)
{
    th_flow *flow = flow_of_kind(k);
    const double top = th_flow_band_limit(flow);
    int within[2][2] = {{0}};
    double squares[2] = {0}, means[2] = {0};
    th_omega want[2];
    th_flow_point up;

    true_modes(k, flow, want);
    th_flow_at(flow, -k->half, &up);
    for (int trial = 0; trial < trials; trial++) {
        th_flow_setup s;
        th_flow *table;
        th_omega got[2], sigma[2];

        write_table(flow, k->half, spacing, noise, columns, 9000 + 13 * (uint64_t)trial);
        s = read_table();
        if (!(columns & SOUND))
            set(&s, "sound_upstream", up.c);
        table = build(&s);
        for (int i = 0; i < 2; i++)
            got[i] = root(table, top, want[i]);
        assert_int_equal(th_flow_uncertainty(table, top, got, 2, sigma, NULL), TH_OK);
        for (int i = 0; i < 2; i++) {
            const double z = (got[i].im - want[i].im) / sigma[i].im;

            within[i][0] += fabs(z) < 1;
            within[i][1] += fabs(z) < 2;
            squares[i] += z * z / trials;
            means[i] += z / trials;
        }
        th_flow_destroy(table);
        drop(&s);
    }
    for (int i = 0; i < 2; i++) {
        const double p[2] = {0.6827, 0.9545};

        print_message("# %s, %g %% noise, mode %d: %d and %d of %d within 1 and 2 bars, mean %.2f, "
                      "mean square %.2f\n",
                      k->shape, 100 * noise, i, within[i][0], within[i][1], trials, means[i],
                      squares[i]);
        for (int j = 0; j < 2; j++)
            close_to("within", within[i][j], p[j] * trials,
                     3.5 * sqrt(p[j] * (1 - p[j]) * trials) + j);
    }
    th_flow_destroy(flow);
}

static void test_coverage(void **state)
{
    (void)state;
    coverage(&kinds[0], SPEED | SOUND, 0.01, 0.1);
}

static void test_coverage_derived(void **state)
{
    (void)state;
    coverage(&kinds[2], SPEED | DENSITY | ERRORS, 0.01, 0.1);
}

/* n v is constant, derivatives are those of the values, ends are uniform, all smooth at the edges
 * of pieces: on a noisy table, where nothing is flat. */
static void test_values(void **state)
{
    th_flow *flow = flow_of_kind(&kinds[2]);
    th_flow_setup s;

    (void)state;
    for (int columns = SPEED; columns <= (SPEED | SOUND | DENSITY); columns++) {
        th_flow *table;
        const double *edge;
        int edges;
        th_flow_point end[2];

        write_table(flow, 15, 0.1, 0.02, columns == SOUND ? SOUND | DENSITY : columns, 5);
        s = read_table();
        s.density = 2.5;
        set(&s, "stretch", 1.7);
        if (!(columns & SOUND))
            set(&s, "sound_upstream", 1.1);
        if (!(columns & SPEED))
            set(&s, "flux", 0.6);
        table = build(&s);
        edge = th_flow_edges(table, &edges);
        close_to("left edge", edge[0], -15 * 1.7, 1e-12);
        close_to("right edge", edge[edges - 1], 15 * 1.7, 1e-12);
        th_flow_at(table, -100, &end[0]);
        th_flow_at(table, 100, &end[1]);
        close_to("density", end[0].n, 2.5, 1e-14);
        if (!(columns & SOUND))
            close_to("sound", end[0].c, 1.1, 1e-14);
        for (int e = 0; e < 2; e++) /* the flow's own edge is its uniform end, to the third order */
        {
            const int piece = e == 0 ? 0 : edges - 2;
            th_flow_point p;

            th_flow_eval(table, piece, edge[e == 0 ? 0 : edges - 1], &p);
            close_to("n", p.n, end[e].n, 1e-14 * p.n);
            close_to("c", p.c, end[e].c, 1e-14 * p.c);
            close_to("n'", p.dn, 0, 1e-13);
            close_to("n''", p.ddn, 0, 1e-11);
        }
        for (int i = 0; i < edges - 1; i++) {
            const double x = edge[i] + 0.37 * (edge[i + 1] - edge[i]), h = 1e-4;
            th_flow_point p, l, r;

            th_flow_eval(table, i, x, &p);
            th_flow_eval(table, i, x - h, &l);
            th_flow_eval(table, i, x + h, &r);
            close_to("n v", p.n * p.v, 2.5 * end[0].v, 1e-13 * p.n * p.v);
            /* central differences: h^2/6 times third derivatives below 20 */
            close_to("dn", p.dn, (r.n - l.n) / (2 * h), 1e-7);
            close_to("ddn", p.ddn, (r.dn - l.dn) / (2 * h), 1e-6);
            close_to("dv", p.dv, (r.v - l.v) / (2 * h), 1e-7);
            close_to("dc", p.dc, (r.c - l.c) / (2 * h), 1e-7);
            if (i == 0)
                continue;
            th_flow_eval(table, i - 1, edge[i], &l);
            th_flow_eval(table, i, edge[i], &r);
            close_to("n at an edge", l.n, r.n, 1e-13);
            close_to("n' at an edge", l.dn, r.dn, 1e-11);
            close_to("n'' at an edge", l.ddn, r.ddn, 1e-9);
            close_to("c' at an edge", l.dc, r.dc, 1e-11);
        }
        th_flow_destroy(table);
        drop(&s);
    }
    th_flow_destroy(flow);
}

/* A table written backwards, all speeds below zero, is the same flow; walls put padding beside it;
 * a stretched one has horizons stretched apart. */
static void test_mirror_walls_stretch(void **state)
{
    th_flow *flow = flow_of_kind(&kinds[0]), *table[4];
    const th_horizon *horizon, *other;
    int count, edges;
    th_flow_setup s;

    (void)state;
    write_table(flow, 15, 0.1, 0, SPEED | SOUND, 1);
    s = read_table();
    table[0] = build(&s);
    set(&s, "stretch", 1.5);
    table[1] = build(&s);
    s.ends = walls(3);
    table[2] = build(&s);
    drop(&s);
    write_table(flow, 15, 0.1, 0, SPEED | SOUND | BACKWARDS, 1);
    s = read_table();
    table[3] = build(&s);
    drop(&s);
    horizon = th_flow_horizons(table[0], &count);
    assert_int_equal(count, 2);
    /* the shape's closed form: each edge has its horizon at -+4 but for e^-32 of the other; rows
     * at a fifth of the edge's width leave 1e-5 of the sound speed */
    close_to("horizon", horizon[0].x, -4, 1e-4);
    close_to("kappa", horizon[0].kappa, th_flow_horizons(flow, &edges)[0].kappa, 1e-3);
    other = th_flow_horizons(table[1], &count);
    close_to("stretched", other[1].x, 1.5 * horizon[1].x, 1e-9);
    close_to("stretched kappa", other[1].kappa, horizon[1].kappa / 1.5, 1e-9);
    other = th_flow_horizons(table[3], &count);
    close_to("mirrored", other[0].x, horizon[0].x, 1e-12);
    assert_non_null(strstr(th_flow_note(table[3]), "mirrored"));
    assert_null(strstr(th_flow_note(table[0]), "mirrored"));
    close_to("wall", th_flow_edges(table[2], &edges)[0], -1.5 * 15 - 3, 1e-12);
    for (int i = 0; i < 4; i++)
        th_flow_destroy(table[i]);
    th_flow_destroy(flow);
}

/* A flux that drifts by -+2 % over the table, and noise: mean, rms, largest by the numbers that
 * were put in. Batch means of a straight drift of full width w differ by w/sqrt(12), and their mean
 * is uncertain by that over sqrt(8 - 1), sqrt(1 - 1/64) for their width. */
static void test_flux(void **state)
{
    FILE *file = fopen(path, "wb");
    th_flow_setup s;
    th_table t;
    th_table_plan plan = {.smoothing = -1, .taper = 2, .stretch = 1, .state = {1, 1, 0}};
    th_error err = {0};

    (void)state;
    assert_non_null(file);
    fputs("x,density,speed\n", file);
    for (int i = 0; i < 401; i++) {
        const double x = -10 + 0.05 * i, n = 1 - 0.3 * exp(-x * x / 4);

        fprintf(file, "%.17g,%.17g,%.17g\n", x, n, 0.9 / n * exp(0.002 * x) * (i == 77 ? 1.05 : 1));
    }
    assert_int_equal(fclose(file), 0);
    s = read_table();
    plan.data = s.data;
    if (th_table_make(&plan, &t, &err) != TH_OK)
        fail_msg("%s", err.text);
    close_to("flux", t.flux.flux, 0.9 * pow(1.05, 1.0 / 401), 1e-6);
    close_to("largest", t.flux.worst, 1.05 * exp(0.002 * -6.15) - 1, 2e-4);
    close_to("its place", t.flux.worst_at, -6.15, 1e-12);
    close_to("rms", t.flux.rms, sqrt(0.04 * 0.04 / 12 + 0.05 * 0.05 / 401), 2e-4);
    close_to("uncertainty", t.flux.uncertainty, 0.04 / sqrt(12.0 * 7) * sqrt(63.0 / 64), 4e-5);
    /* the last direction moves the speed alone, by its standard deviation */
    {
        th_table moved;
        th_flow_point a, b;

        assert_int_equal(th_table_move(&t, th_table_directions(&t) - 1, 2, &moved, NULL), TH_OK);
        th_table_eval(&t, t.pieces / 2, 0.1, &a);
        th_table_eval(&moved, t.pieces / 2, 0.1, &b);
        close_to("density stays", b.n, a.n, 0);
        close_to("speed moves", b.v / a.v, exp(2 * t.flux.uncertainty), 1e-14);
        th_table_clear(&moved);
    }
    th_table_clear(&t);
    drop(&s);
}

/* Directions: each moves the flow, all together by the deviation of the curve; accessors. */
static void test_directions(void **state)
{
    th_flow *flow = flow_of_kind(&kinds[0]);
    double square = 0;
    th_flow_setup s;
    th_table_plan plan = {.smoothing = -1, .taper = 3, .stretch = 1, .state = {1, 0, 0}};
    th_flow *table, *moved = NULL;
    th_flow_point p, q;
    th_table t;
    th_error err = {0};

    (void)state;
    write_table(flow, 15, 0.1, 0.02, SPEED | SOUND, 4);
    s = read_table();
    table = build(&s);
    plan.data = s.data;
    assert_int_equal(th_table_make(&plan, &t, &err), TH_OK);
    assert_int_equal(th_table_directions(&t), th_flow_directions(table));
    assert_true(th_flow_directions(table) <= TH_TABLE_DIRECTIONS);
    th_flow_at(table, 3.3, &p);
    for (int d = 0; d < th_flow_directions(table); d++) {
        assert_int_equal(th_flow_vary(table, d, 1, &moved, &err), TH_OK);
        th_flow_at(moved, 3.3, &q);
        square += pow(log(q.c / p.c), 2);
        close_to("n v", q.n * q.v, th_flow_flux(moved), 1e-13);
        assert_int_equal(th_flow_directions(moved), 0);
        th_flow_destroy(moved);
    }
    /* a thousandth of the variance at all rows may be missing, a fiftieth at one place */
    close_to("deviation", sqrt(square), th_smooth_deviation(&t.fit[TH_TABLE_SOUND], 3.3),
             0.01 * sqrt(square));
    th_table_clear(&t);
    assert_int_equal(th_flow_vary(table, th_flow_directions(table), 1, &moved, &err), TH_EINVAL);
    assert_null(moved);
    assert_int_equal(th_flow_vary(table, -1, 1, &moved, &err), TH_EINVAL);
    assert_int_equal(th_flow_vary(table, 0, 1, NULL, &err), TH_EINVAL);
    assert_int_equal(th_flow_vary(table, 0, 1e6, &moved, &err), TH_EINVAL); /* c overflows */
    assert_int_equal(th_flow_directions(flow), 0);
    assert_int_equal(th_flow_vary(flow, 0, 1, &moved, &err), TH_EINVAL);
    th_flow_destroy(table);
    drop(&s);
    th_flow_destroy(flow);
}

/* First-order bars against roots found anew on flows moved by 0.3 deviations to both sides, and the
 * effect of the taper against roots with half the taper. */
static void test_first_order(void **state)
{
    th_flow *flow = flow_of_kind(&kinds[2]), *table, *half;
    const double top = th_flow_band_limit(flow);
    double square[2] = {0};
    th_flow_setup s;
    th_omega want[2], got[2], sigma[2], shift[2];
    th_flow_point up;

    (void)state;
    true_modes(&kinds[2], flow, want);
    th_flow_at(flow, -15, &up);
    write_table(flow, 9, 0.1, 0.002, SPEED | DENSITY, 4);
    s = read_table();
    set(&s, "sound_upstream", up.c);
    set(&s, "smoothing", 0.3);
    table = build(&s);
    for (int i = 0; i < 2; i++)
        got[i] = root(table, top, want[i]);
    assert_int_equal(th_flow_uncertainty(table, top, got, 2, sigma, NULL), TH_OK);
    for (int d = 0; d < th_flow_directions(table); d++) {
        th_omega side[2];

        for (int k = 0; k < 2; k++) {
            th_flow *moved = NULL;

            assert_int_equal(th_flow_vary(table, d, k == 0 ? -0.3 : 0.3, &moved, NULL), TH_OK);
            side[k] = root(moved, top, got[0]);
            th_flow_destroy(moved);
        }
        square[0] += pow((side[1].re - side[0].re) / 0.6, 2);
        square[1] += pow((side[1].im - side[0].im) / 0.6, 2);
    }
    close_to("bar of Re", sigma[0].re, sqrt(square[0]), 2e-3 * sigma[0].re);
    close_to("bar of Im", sigma[0].im, sqrt(square[1]), 2e-3 * sigma[0].im);
    assert_int_equal(th_taper_effect(&s, top, got, 2, shift, NULL), TH_OK);
    set(&s, "taper", 0.9); /* the usual one is 1.8 */
    half = build(&s);
    for (int i = 0; i < 2; i++) {
        const th_omega end = root(half, top, got[i]);
        const double size = hypot(shift[i].re, shift[i].im);

        assert_true(size > 1e-9);
        close_to("taper, Re", shift[i].re, end.re - got[i].re, 0.02 * size);
        close_to("taper, Im", shift[i].im, end.im - got[i].im, 0.02 * size);
    }
    th_flow_destroy(half);
    th_flow_destroy(table);
    drop(&s);
    /* flows without directions and shapes without tapers */
    assert_int_equal(th_flow_uncertainty(flow, top, want, 2, sigma, NULL), TH_OK);
    assert_true(sigma[0].re == 0 && sigma[1].im == 0);
    s = (th_flow_setup){.shape = th_shape_find("tanh"), .density = 1};
    assert_int_equal(th_taper_effect(&s, top, want, 2, shift, NULL), TH_ENONE);
    assert_int_equal(th_taper_effect(NULL, top, want, 2, shift, NULL), TH_EINVAL);
    assert_int_equal(th_flow_uncertainty(NULL, top, want, 2, sigma, NULL), TH_EINVAL);
    assert_int_equal(th_flow_uncertainty(flow, top, want, 0, sigma, NULL), TH_EINVAL);
    th_flow_destroy(flow);
}

static void test_refused(void **state)
{
    th_flow *flow = flow_of_kind(&kinds[2]);
    th_flow_setup s, t;

    (void)state;
    write_table(flow, 15, 0.1, 0, SPEED | SOUND, 1);
    s = read_table();
    t = s;
    t.data = NULL;
    refused(&t, "file", "file is missing, shape table needs it");
    t = s;
    t.ends = ring(30, 4);
    refused(&t, "kind", "cannot close on a ring");
    t = s;
    set(&t, "flux", 1);
    refused(&t, "flux", "flux = 1, but the table has a speed");
    t = s;
    set(&t, "sound_upstream", 1);
    refused(&t, "sound_upstream", "but the table has a column sound");
    t = s;
    set(&t, "taper", 15.5);
    refused(&t, "taper", "taper = 15.5, want less than half the table's length 30");
    t = s;
    set(&t, "taper", 0.15);
    refused(&t, "taper", "taper = 0.15 holds 2 rows at the left end, want 3 or more");
    set(&t, "taper", 0.25);
    {
        const th_omega mode = {0.1, 0.1};
        th_omega shift;
        th_error err = {0};

        assert_int_equal(th_taper_effect(&t, 1, &mode, 1, &shift, &err), TH_ENONE);
        assert_non_null(strstr(err.text, "taper = 0.125 holds 2 rows"));
    }
    t = s;
    set(&t, "state", TH_STATE_TRANSVERSE);
    refused(&t, "scattering_length", "scattering_length is missing");
    t = s;
    set(&t, "smoothing", -0.5);
    refused(&t, "smoothing", "smoothing = -0.5, want a finite number >= 0");
    t = s;
    set(&t, "stretch", 0);
    refused(&t, "stretch", "stretch = 0");
    drop(&s);

    write_table(flow, 15, 0.1, 0, SPEED, 1);
    s = read_table();
    refused(&s, "sound_upstream", "sound_upstream is missing");
    drop(&s);
    write_table(flow, 15, 0.1, 0, DENSITY, 1);
    s = read_table();
    t = s;
    set(&t, "sound_upstream", 1);
    refused(&t, "flux", "flux is missing");
    set(&t, "flux", 1);
    set(&t, "state", TH_STATE_TRANSVERSE);
    set(&t, "scattering_length", 0.1);
    t.density = 1.2;
    refused(&t, "density", "density = 1.2, but the table's is ");
    drop(&s);
    write_table(flow, 15, 0.1, 0, SOUND, 1);
    s = read_table();
    refused(&s, "file", "neither a column speed nor a column density");
    drop(&s);
    /* a table that ends in the pocket's edge is not uniform there; noise does not hide it */
    for (int noisy = 0; noisy < 2; noisy++) {
        write_table(flow, 3.5, 0.05, 0.01 * noisy, SPEED | SOUND, 1);
        s = read_table();
        refused(&s, "file", "speed is not uniform at the left end: at x = ");
        drop(&s);
    }
    th_flow_destroy(flow);
}

static void says(const th_flow *flow, const char *words, bool yes)
{
    if ((strstr(th_flow_note(flow), words) != NULL) != yes)
        fail_msg("the note should%s say \"%s\": %s", yes ? "" : " not", words, th_flow_note(flow));
}

/* What the note says, by what was put into the table: 301 rows, 2 % noise that is stated right or
 * four times too small, rows more than directions, noise that goes together. */
static void test_note(void **state)
{
    th_flow *flow = flow_of_kind(&kinds[0]), *table;
    th_flow_setup s;
    uint64_t seed = 8;
    double e = 0;
    FILE *file;

    (void)state;
    write_table(flow, 15, 0.1, 0.02, SPEED | SOUND | ERRORS, 1);
    s = read_table();
    table = build(&s);
    says(table, "301 rows; speed: noise 2", true);
    says(table, " by cross-validation", true);
    says(table, "uniform ends over tapers of 10 % of the length, v/c = 0.6", true);
    says(table, "stated errors", false);
    says(table, "go together", false);
    says(table, "widened", false);
    says(table, "density times speed", false);
    th_flow_destroy(table);
    set(&s, "smoothing", 0.3);
    set(&s, "taper", 6);
    table = build(&s);
    says(table, "smoothing 1 % of the table's length;", true);
    says(table, "tapers of 20 % of the length", true);
    th_flow_destroy(table);
    drop(&s);
    th_flow_destroy(flow);
    flow = flow_of_kind(&kinds[2]); /* both curves want 159 */
    write_table(flow, 15, 0.05, 0, SPEED | SOUND, 1);
    s = read_table();
    table = build(&s);
    assert_int_equal(th_flow_directions(table), TH_TABLE_DIRECTIONS);
    says(table, "error bars hold ", true);
    th_flow_destroy(table);
    drop(&s);
    file = fopen(path, "wb");
    assert_non_null(file);
    fputs("x,speed,speed_error,sound\n", file);
    for (int i = 0; i <= 1000; i++) {
        e = 0.7 * e + 0.02 * normal(&seed); /* deviation 0.02/sqrt(1 - 0.49) = 0.028 */
        fprintf(file, "%.17g,%.17g,0.007,2\n", 0.01 * i, 1 + e);
    }
    assert_int_equal(fclose(file), 0);
    s = read_table();
    set(&s, "smoothing", 3);
    table = build(&s);
    says(table, "speed: noise 2.7 %", true); /* 2.8 % to 4 % of itself, as 1001 such rows tell */
    says(table, "stated errors times 3.9", true); /* 0.028/0.007 = 4 to the same */
    /* sqrt((1 + 0.7)/(1 - 0.7)) = 2.38, known to 5 % */
    says(table, "neighbouring rows go together, so error bars times 2.", true);
    th_flow_destroy(table);
    drop(&s);
    th_flow_destroy(flow);
}

/* Every allocation refused in turn: of a build, a moved flow, bars and the effect of the taper. */
static th_status everything(const th_flow_setup *s, double top, const th_omega *mode, th_error *err)
{
    th_flow *table = NULL;
    th_omega out;
    th_status st = th_flow_build(s, &table, err);

    if (st == TH_OK)
        st = th_flow_uncertainty(table, top, mode, 1, &out, err);
    if (st == TH_OK)
        st = th_taper_effect(s, top, mode, 1, &out, err);
    th_flow_destroy(table);
    return st;
}

static void test_memory(void **state)
{
    th_flow *flow = flow_of_kind(&kinds[2]);
    const double top = th_flow_band_limit(flow);
    th_flow_setup s;
    th_omega want[2];
    long k = 0;

    (void)state;
    true_modes(&kinds[2], flow, want);
    write_table(flow, 15, 0.3, 0.03, SPEED | DENSITY, 1);
    s = read_table();
    set(&s, "sound_upstream", 1);
    set(&s, "smoothing", 8); /* few directions */
    for (;; k++) {
        th_error err = {0};
        th_status st;

        refuse_from(k);
        st = everything(&s, top, want, &err);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
    }
    assert_true(k > 100);
    drop(&s);
    th_flow_destroy(flow);
}

static int clean(void **state)
{
    (void)state;
    (void)unlink(path);
    return 0;
}

int main(int argc, char **argv)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_converges),
        cmocka_unit_test(test_coverage),
        cmocka_unit_test(test_coverage_derived),
        cmocka_unit_test(test_values),
        cmocka_unit_test(test_mirror_walls_stretch),
        cmocka_unit_test(test_flux),
        cmocka_unit_test(test_directions),
        cmocka_unit_test(test_first_order),
        cmocka_unit_test(test_note),
        cmocka_unit_test(test_refused),
        cmocka_unit_test(test_memory),
    };

    const char *before = getenv("LD_PRELOAD");

    if (argc > 1)
        trials = atoi(argv[1]);
    else if (before != NULL && strstr(before, "vgpreload") != NULL)
        trials = 5; /* valgrind takes thirty times as long */
    return cmocka_run_group_tests(tests, NULL, clean);
}
