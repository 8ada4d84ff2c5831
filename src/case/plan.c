/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * [plan]: what is asked about an experiment.
 * In: entries of [plan], the scale and the shape of the case. Out: th_case.plan in reduced units.
 * Calls value, blame, units, status. Symbols: none.
 * To add a quantity: a row in keys.h, a member of th_plan_request, and a row in `quantity`.
 * Proved by tests/test_case.c and tests/broken. */
#include "inside.h"

#include "../units/text.h"

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
};

/* One end of the ramp, within the bounds of the gap. */
static th_status read_gap(const th_case *c, const th_shape_key *gap, const char *text,
                          double *value, th_error *err)
{
    double raw = 0.0;
    th_status st = th_case_raw(c->scale.system, text, TH_DIM_LENGTH, &raw, err);

    if (st != TH_OK)
        return st;
    *value = raw / th_scale_factor(&c->scale, TH_DIM_LENGTH);
    return th_case_in_bounds(&c->scale, gap, *value, err);
}

static th_status read_ramp(const th_case_source *source, th_case *out, th_error *err)
{
    const th_case_entry *entry = th_case_source_key(source, TH_KEY_GAP_RAMP);
    const th_shape *shape = out->setup.shape;
    th_plan_request *plan = &out->plan;
    char a[TH_PART_MAX], b[TH_PART_MAX], t[TH_PART_MAX];
    int key = th_shape_key_find(shape, "gap");
    double raw = 0.0;
    th_error why;
    th_status st;

    if (entry == NULL)
        return TH_OK;
    if (key < 0)
        return th_case_blame(err, source, entry, "shape %s has no gap to ramp", shape->name);
    if (!th_case_split(entry->value, a, b, t) || a[0] == '\0' || b[0] == '\0' || t[0] == '\0')
        return th_case_blame(err, source, entry, "want `A to B in T`, such as %s",
                             out->scale.system == TH_SYSTEM_SI ? "5 um to 20 um in 60 ms"
                                                               : "5 to 20 in 60");
    st = read_gap(out, &shape->key[key], a, &plan->ramp_from, &why);
    if (st == TH_OK)
        st = read_gap(out, &shape->key[key], b, &plan->ramp_to, &why);
    if (st == TH_OK)
        st = th_case_raw(out->scale.system, t, TH_DIM_TIME, &raw, &why);
    if (st != TH_OK)
        return th_case_blame(err, source, entry, "%s", why.text);
    if (!(raw > 0.0))
        return th_case_blame(err, source, entry, "the time of the ramp must be > 0");
    plan->ramp_time = raw / th_scale_factor(&out->scale, TH_DIM_TIME);
    plan->has_ramp = true;
    return TH_OK;
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
    th_status st;

    out->plan.present = source->section_line[TH_SECTION_PLAN] > 0;
    for (size_t i = 0; i < sizeof quantity / sizeof quantity[0]; ++i) {
        double *member = (double *)(void *)((char *)&out->plan + quantity[i].member);

        st = th_case_quantity(source, &out->scale, quantity[i].id, false, member, err);
        if (st != TH_OK)
            return st;
    }
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
    return read_ramp(source, out, err);
}
