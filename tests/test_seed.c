/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of th_seed: limits, scalings and invariances that hold without any simulation, and the
 * equilibrium state of Q against closed forms. The simulation is tests/check_seed.py. */
#include <complex.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "flows.h"
#include "refuse.h"
#include "seed/inside.h"
#include "spectrum.h"
#include "twinhorizon/seed.h"

extern void openblas_set_num_threads(int threads);

static const th_solve_options usual = {.accuracy = 1e-9};

/* A flow with its modes. Shapes and numbers of modes are those of tests/test_modes.c. */
typedef struct {
    th_flow *flow;
    th_solution *solution;
} solved;

static solved solve(th_flow *flow)
{
    solved s = {.flow = flow};
    th_error err = {0};

    if (th_solve(flow, &usual, &s.solution, &err) != TH_OK)
        fail_msg("%s", err.text);
    return s;
}

static void forget(solved *s)
{
    th_solution_destroy(s->solution);
    th_flow_destroy(s->flow);
}

/* One purely growing mode; one oscillating pair; two pairs with smooth edges; both kinds and n(x).
 */
static th_flow *growing(void)
{
    return step_flow(0.75, 1, 0.3, 1, 2);
}

static th_flow *oscillating(void)
{
    return step_flow(0.75, 1, 0.3, 1, 5);
}

static th_flow *smooth(void)
{
    return flow_of("tanh", open_ends(), (const double[]){1, 1.5, 0.5, 1.5, 0.5, 0.5, 8});
}

static th_flow *well(void)
{
    return flow_of("well", open_ends(), (const double[]){1, 0.6, 1.5});
}

typedef th_flow *maker(void);
static maker *const makers[] = {growing, oscillating, smooth, well};
enum { MAKERS = sizeof makers / sizeof makers[0] };

static th_seed *seed_of(const solved *s, double density, double temperature)
{
    const th_seed_options options = {.density = density, .temperature = temperature};
    th_seed *seed = NULL;
    th_error err = {0};

    if (th_seed_create(s->flow, s->solution, &options, &seed, &err) != TH_OK)
        fail_msg("%s", err.text);
    return seed;
}

static double total(const th_seed *seed, double time)
{
    double contrast, place;
    th_error err = {0};

    if (th_seed_total(seed, time, &contrast, &place, &err) != TH_OK)
        fail_msg("%s", err.text);
    return contrast;
}

/* ---- the state ------------------------------------------------------------------------------ */

/* Uniform gas at rest but for v, walls: Q's normal modes are sin(k x), k = j pi/length, with
 * A = c^2 + k^2/4, B = k^2, Omega^2 = A B, and <q q> = sqrt(B/A) coth(Omega/2T)/2,
 * <p p> = sqrt(A/B) coth(Omega/2T)/2 for a unit vector (harmonic oscillator, textbook). 1e-6: the
 * Euler-Maclaurin tail errs by 1e-6 of one of eight terms, the mesh by its accuracy. */
static void test_state(void **state)
{
    static const double temperatures[] = {0, 1e-4, 0.02, 0.37, 1.9, 55};
    uniform_state gas = {.v = 0.4, .c = 1.3};
    th_flow *flow = uniform_flow(walls(0), 7, &gas);
    const th_seed_level level = {14, 1e-10, 12, 1e6, 0.5};
    th_mesh *mesh = NULL;
    th_operator *op = NULL;
    th_error err = {0};
    const double complex omega = 4 + I;

    (void)state;
    assert_int_equal(th_seed_line(flow, &level, 1, &omega, &mesh, &err), TH_OK);
    assert_int_equal(th_operator_create(mesh, &op, &err), TH_OK);
    for (int j = 1; j <= 6; j++)
        for (size_t t = 0; t < sizeof temperatures / sizeof *temperatures; t++) {
            const double k = j * pi / 7, a = 1.69 + k * k / 4, b = k * k, T = temperatures[t];
            const double coth = T > 0 ? 1 / tanh(sqrt(a * b) / (2 * T)) : 1;
            double *r = calloc(2 * (size_t)op->size, sizeof *r), cov[4], norm = 0;

            assert_non_null(r);
            for (int at = 0; at < mesh->elements * (mesh->rule.order + 1); at++)
                if (op->slot[at] >= 0) {
                    const int slot = op->slot[at];
                    const double value = sqrt(creal(op->mass[slot])) * sin(k * (mesh->x[at] + 3.5));

                    r[2 * slot] = r[op->size + 2 * slot + 1] = value;
                }
            for (int i = 0; i < op->size; i++)
                norm += r[i] * r[i];
            assert_int_equal(th_seed_state(op, T, 0.5, 5, 0.5, 2, r, cov, &err), TH_OK);
            close_to("<q q>", cov[0] / norm / (sqrt(b / a) * coth / 2), 1, 1e-6);
            close_to("<p p>", cov[3] / norm / (sqrt(a / b) * coth / 2), 1, 1e-6);
            close_to("<q p>", cov[1] / norm, 0, 1e-12 * coth);
            free(r);
        }
    th_operator_destroy(op);
    th_mesh_destroy(mesh);
    th_flow_destroy(flow);
}

/* The amplitude of a growing mode does not see a constant phase: the left eigenvector's phase part
 * is the partner's mass, Int n eta, and that vanishes by conservation. What is left is what the far
 * ends reflect, e^{-12} of the amplitude there. */
static void test_constant_phase(void **state)
{
    const th_seed_level level = {14, 1e-9, 12, 1e6, 0.5};

    (void)state;
    for (int f = 0; f < MAKERS; f++) {
        solved s = solve(makers[f]());
        const th_mode *mode = &s.solution->mode[0];
        const double complex omega = mode->omega_re + I * mode->omega_im;
        double complex sum = 0;
        double size = 0;
        th_mesh *mesh = NULL;
        th_operator *op = NULL;
        th_eigenpair partner;
        th_error err = {0};

        assert_int_equal(th_seed_line(s.flow, &level, 1, &omega, &mesh, &err), TH_OK);
        assert_int_equal(th_operator_create(mesh, &op, &err), TH_OK);
        assert_int_equal(th_spectrum_refine(op, conj(omega), &partner, &err), TH_OK);
        for (int i = 0; i < op->nodes; i++) {
            sum += csqrt(op->mass[i]) * partner.right[2 * i];
            size += cabs(csqrt(op->mass[i]) * partner.right[2 * i]);
        }
        close_to("mass of the partner", cabs(sum) / size, 0, 1e-5);
        th_eigenpair_clear(&partner);
        th_operator_destroy(op);
        th_mesh_destroy(mesh);
        forget(&s);
    }
}

/* ---- invariances ---------------------------------------------------------------------------- */

/* rms of |eta| b at x, unscaled, of every mode of an answer */
static void amplitudes(const solved *s, const th_seed_level *level, double T, double x, double *out)
{
    double complex omega[8] = {0};
    th_seed_answer a;
    th_error err = {0};
    int count = 0;

    for (int i = 0; i < s->solution->count && count < 8; i++)
        if (s->solution->mode[i].label == TH_LABEL_UNSTABLE)
            omega[count++] = s->solution->mode[i].omega_re + I * s->solution->mode[i].omega_im;
    if (th_seed_project(s->flow, level, T, count, omega, &a, &err) != TH_OK)
        fail_msg("%s", err.text);
    assert_int_equal(a.known, count);
    for (int j = 0; j < count; j++) {
        const int at = 2 * j * (2 * count + 1);

        out[j] =
            cabs(th_seed_eta(&a, j, x)) * sqrt(a.covariance[at] + a.covariance[at + 2 * count + 1]);
    }
    th_seed_answer_clear(&a);
}

/* Padding, elements, order, quadrature, each alone and all together. 3e-8: measured 1e-8 on smooth
 * flows and 2e-8 where thermal phase fluctuations reach the far end (it falls as 1/far). */
static void test_refinement(void **state)
{
    static const th_seed_level base = {14, 1e-9, 12, 1e6, 0.5};
    static const th_seed_level other[] = {{14, 1e-9, 18, 1e6, 0.5},  {14, 1e-9, 12, 3e7, 0.5},
                                          {19, 1e-9, 12, 1e6, 0.5},  {14, 1e-12, 12, 1e6, 0.5},
                                          {14, 1e-9, 12, 1e6, 0.31}, {19, 1e-12, 18, 1e7, 0.31}};

    (void)state;
    for (int f = 0; f < MAKERS; f++) {
        solved s = solve(makers[f]());

        if (f == MAKERS - 1) /* its slow mode is not worth the time: the fast one alone */
            s.solution->count = 1;
        for (int hot = 0; hot < 2; hot++) {
            double want[8], got[8];

            amplitudes(&s, &base, 0.3 * hot, 0.37, want);
            for (size_t i = 0; i < sizeof other / sizeof *other; i++) {
                amplitudes(&s, &other[i], 0.3 * hot, 0.37, got);
                for (int j = 0; j < s.solution->count; j++)
                    if (s.solution->mode[j].label == TH_LABEL_UNSTABLE)
                        close_to("finer/usual", got[j] / want[j], 1, 3e-8);
            }
        }
        forget(&s);
    }
}

/* The same gas with lengths divided by 1.7: speeds times 1.7, rates and T times 1.7^2, density
 * times 1.7; contrasts are numbers. 1e-8: amplitudes are taken at points of two meshes. */
static void test_units(void **state)
{
    const double by = 1.7;
    solved s = solve(step_flow(0.75, 1, 0.3, 1, 5));
    solved small = solve(step_flow(0.75 * by, by, 0.3 * by, by, 5 / by));

    (void)state;
    for (int hot = 0; hot < 2; hot++) {
        th_seed *a = seed_of(&s, 20, 0.3 * hot);
        th_seed *b = seed_of(&small, 20 * by, 0.3 * hot * by * by);
        double late, early;
        th_error err = {0};

        for (int i = 0; i < 5; i++)
            close_to("contrast", total(b, 20 * i / (by * by)) / total(a, 20 * i), 1, 1e-7);
        assert_int_equal(th_seed_time(a, 0.3, &late, &err), TH_OK);
        assert_int_equal(th_seed_time(b, 0.3, &early, &err), TH_OK);
        close_to("time", early * by * by / late, 1, 1e-7);
        th_seed_destroy(a);
        th_seed_destroy(b);
    }
    forget(&s);
    forget(&small);
}

/* Contrast goes as 1/sqrt(density), exactly; the flow's own density (here 1.7) does not count. */
static void test_density(void **state)
{
    const double value[] = {1, 0.6, 1.5};
    solved s = solve(well()), other = {0};
    th_flow_setup setup = {.shape = th_shape_find("well"), .density = 400, .ends = open_ends()};
    const th_seed_mode *m[3];
    th_seed *seed[3];
    th_error err = {0};
    int count;

    (void)state;
    for (int i = 0; i < setup.shape->keys && i < 3; i++) {
        setup.value[i] = value[i];
        setup.given[i] = true;
    }
    assert_int_equal(th_flow_build(&setup, &other.flow, &err), TH_OK);
    other = solve(other.flow);
    s.solution->count = other.solution->count = 1;
    seed[0] = seed_of(&s, 9, 0.2);
    seed[1] = seed_of(&s, 9 * 121, 0.2);
    seed[2] = seed_of(&other, 9, 0.2);
    for (int i = 0; i < 3; i++)
        m[i] = th_seed_modes(seed[i], &count);
    close_to("121 times the density", m[1][0].amplitude / m[0][0].amplitude, 1.0 / 11, 1e-14);
    close_to("another scale of n", m[2][0].amplitude / m[0][0].amplitude, 1, 1e-9);
    close_to("another scale of n", m[2][0].place, m[0][0].place, 1e-12);
    for (int i = 0; i < 3; i++)
        th_seed_destroy(seed[i]);
    forget(&s);
    forget(&other);
}

/* T -> 0 is the ground state, monotone above; T -> oo is classical, sqrt(T): coth(Omega/2T) =
 * 2T/Omega (1 + (Omega/T)^2/12), frequencies of order c^2, so that 1e3 c^2 and more leave 1e-6. */
static void test_temperature(void **state)
{
    static const double temperatures[] = {0, 1e-7, 1e-3, 0.03, 0.5, 7, 1e3, 4e3, 9e6};
    enum { COUNT = sizeof temperatures / sizeof *temperatures };

    (void)state;
    for (int f = 0; f < 3; f++) {
        solved s = solve(makers[f]());
        double a[COUNT];

        for (int i = 0; i < COUNT; i++) {
            th_seed *seed = seed_of(&s, 1, temperatures[i]);
            const th_seed_mode *mode;
            int count;

            mode = th_seed_modes(seed, &count);
            assert_true(count > 0 && mode[0].known);
            a[i] = mode[0].amplitude;
            if (i > 1)
                assert_true(a[i] > a[i - 1]);
            th_seed_destroy(seed);
        }
        close_to("cold", a[1] / a[0], 1, 1e-5);
        close_to("4 times hotter", a[7] / a[6], 2, 1e-5);
        close_to("9000 times hotter", a[8] / a[6], sqrt(9000), 1e-4);
        forget(&s);
    }
}

/* ---- growth in time ------------------------------------------------------------------------- */

/* A single purely growing mode: a e^{gamma t} at its place, everywhere the same shape, and the time
 * to a threshold in closed form. */
static void test_one_growing(void **state)
{
    solved s = solve(growing());
    th_seed *seed = seed_of(&s, 25, 0.1);
    const th_seed_mode *m;
    double time, place, contrast, rms[2], early[2];
    const double x[2] = {0.2, -0.9};
    th_error err = {0};
    int count;

    (void)state;
    m = th_seed_modes(seed, &count);
    assert_int_equal(count, 1);
    assert_true(m->known && m->amplitude > 0 && m->error < 1e-6 * m->amplitude);
    close_to("squeezing", m->squeezing, 1, 1e-12);
    for (int i = 0; i < 4; i++) {
        assert_int_equal(th_seed_total(seed, 11.5 * i, &contrast, &place, &err), TH_OK);
        close_to("total", contrast / (m->amplitude * exp(m->omega_im * 11.5 * i)), 1, 1e-12);
        close_to("place", place, m->place, 0);
    }
    assert_int_equal(th_seed_time(seed, 0.5, &time, &err), TH_OK);
    close_to("time", time, log(0.5 / m->amplitude) / m->omega_im, 1e-9);
    assert_int_equal(th_seed_time(seed, 0.5 * m->amplitude, &time, &err), TH_OK);
    close_to("already there", time, 0, 0);
    for (int kind = 0; kind < 2; kind++) {
        assert_int_equal(th_seed_contrast(seed, (th_seed_kind)kind, 0, 2, x, early, &err), TH_OK);
        assert_int_equal(th_seed_contrast(seed, (th_seed_kind)kind, 30, 2, x, rms, &err), TH_OK);
        for (int i = 0; i < 2; i++)
            close_to("growth", rms[i] / early[i], exp(30 * m->omega_im), 1e-11 * rms[i] / early[i]);
    }
    th_seed_destroy(seed);
    forget(&s);
}

/* A single pair: the instant oscillates about the average at 2 Re omega, within 1 +- squeezing, and
 * its mean over half a period is the average. */
static void test_one_pair(void **state)
{
    enum { STEPS = 400 };
    solved s = solve(oscillating());
    th_seed *seed = seed_of(&s, 25, 0.8);
    const th_seed_mode *m;
    double sum = 0, low = HUGE_VAL, high = 0;
    th_error err = {0};
    int count;

    (void)state;
    m = th_seed_modes(seed, &count);
    assert_int_equal(count, 1);
    for (int i = 0; i < STEPS; i++) {
        const double time = pi / m->omega_re * i / STEPS;
        const double level = m->amplitude * exp(m->omega_im * time);
        double instant, average, square;

        assert_int_equal(
            th_seed_contrast(seed, TH_SEED_INSTANT, time, 1, &m->place, &instant, &err), TH_OK);
        assert_int_equal(
            th_seed_contrast(seed, TH_SEED_AVERAGE, time, 1, &m->place, &average, &err), TH_OK);
        close_to("average", average / level, 1, 1e-11);
        square = instant * instant / (level * level);
        sum += square / STEPS;
        low = fmin(low, square);
        high = fmax(high, square);
    }
    assert_true(m->squeezing > 0.01 && m->squeezing < 1); /* else this tests nothing */
    close_to("mean", sum, 1, 1e-10);
    close_to("largest", high, 1 + m->squeezing, 1e-4); /* 400 steps: (pi/400)^2/2 of it */
    close_to("smallest", low, 1 - m->squeezing, 1e-4);
    th_seed_destroy(seed);
    forget(&s);
}

/* Several modes: squares add where Re omega differ; total is the largest over the pockets. */
static void test_sum(void **state)
{
    enum { GRID = 4001 };
    static double x[GRID], rms[GRID];
    solved s = solve(smooth());
    th_seed *seed = seed_of(&s, 25, 0);
    const th_seed_mode *m;
    th_error err = {0};
    int count, pockets;
    const th_pocket *pocket = th_flow_pockets(s.flow, &pockets);
    double time;

    (void)state;
    m = th_seed_modes(seed, &count);
    assert_int_equal(count, 2);
    for (int i = 0; i < GRID; i++)
        x[i] = pocket->left + (pocket->right - pocket->left) * i / (GRID - 1);
    for (int k = 0; k < 3; k++) {
        double largest = 0, mean[2] = {0, 0}, peak[2] = {0, 0};

        assert_int_equal(th_seed_contrast(seed, TH_SEED_AVERAGE, 40 * k, GRID, x, rms, &err),
                         TH_OK);
        for (int i = 0; i < GRID; i++)
            largest = fmax(largest, rms[i]);
        close_to("total", total(seed, 40 * k) / largest, 1, 3e-4); /* between two grids */
        for (int j = 0; j < 2; j++) {
            peak[j] = m[j].amplitude * exp(m[j].omega_im * 40 * k);
            mean[0] = fmax(mean[0], peak[j]);
            mean[1] = hypot(mean[1], peak[j]);
        }
        assert_true(largest >= mean[0] * (1 - 1e-3) && largest <= mean[1] * (1 + 1e-3));
    }
    assert_int_equal(th_seed_time(seed, 0.4, &time, &err), TH_OK);
    close_to("contrast at that time", total(seed, time), 0.4, 1e-12);
    assert_true(total(seed, time - 0.5) < 0.4);
    th_seed_destroy(seed);
    forget(&s);
}

/* ---- answers other than numbers ------------------------------------------------------------- */

/* A mode too slow to be projected is named, not guessed, and does not spoil the others; so does one
 * alone. */
static void test_too_slow(void **state)
{
    solved s = solve(oscillating());
    th_mode list[2] = {s.solution->mode[0], s.solution->mode[0]};
    th_solution both = *s.solution;
    solved changed = {s.flow, &both};
    const th_seed_mode *m;
    double plain, time;
    th_seed *seed = seed_of(&s, 1, 0);
    th_error err = {0};
    int count;

    (void)state;
    plain = total(seed, 10);
    th_seed_destroy(seed);
    list[1].omega_re = 0.2;
    list[1].omega_im = 1e-7;
    both.mode = list;
    both.count = 2;
    seed = seed_of(&changed, 1, 0);
    m = th_seed_modes(seed, &count);
    assert_int_equal(count, 2);
    assert_true(m[0].known && !m[1].known && m[1].amplitude == 0);
    close_to("the other", total(seed, 10) / plain, 1, 1e-12);
    th_seed_destroy(seed);
    both.mode = list + 1;
    both.count = 1;
    seed = seed_of(&changed, 1, 0);
    m = th_seed_modes(seed, &count);
    assert_true(count == 1 && !m->known);
    close_to("nothing known", total(seed, 10), 0, 0);
    assert_int_equal(th_seed_time(seed, 0.1, &time, &err), TH_ENONE);
    th_seed_destroy(seed);
    forget(&s);
}

/* A mode that grows by 1.4e-7 and does not oscillate is no trouble; nor are walls, where nothing is
 * padded, nor a stable flow, where there is nothing. */
static void test_kinds(void **state)
{
    solved s = solve(step_flow(0.75, 1, 0.3, 1, 1.1146036466253018));
    const double boxed[] = {0.75, 1, 0.3, 1.1, 5}, x = 0;
    const th_seed_mode *m;
    th_error err = {0};
    th_seed *seed;
    double rms;
    int count;

    (void)state;
    seed = seed_of(&s, 1, 0.2);
    m = th_seed_modes(seed, &count);
    assert_true(count == 1 && m->known && m->amplitude > 0);
    th_seed_destroy(seed);
    forget(&s);
    s = solve(flow_of("step", walls(6), boxed));
    seed = seed_of(&s, 1, 0.2);
    m = th_seed_modes(seed, &count);
    assert_true(count > 0 && m->known && m->error < 1e-4 * m->amplitude);
    th_seed_destroy(seed);
    forget(&s);
    s = solve(step_flow(0.75, 1, 0.3, 1, 0.9));
    seed = seed_of(&s, 1, 0.2);
    (void)th_seed_modes(seed, &count);
    assert_int_equal(count, 0);
    close_to("no mode", total(seed, 3), 0, 0);
    assert_int_equal(th_seed_contrast(seed, TH_SEED_INSTANT, 3, 1, &x, &rms, &err), TH_OK);
    close_to("no mode", rms, 0, 0);
    th_seed_destroy(seed);
    forget(&s);
}

static void test_errors(void **state)
{
    static const struct {
        th_seed_options options;
        const char *key, *text;
    } bad[] = {{{0, 0}, "density", "density = 0, want > 0"},
               {{-2, 0}, "density", "density = -2, want > 0"},
               {{INFINITY, 0}, "density", "density = inf, want > 0"},
               {{1, -0.5}, "temperature", "temperature = -0.5, want >= 0"}};
    solved s = solve(growing()), round = {0};
    const th_seed_options good = {1, 0};
    const double x[2] = {0, NAN};
    double time, place, rms[2];
    th_seed *seed = NULL;
    th_error err = {0};
    int count;

    (void)state;
    for (size_t i = 0; i < sizeof bad / sizeof *bad; i++) {
        assert_int_equal(th_seed_create(s.flow, s.solution, &bad[i].options, &seed, &err),
                         TH_EINVAL);
        assert_null(seed);
        assert_string_equal(err.key, bad[i].key);
        assert_string_equal(err.text, bad[i].text);
    }
    assert_int_equal(th_seed_create(s.flow, s.solution, &good, NULL, &err), TH_EINVAL);
    assert_int_equal(th_seed_create(s.flow, NULL, &good, &seed, &err), TH_EINVAL);
    round.flow = flow_of("tanh", ring(50, 8), (const double[]){0, 1.4, 0.6, 1.4, 0.5, 0.5, 10});
    assert_int_equal(th_seed_create(round.flow, s.solution, &good, &seed, &err), TH_EINVAL);
    assert_string_equal(err.text, "seeded growth: ends = ring, want open ends or walls");
    /* a frequency that is no mode of the flow */
    s.solution->mode[0].omega_im *= 1.3;
    assert_int_equal(th_seed_create(s.flow, s.solution, &good, &seed, &err), TH_EUNDECIDED);
    s.solution->mode[0].omega_im /= 1.3;
    seed = seed_of(&s, 1, 0);
    assert_int_equal(th_seed_total(seed, NAN, &time, &place, &err), TH_EINVAL);
    assert_int_equal(th_seed_total(seed, 1e5, &time, &place, &err), TH_EINVAL);
    assert_int_equal(th_seed_time(seed, 0, &time, &err), TH_EINVAL);
    assert_int_equal(th_seed_time(seed, NAN, &time, &err), TH_EINVAL);
    assert_int_equal(th_seed_contrast(seed, TH_SEED_AVERAGE, 0, 0, x, rms, &err), TH_EINVAL);
    assert_int_equal(th_seed_contrast(seed, TH_SEED_AVERAGE, 0, 2, x, rms, &err), TH_EINVAL);
    assert_int_equal(th_seed_contrast(seed, TH_SEED_AVERAGE, 1e5, 1, x, rms, &err), TH_EINVAL);
    (void)th_seed_modes(seed, &count);
    assert_int_equal(count, 1);
    th_seed_destroy(seed);
    th_seed_destroy(NULL);
    th_flow_destroy(round.flow);
    forget(&s);
}

/* Every allocation refused in turn. Same bytes when it succeeds. */
static void test_memory(void **state)
{
    const th_seed_options options = {3, 0.1};
    solved s = solve(growing());
    th_seed *seed = NULL, *again = NULL;
    const double x = 0.1;
    double a, b;
    th_error err = {0};
    int count;

    (void)state;
    for (long k = 0;; k++) {
        th_status st;

        refuse_from(k);
        st = th_seed_create(s.flow, s.solution, &options, &seed, &err);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_null(seed);
    }
    assert_int_equal(th_seed_contrast(seed, TH_SEED_INSTANT, 9, 1, &x, &a, &err), TH_OK);
    refuse_from(0);
    assert_int_equal(th_seed_contrast(seed, TH_SEED_INSTANT, 9, 1, &x, &b, &err), TH_ENOMEM);
    refuse_stop();
    again = seed_of(&s, 3, 0.1);
    assert_int_equal(th_seed_contrast(again, TH_SEED_INSTANT, 9, 1, &x, &b, &err), TH_OK);
    assert_memory_equal(&a, &b, sizeof a);
    assert_memory_equal(th_seed_modes(seed, &count), th_seed_modes(again, &count),
                        sizeof(th_seed_mode));
    th_seed_destroy(seed);
    th_seed_destroy(again);
    forget(&s);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_state),       cmocka_unit_test(test_constant_phase),
        cmocka_unit_test(test_refinement),  cmocka_unit_test(test_units),
        cmocka_unit_test(test_density),     cmocka_unit_test(test_temperature),
        cmocka_unit_test(test_one_growing), cmocka_unit_test(test_one_pair),
        cmocka_unit_test(test_sum),         cmocka_unit_test(test_too_slow),
        cmocka_unit_test(test_kinds),       cmocka_unit_test(test_errors),
        cmocka_unit_test(test_memory)};

    openblas_set_num_threads(1);
    return cmocka_run_group_tests(tests, NULL, NULL);
}
