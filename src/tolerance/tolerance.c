/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Samples of the keys that drift. In: a configuration, its modes, tolerances. Out: th_tolerance.
 * Calls point, sensitivity, parallel, workspace, estimate.c, GSL's Sobol sequence and random
 * numbers.
 *
 * u_k = frac(x_k + shift_k), value_k = base_k (1 + tolerance_k (2 u_k - 1)). Each sample is
 * answered by itself, starting from omega_j + Sum_k (d omega_j/d key_k) (value_k - base_k), so that
 * neither the order nor the threads matter. Symbols: k key, j growing mode of the base, u
 * coordinate, x point of the sequence. A further quantity of the samples: a member of th_sample,
 * set in keep(), an estimate in estimate.c. Proof: tests/test_tolerance.c,
 * tests/check_tolerance.py. */
#include "twinhorizon/tolerance.h"

#include <complex.h>
#include <gsl/gsl_heapsort.h>
#include <gsl/gsl_qrng.h>
#include <gsl/gsl_rng.h>
#include <math.h>
#include <stdatomic.h>
#include <string.h>

#include "alloc.h"
#include "parallel.h"
#include "tolerance/inside.h"
#include "twinhorizon/sensitivity.h"
#include "twinhorizon/workspace.h"

/* Each shift's own quantiles need some samples: 8 a shift. */
enum { SAMPLES_LEAST = 64 };
/* Range of th_solve_options.accuracy. */
static const double accuracy_least = 1e-12, accuracy_most = 1e-3;
/* A slope whose bar exceeds this part of it says nothing: next to a switch-on or a merger. A slope
 * is taken as zero to rounding, and known, when with its bar it moves the mode by less than this
 * part of omega. */
static const double slope_blur = 0.5, slope_none = 1e-6;

/* Growing mode of the base. */
typedef struct {
    double complex omega;
    double complex drift[TH_SHAPE_KEYS_MAX]; /* [draw.keys] d omega when the key moves by its
                                                tolerance; 0 where no slope is known */
    bool known[TH_SHAPE_KEYS_MAX];
    double amplitude; /* 0: unknown */
} base_mode;

typedef struct {
    const th_flow_setup *setup;
    const th_tolerance_options *options;
    th_draw draw;
    int modes;
    base_mode *mode;  /* [modes] the fastest first */
    bool asked;       /* for visibility, and an amplitude is known */
    atomic_long next; /* sample to be dealt */
} run;

/* ---- rules --------------------------------------------------------------------------------------
 */

static bool fixed_by_ring(const th_flow_setup *setup, int key)
{
    return setup->ends.kind == TH_ENDS_RING && setup->shape->key[key].fixed_by_ring;
}

static th_status check_keys(run *r, th_error *err)
{
    const th_flow_setup *setup = r->setup;
    th_draw *draw = &r->draw;

    for (int k = 0; k < setup->shape->keys; k++) {
        const th_shape_key *key = &setup->shape->key[k];
        const double tolerance = r->options->tolerance[k];

        if (tolerance == 0.0)
            continue;
        if (!(tolerance > 0.0 && tolerance < 1.0))
            return th_fail_key(err, TH_EINVAL, key->key,
                               "tolerance of %s = %.15g, want >= 0 and < 1", key->key, tolerance);
        if (!th_shape_key_number(key))
            return th_fail_key(err, TH_EINVAL, key->key, "%s is no number and has no tolerance",
                               key->key);
        if (fixed_by_ring(setup, k))
            return th_fail_key(err, TH_EINVAL, key->key,
                               "%s is fixed by the winding of the ring and has no tolerance",
                               key->key);
        if (!setup->given[k] || setup->value[k] == 0.0)
            return th_fail_key(err, TH_EINVAL, key->key,
                               "%s is %s, and its tolerance is relative to its value", key->key,
                               setup->given[k] ? "zero" : "not given");
        draw->key[draw->keys++] = k;
    }
    if (draw->keys == 0)
        return th_fail(err, TH_EINVAL, "tolerance: no key has one");
    return TH_OK;
}

static th_status check_visibility(const th_solution *solution, const th_tolerance_options *options,
                                  th_error *err)
{
    if (!(options->hold >= 0.0) || !isfinite(options->hold))
        return th_fail(err, TH_EINVAL, "tolerance: hold = %.15g, want a finite number >= 0",
                       options->hold);
    if (options->hold == 0.0)
        return TH_OK;
    if (!(options->threshold > 0.0) || !isfinite(options->threshold))
        return th_fail(err, TH_EINVAL, "tolerance: threshold = %.15g, want a finite number > 0",
                       options->threshold);
    if (options->amplitude == NULL)
        return th_fail(err, TH_EINVAL, "tolerance: a hold wants amplitudes");
    for (int i = 0; i < solution->count; i++)
        if (!(options->amplitude[i] >= 0.0) || !isfinite(options->amplitude[i]))
            return th_fail(err, TH_EINVAL,
                           "tolerance: amplitude %d = %.15g, want a finite number >= 0", i,
                           options->amplitude[i]);
    return TH_OK;
}

static th_status check(run *r, const th_solution *solution, th_error *err)
{
    const th_tolerance_options *options = r->options;
    th_status st;

    if (r->setup == NULL || r->setup->shape == NULL || solution == NULL || options == NULL ||
        options->tolerance == NULL)
        return th_fail(err, TH_EINVAL,
                       "tolerance: want a setup, its solution, and tolerances of its keys");
    r->draw.samples = options->samples == 0 ? TH_TOLERANCE_SAMPLES : options->samples;
    r->draw.each = r->draw.samples / TH_TOLERANCE_SHIFTS;
    if (r->draw.samples < SAMPLES_LEAST || r->draw.samples % TH_TOLERANCE_SHIFTS != 0)
        return th_fail(err, TH_EINVAL, "tolerance: samples = %d, want a multiple of %d and >= %d",
                       options->samples, TH_TOLERANCE_SHIFTS, SAMPLES_LEAST);
    if (!(options->accuracy >= accuracy_least && options->accuracy <= accuracy_most))
        return th_fail(err, TH_EINVAL, "accuracy = %.15g, want %g to %g", options->accuracy,
                       accuracy_least, accuracy_most);
    if (options->threads < 1)
        return th_fail(err, TH_EINVAL, "threads = %d, want >= 1", options->threads);
    st = check_visibility(solution, options, err);
    return st == TH_OK ? check_keys(r, err) : st;
}

/* ---- before the samples -------------------------------------------------------------------------
 */

/* Points of the sequence, the origin first (GSL leaves it out: with it every 2^m points fill the
 * cube evenly), and the shifts. */
static th_status draw_points(run *r, th_error *err)
{
    th_draw *draw = &r->draw;
    gsl_qrng *sequence = gsl_qrng_alloc(gsl_qrng_sobol, (unsigned)draw->keys);
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    th_status st = TH_EBUG;

    draw->point = th_alloc((size_t)draw->each, (size_t)draw->keys * sizeof *draw->point);
    draw->sample = th_alloc((size_t)draw->samples, sizeof *draw->sample);
    if (sequence == NULL || random == NULL || draw->point == NULL || draw->sample == NULL) {
        st = th_fail(err, TH_ENOMEM, "tolerance: %d samples", draw->samples);
        goto done;
    }
    for (int i = 1; i < draw->each; i++)
        (void)gsl_qrng_get(sequence, draw->point + (long)i * draw->keys);
    gsl_rng_set(random, r->options->seed);
    for (int s = 0; s < TH_TOLERANCE_SHIFTS; s++)
        for (int k = 0; k < draw->keys; k++)
            draw->shift[s][k] = gsl_rng_uniform(random);
    st = TH_OK;
done:
    if (sequence != NULL)
        gsl_qrng_free(sequence);
    if (random != NULL)
        gsl_rng_free(random);
    return st;
}

static th_status find_drift(const run *r, base_mode *mode, int k, double omega_top, th_error *err)
{
    const int key = r->draw.key[k];
    const double move = r->setup->value[key] * r->options->tolerance[key];
    th_slope slope;
    th_error why;
    const th_status st = th_sensitivity(r->setup, key, omega_top, creal(mode->omega),
                                        cimag(mode->omega), &slope, &why);
    double size;

    if (st == TH_ENOMEM || st == TH_EBUG) {
        if (err != NULL)
            *err = why;
        return st;
    }
    if (st != TH_OK)
        return TH_OK;
    size = hypot(slope.re, slope.im);
    mode->known[k] = slope.error <= slope_blur * size ||
                     (size + slope.error) * fabs(move) <= slope_none * cabs(mode->omega);
    if (mode->known[k])
        mode->drift[k] = (slope.re + I * slope.im) * move;
    return TH_OK;
}

static th_status find_drifts(run *r, const th_solution *solution, th_error *err)
{
    th_status st = TH_OK;

    r->mode = th_alloc((size_t)solution->count, sizeof *r->mode);
    if (r->mode == NULL)
        return th_fail(err, TH_ENOMEM, "tolerance: %d modes", solution->count);
    for (int i = 0; st == TH_OK && i < solution->count; i++) {
        const th_mode *from = &solution->mode[i];
        base_mode *mode = &r->mode[r->modes];

        if (from->label != TH_LABEL_UNSTABLE)
            continue;
        mode->omega = from->omega_re + I * from->omega_im;
        if (r->options->hold > 0.0)
            mode->amplitude = r->options->amplitude[i];
        r->asked = r->asked || mode->amplitude > 0.0;
        for (int k = 0; st == TH_OK && k < r->draw.keys; k++)
            st = find_drift(r, mode, k, solution->omega_top, err);
        r->modes++;
    }
    return st;
}

/* ---- samples ------------------------------------------------------------------------------------
 */

/* What one thread works with. */
typedef struct {
    th_workspace *workspace;
    th_point start; /* the base's growing modes, moved */
    th_point answer;
} hand;

static th_status hand_open(const run *r, hand *h, th_error *err)
{
    th_status st = th_workspace_create(&h->workspace, err);

    if (st != TH_OK)
        return st;
    h->start.workspace = h->answer.workspace = h->workspace;
    return th_point_resize(&h->start, r->modes, err);
}

static void hand_close(hand *h)
{
    th_point_clear(&h->start);
    th_point_clear(&h->answer);
    th_workspace_destroy(h->workspace);
}

/* Rms contrast after the hold, averaged over oscillations; each mode has the amplitude of the
 * base's that comes nearest. */
static bool seen(const run *r, const hand *h)
{
    double square = 0;

    for (int i = 0; i < h->answer.count; i++) {
        const th_point_mode *mode = &h->answer.mode[i];
        double nearest = HUGE_VAL, amplitude = 0;

        for (int j = 0; mode->label == TH_LABEL_UNSTABLE && j < r->modes; j++) {
            const double apart = hypot(mode->omega_re - h->start.mode[j].omega_re,
                                       mode->omega_im - h->start.mode[j].omega_im);

            if (apart < nearest) {
                nearest = apart;
                amplitude = r->mode[j].amplitude;
            }
        }
        if (amplitude > 0.0)
            square += amplitude * amplitude * exp(2.0 * mode->omega_im * r->options->hold);
    }
    return sqrt(square) >= r->options->threshold;
}

static void keep(const run *r, const hand *h, th_sample *out)
{
    const th_point *p = &h->answer;

    *out = (th_sample){.state = p->state, .unstable = p->unstable};
    for (int i = 0; i < p->count; i++)
        if (p->mode[i].label == TH_LABEL_UNSTABLE && p->mode[i].omega_im > out->growth) {
            out->growth = p->mode[i].omega_im;
            out->frequency = p->mode[i].omega_re;
            out->error = p->mode[i].omega_error;
        }
    out->visible = r->asked && seen(r, h);
}

/* The answer of one sample, into h->answer. */
static th_status answer(const run *r, int sample, hand *h, th_error *err)
{
    const th_point *const previous[2] = {&h->start, NULL};
    th_flow_setup setup = *r->setup;

    setup.workspace = h->workspace;
    for (int j = 0; j < r->modes; j++) {
        double complex omega = r->mode[j].omega;

        for (int k = 0; k < r->draw.keys; k++)
            omega += r->mode[j].drift[k] * (2.0 * th_draw_coordinate(&r->draw, sample, k) - 1.0);
        h->start.mode[j].omega_re = creal(omega);
        h->start.mode[j].omega_im = cimag(omega);
    }
    for (int k = 0; k < r->draw.keys; k++) {
        const int key = r->draw.key[k];

        setup.value[key] *= 1.0 + r->options->tolerance[key] *
                                      (2.0 * th_draw_coordinate(&r->draw, sample, k) - 1.0);
    }
    return th_point_follow(&setup, r->options->accuracy, previous, &h->answer, err);
}

/* One thread: takes samples until none is left. */
static th_status work(void *ctx, long item, th_error *err)
{
    run *r = ctx;
    hand h = {.workspace = NULL};
    th_status st = hand_open(r, &h, err);
    long sample;

    (void)item;
    while (st == TH_OK && (sample = atomic_fetch_add(&r->next, 1)) < r->draw.samples) {
        st = answer(r, (int)sample, &h, err);
        if (st == TH_OK)
            keep(r, &h, &r->draw.sample[sample]);
    }
    if (st != TH_OK)
        atomic_store(&r->next, r->draw.samples); /* the others need not go on */
    hand_close(&h);
    return st;
}

/* ---- after the samples --------------------------------------------------------------------------
 */

/* Why there is no result: the first sample without an answer, once more, for its text. */
static th_status explain(const run *r, th_error *err)
{
    hand h = {.workspace = NULL};
    int first = 0, lost = 0;
    th_status st;

    for (int i = r->draw.samples - 1; i >= 0; i--)
        if (r->draw.sample[i].state != TH_POINT_OK) {
            first = i;
            lost++;
        }
    st = hand_open(r, &h, err);
    if (st == TH_OK)
        st = answer(r, first, &h, err);
    if (st == TH_OK)
        st = th_fail(err, TH_ENONE, "tolerance: %d of %d samples have no answer, the first: %s",
                     lost, r->draw.samples, h.answer.message);
    hand_close(&h);
    return st;
}

static int by_weight(const void *a, const void *b)
{
    const th_tolerance_key *x = a, *y = b;

    if (x->share != y->share)
        return x->share > y->share ? -1 : 1;
    if (fabs(x->slope) != fabs(y->slope))
        return fabs(x->slope) > fabs(y->slope) ? -1 : 1;
    return x->key - y->key;
}

static th_status conclude(const run *r, th_tolerance *out, th_error *err)
{
    th_status st;

    out->key = th_alloc((size_t)r->draw.keys, sizeof *out->key);
    if (out->key == NULL)
        return th_fail(err, TH_ENOMEM, "tolerance: %d keys", r->draw.keys);
    out->keys = r->draw.keys;
    out->visible_known = r->asked;
    for (int k = 0; k < out->keys; k++) {
        out->key[k].key = r->draw.key[k];
        out->key[k].slope_known = r->modes > 0 && r->mode[0].known[k];
        out->key[k].slope = r->modes > 0 ? cimag(r->mode[0].drift[k]) : 0.0;
    }
    st = th_draw_estimate(&r->draw, out, err);
    if (st == TH_ENONE)
        st = explain(r, err);
    if (st == TH_OK)
        gsl_heapsort(out->key, (size_t)out->keys, sizeof *out->key, by_weight);
    return st;
}

th_status th_tolerance_sample(const th_flow_setup *setup, const th_solution *solution,
                              const th_tolerance_options *options, th_tolerance *out, th_error *err)
{
    run r = {.setup = setup, .options = options};
    th_status st;

    if (out == NULL)
        return th_fail(err, TH_EINVAL, "tolerance: want a place for the result");
    *out = (th_tolerance){.samples = 0};
    st = check(&r, solution, err);
    if (st != TH_OK)
        return st;
    st = draw_points(&r, err);
    if (st == TH_OK)
        st = find_drifts(&r, solution, err);
    atomic_init(&r.next, 0);
    if (st == TH_OK)
        st = th_parallel(options->threads, options->threads, work, &r, NULL, err);
    if (st == TH_OK)
        st = conclude(&r, out, err);
    if (st != TH_OK)
        th_tolerance_clear(out);
    free(r.mode);
    free(r.draw.point);
    free(r.draw.sample);
    return st;
}

void th_tolerance_clear(th_tolerance *tolerance)
{
    if (tolerance == NULL)
        return;
    free(tolerance->key);
    *tolerance = (th_tolerance){.samples = 0};
}
