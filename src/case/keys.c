/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Names of a case file: which keys exist, and what was probably meant.
 * In: names as the user wrote them, and the shape. Out: rows of the table in keys.h, or a
 * sentence with the nearest valid name. Calls flow (table of shapes), units (quoting), status.
 * Symbols: none. To add a key: keys.h. Proved by tests/test_case.c and tests/broken. */
#include "inside.h"

#include "../units/text.h"

#include <stdio.h>
#include <string.h>

static const char *const section_name[] = {
#define SECTION_NAME(id, name) name,
    TH_CASE_SECTION_LIST(SECTION_NAME)
#undef SECTION_NAME
};

static const th_case_key table[] = {
#define KEY_ROW(id, section, key, dimension, doc) {section, key, doc},
    TH_CASE_KEY_LIST(KEY_ROW)
#undef KEY_ROW
};

static const th_dimension measures[] = {
#define KEY_DIMENSION(id, section, key, dimension, doc) dimension,
    TH_CASE_KEY_LIST(KEY_DIMENSION)
#undef KEY_DIMENSION
};

/* Words longer than this are compared by their beginning only; no valid name is as long. */
enum { WORD_MAX = 40 };

/* More candidates than any section has: the rows of the table and the keys of one shape, twice. */
enum { CANDIDATES_MAX = TH_KEYS + 2 * TH_SHAPE_KEYS_MAX };

th_case_section th_case_section_find(const char *name)
{
    int i = 0;

    while (i < TH_SECTIONS && strcmp(section_name[i], name) != 0)
        ++i;
    return (th_case_section)i;
}

const char *th_case_section_name(th_case_section section)
{
    return section_name[section];
}

th_case_key_id th_case_key_find(const char *section, const char *key)
{
    int i = 0;

    while (i < TH_KEYS &&
           (strcmp(table[i].section, section) != 0 || strcmp(table[i].key, key) != 0))
        ++i;
    return (th_case_key_id)i;
}

const char *th_case_key_name(th_case_key_id id)
{
    return table[id].key;
}

const char *th_case_key_section(th_case_key_id id)
{
    return table[id].section;
}

th_dimension th_case_key_dimension(th_case_key_id id)
{
    return measures[id];
}

const th_case_key *th_case_keys(int *count)
{
    *count = TH_KEYS;
    return table;
}

int th_shape_key_find(const th_shape *shape, const char *key)
{
    for (int i = 0; i < shape->keys; ++i)
        if (strcmp(shape->key[i].key, key) == 0)
            return i;
    return -1;
}

static char lower(char c)
{
    return c >= 'A' && c <= 'Z' ? (char)(c - 'A' + 'a') : c;
}

/* Least number of inserted, deleted and replaced characters that turn a into b, case ignored
 * (recurrence over prefixes, one row at a time). */
static int edit_distance(const char *a, const char *b)
{
    int row[WORD_MAX + 1], columns = 0;

    for (; columns < WORD_MAX && b[columns] != '\0'; ++columns)
        row[columns] = columns;
    row[columns] = columns;
    for (int i = 0; i < WORD_MAX && a[i] != '\0'; ++i) {
        int diagonal = row[0];

        row[0] = i + 1;
        for (int j = 0; j < columns; ++j) {
            int best = diagonal + (lower(a[i]) != lower(b[j]));

            diagonal = row[j + 1];
            if (diagonal + 1 < best)
                best = diagonal + 1;
            if (row[j] + 1 < best)
                best = row[j] + 1;
            row[j + 1] = best;
        }
    }
    return row[columns];
}

const char *th_case_nearest(const char *word, const char *const *candidate, int count)
{
    int best = 0, least = edit_distance(word, candidate[0]);

    for (int i = 1; i < count; ++i) {
        int distance = edit_distance(word, candidate[i]);

        if (distance < least) {
            least = distance;
            best = i;
        }
    }
    return candidate[best];
}

const char *th_case_section_nearest(const char *name)
{
    return th_case_nearest(name, section_name, TH_SECTIONS);
}

/* Say why a key may not stand where it does: other shapes have it (asked where shape keys may
 * stand, for what follows the prefix), another section has it, else the nearest valid name. */
static th_status refuse(const th_shape *shape, const char *key, size_t prefix, bool of_shape,
                        const char *const *candidate, int count, th_error *err)
{
    char shapes[160] = "";
    size_t used = 0;

    for (int i = 0; of_shape && i < th_shape_count(); ++i) {
        const th_shape *other = th_shape_at(i);

        if (th_shape_key_find(other, key + prefix) >= 0 && used < sizeof shapes)
            used += (size_t)snprintf(shapes + used, sizeof shapes - used, "%s%s",
                                     used > 0 ? ", " : "", other->name);
    }
    if (used > 0)
        return th_fail(err, TH_EINVAL, "shape %s has no such key; shapes with it: %s", shape->name,
                       shapes);
    for (int i = 0; prefix == 0 && i < TH_KEYS; ++i)
        if (strcmp(table[i].key, key) == 0)
            return th_fail(err, TH_EINVAL, "this key belongs to [%s]", table[i].section);
    if (prefix == 0 && th_shape_key_find(shape, key) >= 0)
        return th_fail(err, TH_EINVAL, "this key belongs to [flow]");
    return th_fail(err, TH_EINVAL, "unknown key; the nearest valid key is %s",
                   th_case_nearest(key, candidate, count));
}

th_status th_case_key_check(const th_shape *shape, const char *section, const char *key,
                            th_error *err)
{
    static const size_t prefix = sizeof TH_TOLERANCE_PREFIX - 1;
    const char *candidate[CANDIDATES_MAX];
    char tolerance[TH_SHAPE_KEYS_MAX][sizeof TH_TOLERANCE_PREFIX + WORD_MAX];
    th_case_section which = th_case_section_find(section);
    bool of_shape = which == TH_SECTION_FLOW || which == TH_SECTION_SWEEP;
    bool tolerated = which == TH_SECTION_PLAN && strncmp(key, TH_TOLERANCE_PREFIX, prefix) == 0;
    int count = 0;

    if (which == TH_SECTION_SWEEP && th_case_axis_find(shape, key) >= 0)
        return TH_OK;
    if (of_shape || tolerated) {
        int k = th_shape_key_find(shape, key + (tolerated ? prefix : 0));

        if (k >= 0 && (which == TH_SECTION_FLOW || th_shape_key_number(&shape->key[k])))
            return TH_OK;
        if (k >= 0)
            return th_fail(err, TH_EINVAL, "%s is no number: it %s", shape->key[k].key,
                           tolerated ? "takes no tolerance" : "cannot be swept");
    }
    if (which == TH_SECTION_SWEEP && th_case_key_find("flow", key) != TH_KEYS)
        return th_fail(err, TH_EINVAL, "%s cannot be swept, only the numbers of the shape can",
                       key);
    if (tolerated && th_case_key_find("flow", key + prefix) != TH_KEYS)
        return th_fail(err, TH_EINVAL, "%s takes no tolerance, only the numbers of the shape do",
                       key + prefix);
    for (int i = 0; i < TH_KEYS; ++i) {
        if (strcmp(table[i].section, section) != 0 || i == TH_KEY_SWEEP_AXIS ||
            i == TH_KEY_TOLERANCE)
            continue; /* these two stand for the keys of the shape */
        if (strcmp(table[i].key, key) == 0)
            return TH_OK;
        candidate[count++] = table[i].key;
    }
    for (int i = 0; (of_shape || which == TH_SECTION_PLAN) && i < shape->keys; ++i) {
        candidate[count] = shape->key[i].key;
        if (which == TH_SECTION_PLAN) {
            (void)snprintf(tolerance[i], sizeof tolerance[i], "%s%s", TH_TOLERANCE_PREFIX,
                           shape->key[i].key);
            candidate[count] = tolerance[i];
        }
        ++count;
    }
    return refuse(shape, key, tolerated ? prefix : 0, of_shape || tolerated, candidate, count, err);
}
