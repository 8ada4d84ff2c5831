/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What `plan` computes, part by part. A new part is a member of cli_findings, a function here, one
 * of plan_text.c and one of plan_table.c. */
#include "plan.h"

#include <gsl/gsl_math.h>
#include <stdlib.h>
#include <unistd.h>

/* Ranges of lengths unless told: from half to twice the base value. */
static const double range_low = 0.5, range_high = 2.0;
/* Without a hold contrasts are shown over this many growth times of the fastest mode. */
static const double growth_times = 6.0;
/* A level and a mode belong together when they are closer than this part of the distance to the
 * next level: measured, frequencies of levels that mean anything are good to a tenth. */
static const double same_level = 0.5;

/* A part that has no answer says why and the plan goes on; shortage of memory and bugs end it. */
static th_status settle(th_status st, const th_error *why, cli_part *part, th_error *err)
{
    part->known = st == TH_OK;
    if (st == TH_OK)
        return TH_OK;
    (void)snprintf(part->why, sizeof part->why, "%.*s", (int)sizeof part->why - 1, why->text);
    return st == TH_ENOMEM || st == TH_EBUG ? th_fail(err, st, "%s", why->text) : TH_OK;
}

static void missing(cli_part *part, const char *why)
{
    part->known = false;
    (void)snprintf(part->why, sizeof part->why, "%s", why);
}

/* On a terminal: what is being computed. */
static void tell(const char *what)
{
    if (isatty(STDERR_FILENO))
        fprintf(stderr, "\r\033[Kplan: %s", what);
    if (isatty(STDERR_FILENO) && *what == '\0')
        fputs("\r\033[K", stderr);
}

/* ---- modes ---------------------------------------------------------------------------------- */

static th_status find_modes(cli_findings *p, th_error *err)
{
    const th_solve_options options = {.accuracy = p->c->accuracy};
    const th_plan_request *ask = &p->c->plan;
    th_status st = TH_OK;

    while (p->growing < p->solution->count &&
           p->solution->mode[p->growing].label == TH_LABEL_UNSTABLE)
        p->growing++; /* growing ones come first */
    p->mode = calloc((size_t)p->growing + 1, sizeof *p->mode);
    if (p->mode == NULL)
        return th_fail(err, TH_ENOMEM, "plan: %d modes", p->growing);
    for (int i = 0; st == TH_OK && i < p->growing; i++) {
        cli_plan_mode *m = &p->mode[i];
        th_error why = {0};

        m->mode = &p->solution->mode[i];
        st = settle(th_pattern_find(p->flow, &options, m->mode->omega_re, m->mode->omega_im,
                                    &m->pattern, &why),
                    &why, &m->part, err);
        if (st == TH_OK && m->part.known && ask->hold_time > 0.0)
            m->tell = th_pattern_judge(&m->pattern, m->mode->omega_re, m->mode->omega_im,
                                       ask->hold_time, ask->resolution);
    }
    return st;
}

/* ---- seeds ---------------------------------------------------------------------------------- */

const cli_plan_seed *cli_plan_main_seed(const cli_findings *plan)
{
    return plan->c->plan.temperature > 0.0 ? &plan->thermal : &plan->vacuum;
}

static th_status find_seed(const cli_findings *p, double temperature, cli_plan_seed *s,
                           th_error *err)
{
    const th_seed_options options = {.density = p->c->setup.density, .temperature = temperature};
    const th_seed_mode *mode;
    th_error why = {0};
    double place;
    int count;
    th_status st;

    s->temperature = temperature;
    if (p->growing == 0) {
        missing(&s->part, p->solution->verdict == TH_VERDICT_UNDECIDED ? "no growing mode was found"
                                                                       : "nothing grows");
        return TH_OK;
    }
    if (!p->c->density_given) {
        missing(&s->part, "[flow] density is not given");
        return TH_OK;
    }
    st =
        settle(th_seed_create(p->flow, p->solution, &options, &s->seed, &why), &why, &s->part, err);
    if (st != TH_OK || !s->part.known)
        return st;
    mode = th_seed_modes(s->seed, &count);
    for (int i = 0; i < count; i++)
        s->unknown += !mode[i].known;
    if (s->unknown == count) {
        missing(&s->part, "every growing mode is too slow to be projected");
        return TH_OK;
    }
    for (int i = 0; i < CLI_PLAN_TIMES; i++)
        if (th_seed_total(s->seed, p->time[i], &s->contrast[i], &place, NULL) != TH_OK)
            s->contrast[i] = -1.0;
    s->visible = th_seed_time(s->seed, p->c->plan.visibility, &s->visible_time, NULL) == TH_OK;
    s->saturates = th_seed_time(s->seed, 1.0, &s->linear_time, NULL) == TH_OK;
    return TH_OK;
}

static th_status find_seeds(cli_findings *p, th_error *err)
{
    const th_plan_request *ask = &p->c->plan;
    const double span = ask->hold_time > 0.0  ? ask->hold_time
                        : ask->lifetime > 0.0 ? ask->lifetime
                        : p->growing > 0      ? growth_times / p->mode[0].mode->omega_im
                                              : 1.0;
    th_status st;

    for (int i = 0; i < CLI_PLAN_TIMES; i++)
        p->time[i] = span * i / (CLI_PLAN_TIMES - 1);
    st = find_seed(p, 0.0, &p->vacuum, err);
    if (st == TH_OK && ask->temperature > 0.0)
        st = find_seed(p, ask->temperature, &p->thermal, err);
    else if (st == TH_OK)
        missing(&p->thermal.part, "[plan] temperature is not given");
    return st;
}

/* ---- lengths -------------------------------------------------------------------------------- */

static th_status track(const cli_findings *p, double from, double to, int threads, th_track **out,
                       th_error *why)
{
    const th_track_options options = {.key = th_shape_length(p->c->setup.shape),
                                      .from = fmin(from, to),
                                      .to = fmax(from, to),
                                      .accuracy = p->c->accuracy,
                                      .threads = threads};

    return th_track_create(&p->c->setup, &options, out, why);
}

static th_status find_ramp(cli_findings *p, int threads, th_error *err)
{
    const th_plan_request *ask = &p->c->plan;
    th_track *line = NULL;
    th_error why = {0};
    th_status st;

    if (!ask->has_ramp) {
        missing(&p->ramp_part, "[plan] gap_ramp is not given");
        return TH_OK;
    }
    st = track(p, ask->ramp_from, ask->ramp_to, threads, &line, &why);
    if (st == TH_OK)
        st = th_track_ramp(line, ask->ramp_time, &p->ramp, &why);
    th_track_destroy(line);
    return settle(st, &why, &p->ramp_part, err);
}

/* The range of lengths: as asked, or of the axis over the length, or about the base value. */
static void choose_range(cli_findings *p)
{
    const th_case *c = p->c;
    const int key = th_shape_length(c->setup.shape);
    double from = HUGE_VAL, to = 0.0;

    for (int a = 0; a < c->axes; a++)
        for (int i = 0; c->axis[a].key == key && i < c->axis[a].count; i++) {
            from = fmin(from, c->axis[a].value[i]);
            to = fmax(to, c->axis[a].value[i]);
        }
    if (c->plan.has_range) {
        p->range_from = c->plan.range_from;
        p->range_to = c->plan.range_to;
    } else if (from < to) {
        p->range_from = from;
        p->range_to = to;
    } else {
        p->range_from = range_low * c->setup.value[key];
        p->range_to = range_high * c->setup.value[key];
    }
}

static th_status find_best(cli_findings *p, int threads, th_error *err)
{
    const int key = th_shape_length(p->c->setup.shape);
    th_error why = {0};
    th_status st;

    if (key < 0 || (!(p->c->setup.value[key] > 0.0) && !p->c->plan.has_range)) {
        missing(&p->best_part, "the case has no length of a pocket");
        return TH_OK;
    }
    choose_range(p);
    st = track(p, p->range_from, p->range_to, threads, &p->line, &why);
    if (st == TH_OK)
        st = th_track_best_find(p->line, &p->best, &why);
    return settle(st, &why, &p->best_part, err);
}

/* ---- tolerances ----------------------------------------------------------------------------- */

/* Contrast of each growing mode at time 0, 0 where it is not known. */
static void amplitudes(const cli_findings *p, double *amplitude)
{
    const cli_plan_seed *seed = cli_plan_main_seed(p);
    const th_seed_mode *mode;
    int count;

    if (!seed->part.known)
        return;
    mode = th_seed_modes(seed->seed, &count);
    for (int i = 0; i < count; i++)
        if (mode[i].known)
            amplitude[mode[i].mode] = mode[i].amplitude;
}

static th_status find_tolerance(cli_findings *p, int threads, th_error *err)
{
    const th_plan_request *ask = &p->c->plan;
    th_tolerance_options options = {.tolerance = ask->tolerance,
                                    .samples = ask->samples,
                                    .seed = (unsigned long)ask->seed,
                                    .accuracy = p->c->accuracy,
                                    .threads = threads};
    const cli_plan_seed *seed = cli_plan_main_seed(p);
    double *amplitude = NULL;
    bool any = false;
    th_error why = {0};
    th_status st;

    for (int i = 0; i < p->c->setup.shape->keys; i++)
        any = any || ask->tolerance[i] > 0.0;
    if (!any) {
        missing(&p->tolerance_part, "no [plan] tolerance.KEY is given");
        return TH_OK;
    }
    amplitude = calloc((size_t)p->solution->count + 1, sizeof *amplitude);
    if (amplitude == NULL)
        return th_fail(err, TH_ENOMEM, "plan: %d amplitudes", p->solution->count);
    amplitudes(p, amplitude);
    /* where the seed is already visible, visible growth is no question */
    if (seed->part.known && seed->visible_time > 0.0 && ask->hold_time > 0.0) {
        options.hold = ask->hold_time;
        options.threshold = ask->visibility;
        options.amplitude = amplitude;
    }
    st = th_tolerance_sample(&p->c->setup, p->solution, &options, &p->tolerance, &why);
    free(amplitude);
    return settle(st, &why, &p->tolerance_part, err);
}

/* ---- semiclassics --------------------------------------------------------------------------- */

/* The better of the two frequencies of a level. */
double cli_plan_level(const th_semiclassical_mode *level)
{
    return level->omega_uniform > 0.0 ? level->omega_uniform : level->omega;
}

/* The growing mode next to a level, if it is clearly next to it. */
static const th_mode *next_to(const cli_findings *p, const th_semiclassics *s, int level)
{
    const double omega = cli_plan_level(&s->mode[level]);
    const double above = level > 0 ? cli_plan_level(&s->mode[level - 1]) : s->omega_max;
    const double below = level + 1 < s->count ? cli_plan_level(&s->mode[level + 1]) : 0.0;
    const th_mode *best = NULL;

    for (int i = 0; i < p->growing; i++) {
        const th_mode *m = p->mode[i].mode;
        const double apart = m->omega_re - omega;
        const double room = same_level * (apart > 0.0 ? above - omega : omega - below);

        if (m->omega_re > 0.0 && fabs(apart) <= room &&
            (best == NULL || fabs(apart) < fabs(best->omega_re - omega)))
            best = m;
    }
    return best;
}

static th_status find_semiclassics(cli_findings *p, th_error *err)
{
    th_status st = TH_OK;

    (void)th_flow_pockets(p->flow, &p->pockets);
    p->pocket = calloc((size_t)p->pockets + 1, sizeof *p->pocket);
    if (p->pocket == NULL)
        return th_fail(err, TH_ENOMEM, "plan: %d pockets", p->pockets);
    for (int i = 0; st == TH_OK && i < p->pockets; i++) {
        cli_plan_pocket *at = &p->pocket[i];
        th_error why = {0};

        st = settle(th_semiclassics_find(p->flow, i, &at->answer, &why), &why, &at->part, err);
        if (st != TH_OK || !at->part.known)
            continue;
        at->exact = calloc((size_t)at->answer.count + 1, sizeof *at->exact);
        if (at->exact == NULL)
            return th_fail(err, TH_ENOMEM, "plan: %d levels", at->answer.count);
        for (int k = 0; k < at->answer.count; k++)
            at->exact[k] = next_to(p, &at->answer, k);
    }
    return st;
}

/* ---- validity ------------------------------------------------------------------------------- */

static th_status find_validity(cli_findings *p, th_error *err)
{
    const th_plan_request *ask = &p->c->plan;
    const cli_plan_seed *seed = cli_plan_main_seed(p);
    const double end = seed->contrast[CLI_PLAN_TIMES - 1];
    const th_experiment experiment = {
        .density = p->c->density_given ? p->c->setup.density : 0.0,
        .transverse = ask->transverse,
        .temperature = ask->temperature,
        .hold = ask->hold_time,
        /* one loss told in two ways, not two losses */
        .loss_rate = fmax(p->c->loss_rate, ask->lifetime > 0.0 ? 1.0 / ask->lifetime : 0.0),
        .resolution = ask->resolution,
        .contrast = !seed->part.known || ask->hold_time == 0.0 ? 0.0
                    : end < 0.0                                ? 1e300
                                                               : end};

    return th_validity_check(p->flow, &experiment, p->check, err);
}

/* ---- all of it ------------------------------------------------------------------------------ */

th_status cli_plan_find(const th_case *c, int threads, cli_findings *plan, th_error *err)
{
    th_status st;

    *plan = (cli_findings){.c = c};
    tell("modes");
    st = th_flow_build(&c->setup, &plan->flow, err);
    if (st == TH_OK)
        st = th_solve(plan->flow, &(th_solve_options){.accuracy = c->accuracy}, &plan->solution,
                      err);
    if (st == TH_OK)
        st = find_modes(plan, err);
    tell("seeds");
    if (st == TH_OK)
        st = find_seeds(plan, err);
    tell("ramp");
    if (st == TH_OK)
        st = find_ramp(plan, threads, err);
    tell("lengths");
    if (st == TH_OK)
        st = find_best(plan, threads, err);
    tell("tolerances");
    if (st == TH_OK)
        st = find_tolerance(plan, threads, err);
    if (st == TH_OK)
        st = find_semiclassics(plan, err);
    if (st == TH_OK)
        st = find_validity(plan, err);
    tell("");
    return st;
}

void cli_plan_clear(cli_findings *plan)
{
    for (int i = 0; plan->pocket != NULL && i < plan->pockets; i++) {
        th_semiclassics_clear(&plan->pocket[i].answer);
        free(plan->pocket[i].exact);
    }
    free(plan->pocket);
    th_tolerance_clear(&plan->tolerance);
    th_track_best_clear(&plan->best);
    th_track_destroy(plan->line);
    th_ramp_clear(&plan->ramp);
    th_seed_destroy(plan->vacuum.seed);
    th_seed_destroy(plan->thermal.seed);
    free(plan->mode);
    th_solution_destroy(plan->solution);
    th_flow_destroy(plan->flow);
    *plan = (cli_findings){0};
}
