/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The canonical text of a case: the same for two files that differ in order, blanks, comments or
 * in what came from overrides. It can be read again and gives the same case.
 * In: checked entries, the shape. Out: th_case.text. Calls keys, buffer, status.
 * Symbols: none. To change the order: rank. Proved by tests/test_case.c. */
#include "inside.h"

#include "../buffer.h"

#include <inttypes.h>
#include <stdio.h>
#include <string.h>

/* Lines are broken before this column where they can be: half of what the reader takes. */
enum { COLUMNS = 98 };

/* Place of an entry in its section: rows of the table, then keys of the shape, in their orders.
 * Axes keep the order in which they were given: the first is the slowest. */
static int rank(const th_shape *shape, const th_case_entry *entry)
{
    const char *key = entry->key;
    th_case_key_id id = th_case_key_find(entry->section, key);

    if (th_case_section_find(entry->section) == TH_SECTION_SWEEP)
        return 0;
    if (id != TH_KEYS)
        return (int)id;
    if (th_case_section_find(entry->section) == TH_SECTION_PLAN)
        key += sizeof TH_TOLERANCE_PREFIX - 1;
    return TH_KEYS + th_shape_key_find(shape, key);
}

/* The value of an entry as it is written: of a table its name alone, since a case and its table go
 * together. */
static const char *value_of(const th_shape *shape, const th_case_entry *entry)
{
    const int k = th_shape_key_find(shape, entry->key);
    const char *slash = strrchr(entry->value, '/');

    return k >= 0 && shape->key[k].file && slash != NULL ? slash + 1 : entry->value;
}

/* Write one entry; a long list goes on in further lines, broken after commas. */
static void write_entry(th_buffer *text, const th_shape *shape, const th_case_entry *entry)
{
    const char *value = value_of(shape, entry);
    size_t line = text->length; /* where the current line begins */

    th_buffer_text(text, entry->key);
    th_buffer_text(text, " =");
    for (const char *p = value; *p != '\0';) {
        size_t length = strcspn(p, ",");

        length += p[length] == ',';
        if (p > value && text->length - line + 1 + length > COLUMNS) {
            th_buffer_text(text, "\n   ");
            line = text->length - 3;
        }
        th_buffer_text(text, " ");
        th_buffer_add(text, p, length);
        p += length;
        p += strspn(p, " ");
    }
    th_buffer_text(text, "\n");
}

/* A comment that differs when the table does: the case is its text. */
static void write_table(th_buffer *text, const th_data *data)
{
    char line[96];

    (void)snprintf(line, sizeof line, "; the table: %d rows, hash %016" PRIx64 "\n",
                   th_data_rows(data), th_data_hash(data));
    th_buffer_text(text, line);
}

static void write_section(th_buffer *text, const th_case_source *source, const th_case *c,
                          th_case_section section)
{
    const th_shape *shape = c->setup.shape;
    const char *name = th_case_section_name(section);
    bool used = section == TH_SECTION_PLAN && c->plan.present; /* an empty [plan] asks for one */
    int last = -1, next;

    for (int i = 0; i < source->entries && !used; ++i)
        used = strcmp(source->entry[i].section, name) == 0;
    if (used) {
        th_buffer_text(text, section > 0 ? "\n[" : "[");
        th_buffer_text(text, name);
        th_buffer_text(text, "]\n");
    }

    if (section == TH_SECTION_FLOW && c->data != NULL)
        write_table(text, c->data);
    do { /* all entries of the smallest rank above the last one */
        next = -1;
        for (int i = 0; i < source->entries; ++i) {
            int place;

            if (strcmp(source->entry[i].section, name) != 0)
                continue;
            place = rank(shape, &source->entry[i]);
            if (place > last && (next < 0 || place < next))
                next = place;
        }
        for (int i = 0; next >= 0 && i < source->entries; ++i) {
            if (strcmp(source->entry[i].section, name) != 0 ||
                rank(shape, &source->entry[i]) != next)
                continue;
            write_entry(text, shape, &source->entry[i]);
        }
        last = next;
    } while (next >= 0);
}

th_status th_case_text_write(const th_case_source *source, th_case *out, th_error *err)
{
    th_buffer text = {.data = NULL};

    for (int i = 0; i < TH_SECTIONS; ++i)
        write_section(&text, source, out, (th_case_section)i);
    if (text.failed) {
        free(text.data);
        return th_fail(err, TH_ENOMEM, "no memory for the text of the case");
    }
    out->text = text.data;
    return TH_OK;
}
