/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * [flow] and the scale: the keys of the shape, the table that one of them may name, the unit of
 * speed, the base configuration and the rules between its keys.
 * In: entries, the shape, the axes. Out: the members scale, setup and data of a th_case.
 * Calls source, keys, value, data, flow, units. Symbols: hbar = m = 1 in reduced units; the unit of
 * speed of an SI case is sound_upstream, else speed, else the median sound speed of the table.
 * To add a kind of value a shape's key may have: read_entry. Proved by tests/test_case.c. */
#include "inside.h"

#include "../alloc.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

/* Whether a key of the shape must be there. */
static bool is_needed(const th_shape_key *key, th_system system, th_ends_kind ends)
{
    if (key->fixed_by_ring && ends == TH_ENDS_RING)
        return false;
    return key->si_only ? system == TH_SYSTEM_SI : !key->optional;
}

/* The table that a key names. */
static th_status read_table(const th_case_source *source, th_system system,
                            const th_case_entry *entry, th_data **out, th_error *err)
{
    const char *slash = entry->override == NULL ? strrchr(source->name, '/') : NULL;
    size_t folder =
        slash != NULL && entry->value[0] != '/' ? (size_t)(slash - source->name) + 1 : 0;
    size_t length = strlen(entry->value);
    char *path = th_alloc(folder + length + 1, 1);
    th_error why;
    th_status st;

    if (path == NULL)
        return th_fail(err, TH_ENOMEM, "no memory for the path of a table");
    memcpy(path, source->name, folder);
    memcpy(path + folder, entry->value, length);
    st = th_data_read(path, system, out, &why);
    free(path);
    if (st == TH_EINVAL || st == TH_EIO)
        return th_case_blame(err, source, entry, "%s", why.text);
    return st == TH_OK ? st : th_fail(err, st, "%s", why.text);
}

/* One key of the shape that was given in [flow], as a raw value. */
static th_status read_entry(const th_case_source *source, th_system system, const th_shape_key *key,
                            const th_case_entry *entry, th_data **data, double *raw, th_error *err)
{
    th_error why;
    int words = 0, which = 0;
    th_status st;

    if (key->file)
        return read_table(source, system, entry, data, err);
    if (key->word != NULL) {
        while (key->word[words] != NULL)
            words++;
        st = th_case_word(source, entry, key->word, words, &which, err);
        *raw = which;
        return st;
    }
    if (th_case_raw(system, entry->value, key->dimension, raw, &why) != TH_OK)
        return th_case_blame(err, source, entry, "%s", why.text);
    return TH_OK;
}

th_status th_case_flow_read(const th_case_source *source, th_system system,
                            const th_case_axis *axis, int axes, const th_flow_setup *setup,
                            th_data **data, th_case_flow *out, th_error *err)
{
    const char *section = th_case_section_name(TH_SECTION_FLOW);
    const th_case_axis *swept[TH_SHAPE_KEYS_MAX] = {NULL};

    for (int i = 0; i < axes; ++i)
        if (axis[i].key < TH_AXIS_ENDS)
            swept[axis[i].key] = &axis[i];
    for (int k = 0; k < setup->shape->keys; ++k) {
        const th_shape_key *key = &setup->shape->key[k];
        const th_case_entry *entry = th_case_source_find(source, section, key->key);
        const th_case_axis *a = swept[k];
        th_status st = TH_OK;

        if (a != NULL && key->fixed_by_ring && setup->ends.kind == TH_ENDS_RING)
            return th_case_blame(err, source, a->entry,
                                 "on a ring the winding fixes it, so it cannot be swept");
        if (a != NULL && a->relative && entry == NULL)
            return th_case_blame(err, source, a->entry,
                                 "values in %% are relative to [flow] %s, which is missing",
                                 key->key);
        out->entry[k] = entry != NULL ? entry : a != NULL ? a->entry : NULL;
        if (out->entry[k] == NULL) {
            if (is_needed(key, system, setup->ends.kind))
                return th_case_blame_missing(err, source, section, key->key,
                                             "shape %s needs it: %s", setup->shape->name, key->doc);
            continue;
        }
        if (key->si_only && system == TH_SYSTEM_REDUCED)
            return th_case_blame(err, source, out->entry[k], "only an SI case takes it: %s",
                                 key->doc);
        if (key->absolute && system == TH_SYSTEM_SI &&
            th_case_source_key(source, TH_KEY_DENSITY) == NULL)
            return th_case_blame(err, source, out->entry[k],
                                 "it needs [flow] density, the upstream line density");
        if (entry == NULL)
            out->raw[k] = a->value[0];
        else
            st = read_entry(source, system, key, entry, data, &out->raw[k], err);
        if (st != TH_OK)
            return st;
    }
    return TH_OK;
}

static int ascending(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;

    return (x > y) - (x < y);
}

/* Median of a table's sound speeds; 0 when it has none. */
static th_status median_sound(const th_data *data, double *median, th_error *err)
{
    const double *sound = data != NULL ? th_data_values(data, TH_DATA_SOUND) : NULL;
    size_t rows = sound != NULL ? (size_t)th_data_rows(data) : 0;
    double *sorted;

    *median = 0.0;
    if (sound == NULL)
        return TH_OK;
    sorted = th_alloc(rows, sizeof *sorted);
    if (sorted == NULL)
        return th_fail(err, TH_ENOMEM, "no memory for %zu sound speeds", rows);
    memcpy(sorted, sound, rows * sizeof *sorted);
    qsort(sorted, rows, sizeof *sorted, ascending);
    *median = sorted[rows / 2];
    free(sorted);
    return TH_OK;
}

th_status th_case_scale_read(const th_case_source *source, th_system system, double mass,
                             const th_shape *shape, const th_data *data, const th_case_flow *values,
                             th_scale *out, th_error *err)
{
    static const char *const unit[] = {"sound_upstream", "speed"};
    const char *missing = NULL;
    double sound = 0.0;
    th_error reason;
    th_status st;

    if (system == TH_SYSTEM_REDUCED) {
        *out = th_scale_reduced();
        return TH_OK;
    }
    for (size_t i = 0; i < sizeof unit / sizeof unit[0]; ++i) {
        int k = th_shape_key_find(shape, unit[i]);
        th_error why;

        if (k < 0)
            continue;
        missing = unit[i];
        if (values->entry[k] == NULL)
            continue;
        if (!(values->raw[k] > 0.0))
            return th_case_blame(err, source, values->entry[k],
                                 "%s must be > 0: it is the unit of speed of an SI case", unit[i]);
        if (th_scale_si(mass, values->raw[k], out, &why) != TH_OK)
            return th_case_blame(err, source, values->entry[k], "%s", why.text);
        return TH_OK;
    }
    st = median_sound(data, &sound, err);
    if (st != TH_OK)
        return st;
    if (sound > 0.0) {
        st = th_scale_si(mass, sound, out, &reason);
        return st == TH_OK ? st : th_case_blame_line(err, source->name, 0, "%s", reason.text);
    }
    if (missing == NULL)
        return th_fail(err, TH_EBUG, "shape %s has neither sound_upstream nor speed", shape->name);
    return th_case_blame_missing(err, source, th_case_section_name(TH_SECTION_FLOW), missing,
                                 "an SI case takes its unit of speed from it");
}

th_status th_case_base_read(const th_case_source *source, const th_case_flow *values, th_case *out,
                            th_error *err)
{
    th_flow_setup *setup = &out->setup;
    th_status st;

    for (int k = 0; k < setup->shape->keys; ++k) {
        const th_shape_key *key = &setup->shape->key[k];
        th_error why;

        setup->given[k] = values->entry[k] != NULL;
        setup->value[k] = key->fallback;
        if (!setup->given[k])
            continue;
        setup->value[k] = values->raw[k] / th_scale_factor(&out->scale, key->dimension);
        if (th_case_in_bounds(&out->scale, key, setup->value[k], &why) != TH_OK)
            return th_case_blame(err, source, values->entry[k], "%s", why.text);
    }
    if (out->data != NULL && out->scale.system == TH_SYSTEM_SI)
        th_data_scale(out->data, &out->scale);
    setup->data = out->data;
    setup->density = 1.0;
    out->density_given = th_case_source_key(source, TH_KEY_DENSITY) != NULL;
    st = th_case_quantity(source, &out->scale, TH_KEY_DENSITY, false, &setup->density, err);
    if (st == TH_OK)
        st = th_case_quantity(source, &out->scale, TH_KEY_LOSS_RATE, true, &out->loss_rate, err);
    if (st == TH_OK)
        st = th_case_quantity(source, &out->scale, TH_KEY_CIRCUMFERENCE, false,
                              &setup->ends.circumference, err);
    if (st == TH_OK)
        st = th_case_quantity(source, &out->scale, TH_KEY_PADDING, true, &setup->ends.padding, err);
    return st;
}

th_status th_case_flow_check(const th_case_source *source, const th_case *c,
                             const th_case_flow *values, th_error *err)
{
    const th_case_entry *entry = NULL;
    th_flow *flow = NULL;
    char units[96] = "";
    th_error why = {.status = TH_OK};
    th_status st = th_flow_build(&c->setup, &flow, &why);
    int k;

    th_flow_destroy(flow);
    if (st == TH_OK)
        return TH_OK;
    if (st != TH_EINVAL)
        return th_fail(err, st, "%s", why.text);
    if (c->scale.system == TH_SYSTEM_SI) {
        char length[32], speed[32];

        th_number_write(c->scale.length, length, sizeof length);
        th_number_write(c->scale.speed, speed, sizeof speed);
        (void)snprintf(units, sizeof units, " (in units of %s m and %s m/s)", length, speed);
    }
    k = th_shape_key_find(c->setup.shape, why.key);
    if (k >= 0)
        entry = values->entry[k];
    for (int i = 0; i < TH_KEYS && entry == NULL; ++i)
        if (strcmp(th_case_key_name((th_case_key_id)i), why.key) == 0)
            entry = th_case_source_key(source, (th_case_key_id)i);
    if (entry != NULL)
        return th_case_blame(err, source, entry, "%s%s", why.text, units);
    return th_case_blame_line(err, source->name, 0, "%s%s", why.text, units);
}
