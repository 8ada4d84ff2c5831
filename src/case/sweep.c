/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * [sweep]: axes from `a, b, c` or `A to B in N`.
 * In: entries of [sweep], later the scale and the base values of the case. Out: the axes of the
 * case in reduced units, or a sentence. Calls value, blame, units, status.
 * Symbols: A, B ends of a range, both included; N its number of values.
 * To add a way of writing an axis: one more branch in read_axis.
 * Proved by tests/test_case.c and tests/broken. */
#include "inside.h"

#include "../alloc.h"
#include "../units/text.h"

#include <limits.h>
#include <math.h>
#include <string.h>

/* Most values of one axis, and most configurations of a sweep: 80 MB of values, and a number of a
 * configuration that fits an int. No machine gets through as many. */
#define AXIS_MAX  1e7
#define SWEEP_MAX 1e9

/* Numbers of [ends] that can be swept, from TH_AXIS_ENDS on. */
enum { WINDING, CIRCUMFERENCE, PADDING, ENDS_KEYS };
static const th_shape_key ends_key[ENDS_KEYS] = {
    [WINDING] = {.key = "winding",
                 .dimension = TH_DIM_NUMBER,
                 .below = INT_MAX,
                 .doc = "closed integral of v dx over 2 pi hbar/m"},
    [CIRCUMFERENCE] = {.key = "circumference",
                       .dimension = TH_DIM_LENGTH,
                       .below = HUGE_VAL,
                       .doc = "length of the ring"},
    [PADDING] = {.key = "padding",
                 .dimension = TH_DIM_LENGTH,
                 .below = HUGE_VAL,
                 .zero = true,
                 .doc = "uniform length beyond each end of the flow"}};

const th_shape_key *th_axis_key(const th_shape *shape, int key)
{
    return key < TH_AXIS_ENDS ? &shape->key[key] : &ends_key[key - TH_AXIS_ENDS];
}

void th_axis_set(int key, double value, th_flow_setup *setup)
{
    if (key < TH_AXIS_ENDS) {
        setup->value[key] = value;
        setup->given[key] = true;
    } else if (key == TH_AXIS_ENDS + WINDING) {
        setup->ends.winding = (int)value;
    } else if (key == TH_AXIS_ENDS + CIRCUMFERENCE) {
        setup->ends.circumference = value;
    } else {
        setup->ends.padding = value;
    }
}

static double base_of(const th_flow_setup *setup, int key)
{
    return key < TH_AXIS_ENDS                    ? setup->value[key]
           : key == TH_AXIS_ENDS + WINDING       ? setup->ends.winding
           : key == TH_AXIS_ENDS + CIRCUMFERENCE ? setup->ends.circumference
                                                 : setup->ends.padding;
}

int th_case_axis_find(const th_shape *shape, const char *key)
{
    int found = th_shape_key_find(shape, key);

    if (found >= 0)
        return th_shape_key_number(&shape->key[found]) ? found : -1;
    for (int i = 0; i < ENDS_KEYS; ++i)
        if (strcmp(ends_key[i].key, key) == 0)
            return TH_AXIS_ENDS + i;
    return -1;
}

/* One number of an axis: raw, or with % a part of the base value. */
static th_status read_item(th_system system, const char *text, th_dimension dimension,
                           double *value, bool *relative, th_error *err)
{
    size_t length = strlen(text);

    if (length == 0)
        return th_fail(err, TH_EINVAL, "a value is missing or longer than %d bytes",
                       TH_PART_MAX - 1);
    *relative = text[length - 1] == '%';
    if (*relative)
        return th_quantity_read(text, TH_DIM_NUMBER, value, err);
    return th_case_raw(system, text, dimension, value, err);
}

static th_status read_range(th_system system, const char *a, const char *b, const char *n,
                            th_dimension dimension, th_case_axis *axis, th_error *err)
{
    double from = 0.0, to = 0.0, count = 0.0;
    bool other = false;
    th_status st;

    if (n[0] == '\0')
        return th_fail(err, TH_EINVAL, "want `A to B in N`: how many values is missing");
    st = read_item(system, a, dimension, &from, &axis->relative, err);
    if (st == TH_OK)
        st = read_item(system, b, dimension, &to, &other, err);
    if (st != TH_OK)
        return st;
    if (other != axis->relative)
        return th_fail(err, TH_EINVAL, "either all values of an axis are in %%, or none is");
    st = th_number_read(n, &count, err);
    if (st != TH_OK)
        return st;
    if (!(count >= 2.0 && count <= AXIS_MAX && count == floor(count)))
        return th_fail(err, TH_EINVAL,
                       "the number of values must be a whole number from 2 to 10000000");
    axis->count = (int)count;
    axis->value = th_alloc((size_t)axis->count, sizeof *axis->value);
    if (axis->value == NULL)
        return th_fail(err, TH_ENOMEM, "no memory for %d values", axis->count);
    for (int i = 0; i < axis->count; ++i) { /* exact at both ends */
        double part = i / (count - 1.0);

        axis->value[i] = (1.0 - part) * from + part * to;
    }
    return TH_OK;
}

static th_status read_list(th_system system, const char *text, th_dimension dimension,
                           th_case_axis *axis, th_error *err)
{
    int count = 1;

    for (const char *p = text; *p != '\0'; ++p)
        count += *p == ',';
    axis->value = th_alloc((size_t)count, sizeof *axis->value);
    if (axis->value == NULL)
        return th_fail(err, TH_ENOMEM, "no memory for %d values", count);
    for (axis->count = 0; axis->count < count; ++axis->count) {
        size_t length = strcspn(text, ",");
        const char *begin = text, *end = text + length;
        char item[TH_PART_MAX] = "";
        bool relative = false;
        th_status st;

        while (begin < end && *begin == ' ')
            ++begin;
        while (end > begin && end[-1] == ' ')
            --end;
        if (end - begin < TH_PART_MAX)
            memcpy(item, begin, (size_t)(end - begin));
        st = read_item(system, item, dimension, &axis->value[axis->count], &relative, err);
        if (st != TH_OK)
            return st;
        if (axis->count > 0 && relative != axis->relative)
            return th_fail(err, TH_EINVAL, "either all values of an axis are in %%, or none is");
        axis->relative = relative;
        text = text[length] == ',' ? text + length + 1 : text + length;
    }
    return TH_OK;
}

static th_status read_axis(th_system system, const char *text, th_dimension dimension,
                           th_case_axis *axis, th_error *err)
{
    char a[TH_PART_MAX], b[TH_PART_MAX], n[TH_PART_MAX];

    if (th_case_split(text, a, b, n))
        return read_range(system, a, b, n, dimension, axis, err);
    return read_list(system, text, dimension, axis, err);
}

th_status th_case_axes_read(const th_case_source *source, const th_shape *shape, th_system system,
                            th_case_axis **axis, int *axes, th_error *err)
{
    const char *section = th_case_section_name(TH_SECTION_SWEEP);
    double total = 1.0;

    *axes = 0;
    *axis = th_alloc(TH_SHAPE_KEYS_MAX, sizeof **axis);
    if (*axis == NULL)
        return th_fail(err, TH_ENOMEM, "no memory for the axes of a sweep");
    for (int i = 0; i < source->entries; ++i) {
        const th_case_entry *entry = &source->entry[i];
        th_case_axis *a = &(*axis)[*axes];
        th_error why;
        th_status st;

        if (strcmp(entry->section, section) != 0)
            continue;
        if (*axes == TH_SHAPE_KEYS_MAX)
            return th_case_blame(err, source, entry, "a sweep has at most %d axes",
                                 TH_SHAPE_KEYS_MAX);
        a->key = th_case_axis_find(shape, entry->key); /* names were checked */
        a->entry = entry;
        ++*axes;
        if (a->key >= TH_AXIS_ENDS && th_case_source_find(source, "ends", entry->key) == NULL)
            return th_case_blame(err, source, entry,
                                 "only ends that have it can be swept over it, "
                                 "and [ends] has no %s",
                                 entry->key);
        st = read_axis(system, entry->value, th_axis_key(shape, a->key)->dimension, a, &why);
        if (st == TH_ENOMEM)
            return th_fail(err, st, "%s", why.text);
        if (st != TH_OK)
            return th_case_blame(err, source, entry, "%s", why.text);
        total *= a->count;
        if (total > SWEEP_MAX)
            return th_case_blame(err, source, entry,
                                 "the axes up to this one make more than 1000000000 "
                                 "configurations");
    }
    return TH_OK;
}

void th_case_axes_free(th_case_axis *axis, int axes)
{
    for (int i = 0; i < axes; ++i)
        free(axis[i].value);
    free(axis);
}

static int ascending(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;

    return (x > y) - (x < y);
}

/* Look for two equal values; values that go one way need no sorting. */
static th_status find_repeat(const double *value, int count, bool *repeats, double *which,
                             th_error *err)
{
    bool up = true, down = true;
    double *sorted;

    for (int i = 1; i < count; ++i) {
        up = up && value[i] > value[i - 1];
        down = down && value[i] < value[i - 1];
    }
    *repeats = false;
    if (up || down)
        return TH_OK;
    sorted = th_alloc((size_t)count, sizeof *sorted);
    if (sorted == NULL)
        return th_fail(err, TH_ENOMEM, "no memory for %d values", count);
    memcpy(sorted, value, (size_t)count * sizeof *sorted);
    qsort(sorted, (size_t)count, sizeof *sorted, ascending);
    for (int i = 1; i < count && !*repeats; ++i) {
        *repeats = sorted[i] == sorted[i - 1];
        *which = sorted[i];
    }
    free(sorted);
    return TH_OK;
}

/* Raw or relative values to reduced ones, within the bounds of the key and all different. */
static th_status finish_axis(const th_case_source *source, th_case_axis *a, const th_case *c,
                             th_error *err)
{
    const th_shape_key *key = th_axis_key(c->setup.shape, a->key);
    double base = base_of(&c->setup, a->key), factor = th_scale_factor(&c->scale, key->dimension);
    double which = 0.0;
    bool repeats = false;
    th_error why;
    th_status st;

    for (int i = 0; i < a->count; ++i) {
        a->value[i] = a->relative ? base * (1.0 + a->value[i]) : a->value[i] / factor;
        st = th_case_in_bounds(&c->scale, key, a->value[i], &why);
        if (st != TH_OK)
            return th_case_blame(err, source, a->entry, "%s", why.text);
        if (a->key == TH_AXIS_ENDS + WINDING && a->value[i] != floor(a->value[i]))
            return th_case_blame(err, source, a->entry, "winding must be a whole number, not %.15g",
                                 a->value[i]);
    }
    st = find_repeat(a->value, a->count, &repeats, &which, err);
    if (st == TH_OK && repeats) {
        char shown[64];

        th_case_show(&c->scale, key->dimension, which, shown, sizeof shown);
        st = th_case_blame(err, source, a->entry,
                           "the values of an axis must differ, and %s stands twice", shown);
    }
    return st;
}

th_status th_case_axes_finish(const th_case_source *source, th_case_axis *axis, int axes,
                              th_case *out, th_error *err)
{
    if (axes == 0)
        return TH_OK;
    out->axis = th_alloc((size_t)axes, sizeof *out->axis);
    if (out->axis == NULL)
        return th_fail(err, TH_ENOMEM, "no memory for the axes of a sweep");
    for (; out->axes < axes; ++out->axes) {
        th_case_axis *a = &axis[out->axes];
        th_status st = finish_axis(source, a, out, err);

        if (st != TH_OK)
            return st;
        out->axis[out->axes] = (th_axis){.key = a->key,
                                         .name = th_axis_key(out->setup.shape, a->key)->key,
                                         .count = a->count,
                                         .value = a->value};
        a->value = NULL; /* now the case's */
    }
    return TH_OK;
}
