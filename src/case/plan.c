/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * [plan]: what is asked about an experiment.
 * In: entries of [plan], the scale and the shape of the case. Out: th_case.plan in reduced units.
 * Calls value, blame, units, status. Symbols: none.
 * To add a quantity: a row in keys.h, a member of th_plan_request, and a row in `quantity` (> 0)
 * or `whole` (counts).
 * Proved by tests/test_case.c and tests/broken. */
#include "inside.h"

#include "../units/text.h"

#include <limits.h>
#include <math.h>
#include <stddef.h>
#include <string.h>

/* Keys that hold one quantity > 0, and where it goes. */
static const struct {
    th_case_key_id id;
    size_t member;
} quantity[] = {
    {TH_KEY_HOLD_TIME, offsetof(th_plan_request, hold_time)},
    {TH_KEY_LIFETIME, offsetof(th_plan_request, lifetime)},
    {TH_KEY_TEMPERATURE, offsetof(th_plan_request, temperature)},
    {TH_KEY_RESOLUTION, offsetof(th_plan_request, resolution)},
    {TH_KEY_TRANSVERSE, offsetof(th_plan_request, transverse)},
};

/* Counts, and what they may be. */
static const struct {
    th_case_key_id id;
    size_t member;
    int least, most, step;
} whole[] = {
    /* fewer samples say nothing about 5 % of them, more take hours */
    {TH_KEY_SAMPLES, offsetof(th_plan_request, samples), 64, 1000000, 8},
    {TH_KEY_SEED, offsetof(th_plan_request, seed), 0, INT_MAX, 1},
};

static th_status read_whole(const th_case_source *source, size_t i, int *value, th_error *err)
{
    const th_case_entry *entry = th_case_source_key(source, whole[i].id);
    double number = 0.0;
    th_error why;

    if (entry == NULL)
        return TH_OK;
    if (th_number_read(entry->value, &number, &why) != TH_OK)
        return th_case_blame(err, source, entry, "%s", why.text);
    if (!(number >= whole[i].least && number <= whole[i].most && number == floor(number) &&
          (int)number % whole[i].step == 0))
        return whole[i].step > 1
                   ? th_case_blame(err, source, entry, "%s must be a multiple of %d from %d to %d",
                                   entry->key, whole[i].step, whole[i].least, whole[i].most)
                   : th_case_blame(err, source, entry, "%s must be a whole number from %d to %d",
                                   entry->key, whole[i].least, whole[i].most);
    *value = (int)number;
    return TH_OK;
}

/* A contrast: a number or a percentage between 0 and 1. */
static th_status read_visibility(const th_case_source *source, double *value, th_error *err)
{
    const th_case_entry *entry = th_case_source_key(source, TH_KEY_VISIBILITY);
    th_error why;

    *value = TH_VISIBILITY;
    if (entry == NULL)
        return TH_OK;
    if (th_quantity_read(entry->value, TH_DIM_NUMBER, value, &why) != TH_OK)
        return th_case_blame(err, source, entry, "%s", why.text);
    if (!(*value > 0.0 && *value < 1.0))
        return th_case_blame(err, source, entry, "visibility must be > 0 and < 1");
    return TH_OK;
}

/* One end of a ramp or range, within the bounds of the length. */
static th_status read_length(const th_case *c, const th_shape_key *key, const char *text,
                             double *value, th_error *err)
{
    double raw = 0.0;
    th_status st = th_case_raw(c->scale.system, text, key->dimension, &raw, err);

    if (st != TH_OK)
        return st;
    *value = raw / th_scale_factor(&c->scale, key->dimension);
    return th_case_in_bounds(&c->scale, key, *value, err);
}

/* `A to B in T`, or `A to B` where time is NULL. */
static th_status read_way(const th_case_source *source, const th_case *c,
                          const th_case_entry *entry, double *from, double *to, double *time,
                          th_error *err)
{
    const th_shape *shape = c->setup.shape;
    const bool si = c->scale.system == TH_SYSTEM_SI;
    const int key = th_shape_length(shape);
    char a[TH_PART_MAX], b[TH_PART_MAX], t[TH_PART_MAX];
    double raw = 0.0;
    th_error why;
    th_status st;

    if (key < 0)
        return th_case_blame(err, source, entry, "shape %s has no length of a pocket", shape->name);
    if (!th_case_split(entry->value, a, b, t) || a[0] == '\0' || b[0] == '\0' ||
        (t[0] == '\0') != (time == NULL))
        return time != NULL ? th_case_blame(err, source, entry, "want `A to B in T`, such as %s",
                                            si ? "5 um to 20 um in 60 ms" : "5 to 20 in 60")
                            : th_case_blame(err, source, entry, "want `A to B`, such as %s",
                                            si ? "5 um to 20 um" : "5 to 20");
    st = read_length(c, &shape->key[key], a, from, &why);
    if (st == TH_OK)
        st = read_length(c, &shape->key[key], b, to, &why);
    if (st == TH_OK && time != NULL)
        st = th_case_raw(c->scale.system, t, TH_DIM_TIME, &raw, &why);
    if (st != TH_OK)
        return th_case_blame(err, source, entry, "%s", why.text);
    if (time == NULL)
        return *from < *to ? TH_OK
                           : th_case_blame(err, source, entry, "want A to B with A less than B");
    if (*from == *to)
        return th_case_blame(err, source, entry, "both ends of the ramp are the same length");
    *time = raw / th_scale_factor(&c->scale, TH_DIM_TIME);
    return *time > 0.0 ? TH_OK
                       : th_case_blame(err, source, entry, "the time of the ramp must be > 0");
}

static th_status read_ways(const th_case_source *source, th_case *out, th_error *err)
{
    const th_case_entry *ramp = th_case_source_key(source, TH_KEY_GAP_RAMP);
    const th_case_entry *range = th_case_source_key(source, TH_KEY_GAP_RANGE);
    th_plan_request *plan = &out->plan;
    th_status st = TH_OK;

    if (ramp != NULL)
        st = read_way(source, out, ramp, &plan->ramp_from, &plan->ramp_to, &plan->ramp_time, err);
    if (st == TH_OK && range != NULL)
        st = read_way(source, out, range, &plan->range_from, &plan->range_to, NULL, err);
    plan->has_ramp = ramp != NULL;
    plan->has_range = range != NULL;
    return st;
}

static th_status read_tolerance(const th_case_source *source, const th_case_entry *entry,
                                double *tolerance, th_error *err)
{
    size_t length = strlen(entry->value);
    th_error why;
    th_status st;

    if (entry->value[length - 1] != '%')
        return th_case_blame(err, source, entry, "a tolerance is written in %%, such as 3 %%");
    st = th_quantity_read(entry->value, TH_DIM_NUMBER, tolerance, &why);
    if (st != TH_OK)
        return th_case_blame(err, source, entry, "%s", why.text);
    if (!(*tolerance > 0.0 && *tolerance < 1.0))
        return th_case_blame(err, source, entry, "a tolerance must be > 0 %% and < 100 %%");
    return TH_OK;
}

th_status th_case_plan_read(const th_case_source *source, th_case *out, th_error *err)
{
    const char *section = th_case_section_name(TH_SECTION_PLAN);
    const size_t prefix = sizeof TH_TOLERANCE_PREFIX - 1;
    th_status st = TH_OK;

    out->plan.present = source->section_line[TH_SECTION_PLAN] > 0;
    for (size_t i = 0; i < sizeof quantity / sizeof quantity[0]; ++i) {
        double *member = (double *)(void *)((char *)&out->plan + quantity[i].member);

        st = th_case_quantity(source, &out->scale, quantity[i].id, false, member, err);
        if (st != TH_OK)
            return st;
    }
    out->plan.seed = 1;
    for (size_t i = 0; i < sizeof whole / sizeof whole[0]; ++i) {
        int *member = (int *)(void *)((char *)&out->plan + whole[i].member);

        st = read_whole(source, i, member, err);
        if (st != TH_OK)
            return st;
    }
    st = read_visibility(source, &out->plan.visibility, err);
    if (st != TH_OK)
        return st;
    for (int i = 0; i < source->entries; ++i) {
        const th_case_entry *entry = &source->entry[i];
        int key;

        if (strcmp(entry->section, section) != 0)
            continue;
        out->plan.present = true;
        if (strncmp(entry->key, TH_TOLERANCE_PREFIX, prefix) != 0)
            continue;
        key = th_shape_key_find(out->setup.shape, entry->key + prefix);
        st = read_tolerance(source, entry, &out->plan.tolerance[key], err);
        if (st != TH_OK)
            return st;
    }
    return read_ways(source, out, err);
}
