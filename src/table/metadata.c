/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The metadata of a table. What goes in: the columns, the title, the case. What comes out: one
 * JSON object in the vocabulary of "Metadata Vocabulary for Tabular Data", W3C Recommendation,
 * 17 December 2015; the prefixes dc and schema are in its initial context. May call: buffer.
 *
 * To add a property: one line in th_table_describe or describe_column, with a prefix of that
 * context. Tests: tests/test_table.c, tests/check_tables.py. */
#include "table.h"

#include <twinhorizon/version.h>

#include <stdio.h>
#include <string.h>

/* Bytes of the well-formed UTF-8 sequence at text, 0 when it is none.
 * Source: The Unicode Standard, version 15, table 3-7. */
static int utf8_length(const unsigned char *text)
{
    unsigned char low = 0x80, high = 0xBF; /* bounds of the second byte */
    int length;

    if (text[0] < 0x80)
        return 1;
    if (text[0] < 0xC2 || text[0] > 0xF4)
        return 0;
    length = text[0] < 0xE0 ? 2 : text[0] < 0xF0 ? 3 : 4;
    if (text[0] == 0xE0)
        low = 0xA0; /* no overlong form */
    if (text[0] == 0xED)
        high = 0x9F; /* no surrogate */
    if (text[0] == 0xF0)
        low = 0x90; /* no overlong form */
    if (text[0] == 0xF4)
        high = 0x8F; /* nothing above U+10FFFF */
    if (text[1] < low || text[1] > high)
        return 0;
    for (int i = 2; i < length; i++)
        if (text[i] < 0x80 || text[i] > 0xBF)
            return 0;
    return length;
}

/* A JSON string (RFC 8259, section 7). A byte that is no UTF-8 becomes U+FFFD, the replacement
 * character: JSON cannot hold it. */
static void add_string(th_buffer *json, const char *text)
{
    th_buffer_text(json, "\"");
    while (*text != '\0') {
        int length = utf8_length((const unsigned char *)text);
        char escape[8];

        if (length == 0) {
            th_buffer_text(json, "\\ufffd");
            length = 1;
        } else if (*text == '"' || *text == '\\') {
            th_buffer_text(json, "\\");
            th_buffer_add(json, text, 1);
        } else if (*text == '\n') {
            th_buffer_text(json, "\\n");
        } else if (length == 1 && (unsigned char)*text < 0x20) {
            (void)snprintf(escape, sizeof escape, "\\u%04x", (unsigned)(unsigned char)*text);
            th_buffer_text(json, escape);
        } else {
            th_buffer_add(json, text, (size_t)length);
        }
        text += length;
    }
    th_buffer_text(json, "\"");
}

/* `before` is what stands between the member and what precedes it. */
static void add_member(th_buffer *json, const char *before, const char *name, const char *value)
{
    th_buffer_text(json, before);
    add_string(json, name);
    th_buffer_text(json, ": ");
    add_string(json, value);
}

/* The last part of the path as a relative URL (RFC 3986): all but unreserved bytes are escaped. */
static void add_url(th_buffer *json, const char *path)
{
    static const char plain[] =
        "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789-._~";
    const char *slash = strrchr(path, '/');

    th_buffer_text(json, "\"");
    for (const char *byte = slash != NULL ? slash + 1 : path; *byte != '\0'; byte++) {
        char escape[4];

        if (strchr(plain, *byte) != NULL) {
            th_buffer_add(json, byte, 1);
        } else {
            (void)snprintf(escape, sizeof escape, "%%%02X", (unsigned)(unsigned char)*byte);
            th_buffer_text(json, escape);
        }
    }
    th_buffer_text(json, "\"");
}

static void describe_column(const th_column *column, th_buffer *json)
{
    add_member(json, "      {", "name", column->name);
    th_buffer_text(json, ",\n       \"titles\": [");
    add_string(json, column->name); /* the header cell, which a validator looks for */
    if (column->title != NULL && strcmp(column->title, column->name) != 0) {
        th_buffer_text(json, ", ");
        add_string(json, column->title);
    }
    th_buffer_text(json, "]");
    if (column->description != NULL)
        add_member(json, ",\n       ", "dc:description", column->description);
    if (column->unit != NULL)
        add_member(json, ",\n       ", "schema:unitText", column->unit);
    if (column->format != NULL) {
        add_member(json, ",\n       \"datatype\": {", "base", column->datatype);
        add_member(json, ", ", "format", column->format);
        th_buffer_text(json, "}");
    } else {
        add_member(json, ",\n       ", "datatype", column->datatype);
    }
    th_buffer_text(json, "}");
}

void th_table_describe(const char *path, const th_column *column, int count, const char *title,
                       const char *case_text, th_buffer *json)
{
    th_buffer_text(json, "{\n  \"@context\": \"http://www.w3.org/ns/csvw\",\n  \"url\": ");
    add_url(json, path);
    add_member(json, ",\n  ", "dc:title", title);
    add_member(json, ",\n  \"dc:creator\": {", "@type", "schema:SoftwareApplication");
    add_member(json, ", ", "schema:name", "twinhorizon");
    add_member(json, ", ", "schema:softwareVersion", TH_VERSION);
    add_member(json, "},\n  ", "dc:source", case_text);
    th_buffer_text(json, ",\n  \"tableSchema\": {\n    \"columns\": [\n");
    for (int i = 0; i < count; i++) {
        if (i > 0)
            th_buffer_text(json, ",\n");
        describe_column(&column[i], json);
    }
    th_buffer_text(json, "\n    ]\n  }\n}\n");
}
