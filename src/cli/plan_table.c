/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A plan as a table: one number a row, with its unit. A new number is one put_... here. */
#include <gsl/gsl_math.h>

#include "plan.h"

typedef struct {
    const cli_findings *p;
    th_table *table;
    th_error *err;
    th_status st;
    const char *topic;
    char item[32];
} writer;

static void row(writer *w, const char *quantity, double value, double error, bool has_error,
                th_dimension dimension, const char *text)
{
    const double factor = th_scale_factor(&w->p->c->scale, dimension);
    const char *unit = cli_unit(w->p->c, dimension);

    if (w->st != TH_OK)
        return;
    th_table_put_text(w->table, w->topic);
    th_table_put_text(w->table, w->item);
    th_table_put_text(w->table, quantity);
    if (text != NULL)
        th_table_put_nothing(w->table);
    else
        th_table_put_exact(w->table, value * factor);
    if (has_error)
        th_table_put_number(w->table, error * factor);
    else
        th_table_put_nothing(w->table);
    th_table_put_text(w->table, text != NULL ? "" : unit != NULL ? unit : "1");
    th_table_put_text(w->table, text != NULL ? text : "");
    w->st = th_table_end_row(w->table, w->err);
}

static void put(writer *w, const char *quantity, double value, th_dimension dimension)
{
    row(w, quantity, value, 0.0, false, dimension, NULL);
}

static void put_with(writer *w, const char *quantity, double value, double error,
                     th_dimension dimension)
{
    row(w, quantity, value, error, true, dimension, NULL);
}

static void put_word(writer *w, const char *quantity, const char *text)
{
    row(w, quantity, 0.0, 0.0, false, TH_DIM_NUMBER, text);
}

static void put_yes(writer *w, const char *quantity, bool yes)
{
    put(w, quantity, yes ? 1.0 : 0.0, TH_DIM_NUMBER);
}

static void item(writer *w, const char *topic, int number)
{
    w->topic = topic;
    (void)snprintf(w->item, sizeof w->item, "%d", number);
}

static void named(writer *w, const char *topic, const char *name)
{
    w->topic = topic;
    (void)snprintf(w->item, sizeof w->item, "%s", name);
}

/* Whether a part has an answer; else its reason is the row, of the item that is set. */
static bool answered(writer *w, const char *topic, const cli_part *part)
{
    if (!part->known) {
        w->topic = topic;
        put_word(w, "not_known", part->why);
    }
    return part->known;
}

static void put_modes(writer *w)
{
    const cli_findings *p = w->p;
    const th_plan_request *ask = &p->c->plan;

    for (int i = 0; i < p->growing; i++) {
        const cli_plan_mode *m = &p->mode[i];
        const th_mode *o = m->mode;
        const th_pattern_side *side[2] = {&m->pattern.upstream, &m->pattern.downstream};

        item(w, "mode", i + 1);
        put_with(w, "omega_re", o->omega_re, o->omega_error, TH_DIM_RATE);
        put_with(w, "omega_im", o->omega_im, o->omega_error, TH_DIM_RATE);
        put_with(w, "growth_time", 1.0 / o->omega_im, o->omega_error / (o->omega_im * o->omega_im),
                 TH_DIM_TIME);
        if (ask->hold_time > 0.0)
            put_with(w, "efoldings_hold", o->omega_im * ask->hold_time,
                     o->omega_error * ask->hold_time, TH_DIM_NUMBER);
        if (ask->lifetime > 0.0)
            put_with(w, "efoldings_lifetime", o->omega_im * ask->lifetime,
                     o->omega_error * ask->lifetime, TH_DIM_NUMBER);
        if (!answered(w, "mode", &m->part))
            continue;
        item(w, "mode", i + 1);
        if (fabs(m->pattern.wavenumber) >= m->pattern.resolution) {
            put(w, "period", 2.0 * M_PI / fabs(m->pattern.wavenumber), TH_DIM_LENGTH);
            put(w, "pattern_speed", o->omega_re / m->pattern.wavenumber, TH_DIM_SPEED);
        }
        put(w, "pocket_length", 2.0 * M_PI / m->pattern.resolution, TH_DIM_LENGTH);
        put(w, "single_wave", m->pattern.share, TH_DIM_NUMBER);
        put(w, "undulation_period", 2.0 * M_PI / m->pattern.undulation, TH_DIM_LENGTH);
        put(w, "loudest_at", m->pattern.place, TH_DIM_LENGTH);
        for (int k = 0; k < 2; k++) {
            if (side[k]->known && side[k]->wavenumber != 0.0)
                put(w, k == 0 ? "period_upstream" : "period_downstream",
                    2.0 * M_PI / fabs(side[k]->wavenumber), TH_DIM_LENGTH);
            if (side[k]->known)
                put(w, k == 0 ? "decay_upstream" : "decay_downstream", side[k]->decay,
                    TH_DIM_LENGTH);
            put(w, k == 0 ? "loudness_upstream" : "loudness_downstream", side[k]->loudness,
                TH_DIM_NUMBER);
        }
        if (ask->hold_time > 0.0) {
            put_yes(w, "told_by_frequency", m->tell.frequency);
            put_yes(w, "told_by_wavenumber", m->tell.wavenumber);
            put_yes(w, "told_by_growth", m->tell.growth);
            put_yes(w, "imaged", m->tell.imaged);
        }
    }
}

static void put_seed(writer *w, const char *name, const cli_plan_seed *s)
{
    const cli_findings *p = w->p;
    const th_seed_mode *mode;
    int count;

    named(w, name, "");
    if (p->growing == 0 || !answered(w, name, &s->part))
        return;
    put(w, "visibility", p->c->plan.visibility, TH_DIM_NUMBER);
    if (s->visible)
        put(w, "visible_after", s->visible_time, TH_DIM_TIME);
    if (s->saturates)
        put(w, "linear_until", s->linear_time, TH_DIM_TIME);
    put(w, "modes_left_out", s->unknown, TH_DIM_NUMBER);
    for (int i = 0; i < CLI_PLAN_TIMES; i++) {
        item(w, name, i);
        put(w, "time", p->time[i], TH_DIM_TIME);
        if (s->contrast[i] >= 0.0)
            put(w, "contrast", s->contrast[i], TH_DIM_NUMBER);
    }
    mode = th_seed_modes(s->seed, &count);
    for (int i = 0; i < count; i++) {
        char both[32];

        (void)snprintf(both, sizeof both, "mode %d", mode[i].mode + 1);
        named(w, name, both);
        if (mode[i].known)
            put_with(w, "amplitude", mode[i].amplitude, mode[i].error, TH_DIM_NUMBER);
    }
}

static void put_ramp(writer *w, th_dimension length)
{
    const th_ramp *r = &w->p->ramp;

    named(w, "ramp", "");
    if (!answered(w, "ramp", &w->p->ramp_part))
        return;
    put_with(w, "efoldings_most", r->best, r->best_error, TH_DIM_NUMBER);
    put(w, "not_answered", r->unanswered, TH_DIM_NUMBER);
    if (r->count > 0) {
        put(w, "dominant_length", r->dominant, length);
        put(w, "adiabatic_worst", r->worst, TH_DIM_NUMBER);
        put(w, "adiabatic_worst_length", r->worst_length, length);
    }
    for (int i = 0; i < r->count; i++) {
        const th_track_gain *g = &r->gain[i];

        item(w, "ramp", g->branch + 1);
        put_with(w, "efoldings", g->gain, g->error, TH_DIM_NUMBER);
        put(w, "from", g->from, length);
        put(w, "to", g->to, length);
        put(w, "fastest_at", g->dominant, length);
        put(w, "growth", g->growth, TH_DIM_RATE);
        put(w, "doubtful", g->doubtful, TH_DIM_NUMBER);
    }
}

static void put_best(writer *w, th_dimension length)
{
    const th_track_best *b = &w->p->best;

    named(w, "length", "");
    if (!answered(w, "length", &w->p->best_part))
        return;
    put(w, "from", w->p->range_from, length);
    put(w, "to", w->p->range_to, length);
    if (b->grows) {
        put_with(w, "best", b->length, b->error, length);
        put_with(w, "omega_re", b->omega_re, b->omega_error, TH_DIM_RATE);
        put_with(w, "omega_im", b->omega_im, b->omega_error, TH_DIM_RATE);
        put_yes(w, "at_end", b->at_end);
    }
    for (int i = 0; i < b->clean_count; i++) {
        item(w, "single_mode", i + 1);
        put(w, "from", b->clean[i].from, length);
        put(w, "to", b->clean[i].to, length);
        put(w, "fastest_at", b->clean[i].fastest, length);
        put(w, "growth", b->clean[i].growth, TH_DIM_RATE);
    }
}

static void put_estimate(writer *w, const char *quantity, const th_estimate *e,
                         th_dimension dimension)
{
    put_with(w, quantity, e->value, e->error, dimension);
}

static void put_tolerance(writer *w)
{
    const th_tolerance *t = &w->p->tolerance;

    named(w, "tolerance", "");
    if (!answered(w, "tolerance", &w->p->tolerance_part))
        return;
    put(w, "samples", t->samples, TH_DIM_NUMBER);
    put(w, "failed", t->failed, TH_DIM_NUMBER);
    put(w, "undecided", t->undecided, TH_DIM_NUMBER);
    put(w, "unstable_least", t->unstable_least, TH_DIM_NUMBER);
    put(w, "unstable_most", t->unstable_most, TH_DIM_NUMBER);
    put_estimate(w, "growing", &t->growing, TH_DIM_NUMBER);
    if (t->visible_known)
        put_estimate(w, "visible", &t->visible, TH_DIM_NUMBER);
    put_estimate(w, "growth_05", &t->growth.low, TH_DIM_RATE);
    put_estimate(w, "growth_50", &t->growth.median, TH_DIM_RATE);
    put_estimate(w, "growth_95", &t->growth.high, TH_DIM_RATE);
    if (t->frequency_known) {
        put_estimate(w, "omega_re_05", &t->frequency.low, TH_DIM_RATE);
        put_estimate(w, "omega_re_50", &t->frequency.median, TH_DIM_RATE);
        put_estimate(w, "omega_re_95", &t->frequency.high, TH_DIM_RATE);
    }
    for (int i = 0; i < t->keys; i++) {
        const th_tolerance_key *k = &t->key[i];

        named(w, "tolerance", w->p->c->setup.shape->key[k->key].key);
        put_with(w, "share", k->share, k->share_error, TH_DIM_NUMBER);
        if (k->slope_known)
            put(w, "growth_change", k->slope, TH_DIM_RATE);
    }
}

static void put_semiclassics(writer *w)
{
    for (int i = 0; i < w->p->pockets; i++) {
        const cli_plan_pocket *at = &w->p->pocket[i];
        const th_semiclassics *s = &at->answer;

        item(w, "wkb", i + 1);
        if (!answered(w, "wkb", &at->part))
            continue;
        put(w, "levels", s->levels, TH_DIM_NUMBER);
        put(w, "kappa_over_band", s->thermal, TH_DIM_NUMBER);
        put(w, "kappa_over_sound_squared", s->steepness, TH_DIM_NUMBER);
        put(w, "impedance", s->impedance, TH_DIM_NUMBER);
        put(w, "roughness", s->roughness, TH_DIM_NUMBER);
        for (int k = 0; k < s->count; k++) {
            const th_semiclassical_mode *m = &s->mode[k];
            char both[32];

            (void)snprintf(both, sizeof both, "%d/%d", i + 1, m->level);
            named(w, "wkb", both);
            put(w, "omega_re", m->omega, TH_DIM_RATE);
            if (m->omega_uniform > 0.0)
                put(w, "omega_re_uniform", m->omega_uniform, TH_DIM_RATE);
            put(w, "round_trip", m->round_trip, TH_DIM_TIME);
            put(w, "omega_im", m->growth, TH_DIM_RATE);
            put(w, "omega_im_least", m->growth_low, TH_DIM_RATE);
            put(w, "omega_im_most", m->growth_high, TH_DIM_RATE);
            if (at->exact[k] != NULL) {
                put(w, "exact_omega_re", at->exact[k]->omega_re, TH_DIM_RATE);
                put(w, "exact_omega_im", at->exact[k]->omega_im, TH_DIM_RATE);
            }
        }
    }
}

static void put_validity(writer *w)
{
    for (int i = 0; i < TH_CHECKS; i++) {
        const th_check *k = &w->p->check[i];

        named(w, "validity", k->name);
        if (!k->known) {
            put_word(w, "not_known", k->title);
            continue;
        }
        put(w, "value", k->value, TH_DIM_NUMBER);
        put(w, "limit", k->limit, TH_DIM_NUMBER);
        put_yes(w, "holds", k->holds);
        if (!k->holds)
            put_word(w, "fails", k->fails);
    }
}

th_status cli_plan_write(const cli_findings *plan, const char *path, th_error *err)
{
    static const th_column column[] = {
        {.name = "topic",
         .title = "part of the plan",
         .datatype = "string",
         .format = "mode|vacuum|thermal|ramp|length|single_mode|tolerance|wkb|validity"},
        {.name = "item",
         .title = "what of it: a mode, branch, key, level, check, time",
         .datatype = "string"},
        {.name = "quantity", .title = "name of the number", .datatype = "string"},
        {.name = "value", .title = "the number, in the unit of its row", .datatype = "number"},
        {.name = "error",
         .title = "its error bar; of samples the standard error",
         .datatype = "number"},
        {.name = "unit",
         .title = "unit of value and error",
         .datatype = "string",
         .description = "1 for plain numbers and in reduced cases; angular frequencies are 1/s"},
        {.name = "text", .title = "words where there is no number", .datatype = "string"},
    };
    const th_shape *shape = plan->c->setup.shape;
    const int key = th_shape_length(shape);
    const th_dimension length = key >= 0 ? shape->key[key].dimension : TH_DIM_LENGTH;
    writer w = {.p = plan, .err = err};

    w.st = cli_table(path, column, sizeof column / sizeof column[0], "plan of an experiment",
                     plan->c, &w.table, err);
    put_modes(&w);
    put_seed(&w, "vacuum", &plan->vacuum);
    put_seed(&w, "thermal", &plan->thermal);
    put_ramp(&w, length);
    put_best(&w, length);
    put_tolerance(&w);
    put_semiclassics(&w);
    put_validity(&w);
    if (w.st == TH_OK)
        w.st = th_table_finish(w.table, err);
    th_table_destroy(w.table);
    return w.st;
}
