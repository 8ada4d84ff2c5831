/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Values of keys: numbers in the units of the case, and the rules that they obey.
 * In: text of an entry, what it measures. Out: raw or reduced numbers, or a sentence.
 * Calls units, blame, status. Symbols: none. To change how units are demanded: th_case_raw.
 * Proved by tests/test_case.c and tests/broken. */
#include "inside.h"

#include "../units/text.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

th_status th_case_raw(th_system system, const char *text, th_dimension dimension, double *raw,
                      th_error *err)
{
    char shown[TH_QUOTE_MAX];
    const char *end = NULL;
    double number = 0.0;
    th_status st;

    if (system == TH_SYSTEM_SI && dimension != TH_DIM_NUMBER)
        return th_quantity_read(text, dimension, raw, err);
    st = th_number_read(text, raw, err);
    if (st != TH_EINVAL || system == TH_SYSTEM_SI || dimension == TH_DIM_NUMBER)
        return st;
    if (th_number_scan(text, &end, &number, NULL) != TH_OK || *end == ',')
        return st;
    while (*end == ' ')
        ++end;
    th_quote(end, shown, sizeof shown);
    return th_fail(err, TH_EINVAL,
                   "a reduced case takes bare numbers, and \"%s\" follows this one; units need "
                   "[units] system = SI",
                   shown);
}

void th_case_show(const th_scale *scale, th_dimension dimension, double value, char *buffer,
                  size_t size)
{
    char number[32];
    bool bare = scale->system == TH_SYSTEM_REDUCED || dimension == TH_DIM_NUMBER || value == 0.0;

    th_number_write(value * th_scale_factor(scale, dimension), number, sizeof number);
    (void)snprintf(buffer, size, "%s%s%s", number, bare ? "" : " ",
                   bare ? "" : th_dimension_unit(dimension));
}

th_status th_case_in_bounds(const th_scale *scale, const th_shape_key *key, double value,
                            th_error *err)
{
    char above[64], below[64], shown[64];

    const char *than = key->zero ? ">=" : ">";

    if (!th_shape_key_number(key) ||
        (isfinite(value) && (value > key->above || (key->zero && value == key->above)) &&
         value < key->below))
        return TH_OK;
    th_case_show(scale, key->dimension, value, shown, sizeof shown);
    th_case_show(scale, key->dimension, key->above, above, sizeof above);
    if (key->dimension == TH_DIM_SPEED && value < 0)
        return th_fail(err, TH_EINVAL,
                       "%s must be %s %s, not %s: x runs along the flow, so a flow to the left is "
                       "described by its mirror image",
                       key->key, than, above, shown);
    if (!isfinite(key->below))
        return th_fail(err, TH_EINVAL, "%s must be %s %s, not %s", key->key, than, above, shown);
    th_case_show(scale, key->dimension, key->below, below, sizeof below);
    return th_fail(err, TH_EINVAL, "%s must be %s %s and < %s, not %s", key->key, than, above,
                   below, shown);
}

th_status th_case_quantity(const th_case_source *source, const th_scale *scale, th_case_key_id id,
                           bool zero, double *value, th_error *err)
{
    const th_case_entry *entry = th_case_source_key(source, id);
    th_dimension dimension = th_case_key_dimension(id);
    th_error why;
    double raw = 0.0, number;
    th_status st;

    if (entry == NULL)
        return TH_OK;
    st = th_case_raw(scale->system, entry->value, dimension, &raw, &why);
    if (st != TH_OK)
        return th_case_blame(err, source, entry, "%s", why.text);
    number = raw / th_scale_factor(scale, dimension);
    if (!isfinite(number) || number < 0.0 || (number == 0.0 && !zero))
        return th_case_blame(err, source, entry, "%s must be %s 0 and finite", th_case_key_name(id),
                             zero ? ">=" : ">");
    *value = number;
    return TH_OK;
}

/* Copy the text from begin to end without the blanks around it; "" when it does not fit, or when
 * there is none ("1 to in 5", where both words share a blank). */
static void copy_part(const char *begin, const char *end, char part[TH_PART_MAX])
{
    if (end < begin)
        end = begin;
    while (begin < end && *begin == ' ')
        ++begin;
    while (end > begin && end[-1] == ' ')
        --end;
    if (end - begin >= TH_PART_MAX)
        end = begin;
    memcpy(part, begin, (size_t)(end - begin));
    part[end - begin] = '\0';
}

bool th_case_split(const char *text, char a[TH_PART_MAX], char b[TH_PART_MAX], char n[TH_PART_MAX])
{
    const char *end = text + strlen(text), *to = strstr(text, " to "), *in;

    if (to == NULL)
        return false;
    in = strstr(to + 3, " in ");
    copy_part(text, to, a);
    copy_part(to + 4, in != NULL ? in : end, b);
    copy_part(in != NULL ? in + 4 : end, end, n);
    return true;
}

th_status th_case_word(const th_case_source *source, const th_case_entry *entry,
                       const char *const *word, int words, int *which, th_error *err)
{
    char list[160] = "";
    size_t used = 0;

    for (*which = 0; *which < words; ++*which)
        if (strcmp(entry->value, word[*which]) == 0)
            return TH_OK;
    for (int i = 0; i < words && used < sizeof list; ++i)
        used +=
            (size_t)snprintf(list + used, sizeof list - used, "%s%s", i > 0 ? ", " : "", word[i]);
    return th_case_blame(err, source, entry, "want one of %s; the nearest is %s", list,
                         th_case_nearest(entry->value, word, words));
}
