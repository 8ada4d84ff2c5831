/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * INI text and overrides to entries. The only file that calls inih.
 * In: text, "section.key=value" strings. Out: entries with their lines, or a sentence.
 * Calls inih, keys, blame, units (UTF-8), status.
 * Symbols: none. To change the grammar, change next_line (what inih gets to see) and take_key.
 * Proved by tests/test_case.c and tests/broken.
 *
 * What inih does not do, done here in the function that feeds it lines: it counts no lines for its
 * handler, cuts a line at its buffer's end, goes on after "[section] junk", does not report
 * headers of empty sections, and takes every indented line for more of the value above it, inline
 * comments included. Here a line is more of the value above only when that value ends in a comma
 * and the line has no '=' or ':'; all other indentation means nothing. */
#define _POSIX_C_SOURCE 200809L

#include "source.h"

#include "../alloc.h"
#include "../units/text.h"

#include <ini.h>
#include <stdbool.h>
#include <string.h>

/* Longest line in bytes, what inih's usual buffer of 200 holds; a list may go on over lines. */
enum { LINE_MAX_BYTES = 196 };

/* Most keys of a case: every key of every section is fewer. Bounds the search for repeats. */
enum { ENTRIES_MAX = 512 };

typedef struct {
    th_case_source *source;
    const char *at;  /* what is left of the text */
    int line;        /* number of the line that was handed out last */
    bool continuing; /* that line goes on with the value of the last entry */
    th_status st;
    th_error *err;
} reader;

static bool is_blank(char c)
{
    return c == ' ' || c == '\t';
}

/* Copy text[length] without blanks at its ends and with every run of blanks made one blank. */
static char *copy_squeezed(const char *text, size_t length)
{
    char *copy = th_alloc(length + 1, 1);
    size_t used = 0;

    if (copy == NULL)
        return NULL;
    for (size_t i = 0; i < length; ++i)
        if (!is_blank(text[i]))
            copy[used++] = text[i];
        else if (used > 0 && copy[used - 1] != ' ')
            copy[used++] = ' ';
    while (used > 0 && copy[used - 1] == ' ')
        --used;
    copy[used] = '\0';
    return copy;
}

static th_status no_memory(th_error *err)
{
    return th_fail(err, TH_ENOMEM, "no memory for the keys of a case");
}

/* First byte that is neither blank, printable nor UTF-8; NULL when there is none. */
static const char *find_unprintable(const char *text, size_t length)
{
    for (const char *p = text; p < text + length;) {
        size_t step = th_utf8_length(p);

        if (step == 0 || ((unsigned char)*p < 0x20 && *p != '\t') || *p == 0x7F)
            return p;
        p += step;
    }
    return NULL;
}

/* A header (no longer than a line may be) is "[name]" with nothing but a comment after it, and
 * comes once. */
static th_status take_header(reader *r, const char *text, size_t length)
{
    const char *name = r->source->name;
    const char *close = memchr(text, ']', length), *rest;
    char word[LINE_MAX_BYTES + 1], shown[TH_QUOTE_MAX];
    th_case_section section;

    if (close == NULL)
        return th_case_blame_line(r->err, name, r->line, "a section header wants a closing ]");
    for (rest = close + 1; rest < text + length && is_blank(*rest); ++rest)
        ;
    if (rest < text + length && *rest != ';' && *rest != '#')
        return th_case_blame_line(r->err, name, r->line,
                                  "only a comment may follow the ] of a section header");
    memcpy(word, text + 1, (size_t)(close - text - 1));
    word[close - text - 1] = '\0';
    section = th_case_section_find(word);
    if (section == TH_SECTIONS) {
        th_quote(word, shown, sizeof shown);
        return th_case_blame_line(r->err, name, r->line,
                                  "[%s] is no section; the nearest valid section is [%s]", shown,
                                  th_case_section_nearest(word));
    }
    if (r->source->section_line[section] > 0)
        return th_case_blame_line(r->err, name, r->line,
                                  "section [%s] stands twice, first in line %d", word,
                                  r->source->section_line[section]);
    r->source->section_line[section] = r->line;
    return TH_OK;
}

/* Check one line of the text and copy what inih shall see of it into line[size]. */
static th_status check_line(reader *r, const char *text, size_t length, char *line, size_t size)
{
    const th_case_source *source = r->source;
    const char *bad = find_unprintable(text, length), *value;
    size_t limit = LINE_MAX_BYTES + 2 < size ? LINE_MAX_BYTES : size - 2, used = 0;
    bool empty;

    if (bad != NULL && (unsigned char)*bad < 0x80)
        return th_case_blame_line(r->err, source->name, r->line,
                                  "the line holds the control character 0x%02X", (unsigned)*bad);
    if (bad != NULL)
        return th_case_blame_line(r->err, source->name, r->line,
                                  "the byte 0x%02X is not UTF-8 text", (unsigned char)*bad);
    for (; length > 0 && is_blank(*text); ++text)
        --length;
    if (length > limit)
        return th_case_blame_line(r->err, source->name, r->line,
                                  "the line is longer than %zu bytes; a list may go on in the next "
                                  "line after a comma",
                                  limit);
    empty = length == 0 || *text == ';' || *text == '#';
    value = source->entries > 0 ? source->entry[source->entries - 1].value : "";
    r->continuing = !empty && *text != '[' && value[0] != '\0' && value[strlen(value) - 1] == ',' &&
                    memchr(text, '=', length) == NULL && memchr(text, ':', length) == NULL;
    if (r->continuing)
        line[used++] = ' '; /* what tells inih to go on with the value */
    memcpy(line + used, text, length);
    line[used + length] = '\0';
    return length > 0 && *text == '[' ? take_header(r, text, length) : TH_OK;
}

/* inih's source of lines: fgets on the text, after the checks above. */
static char *next_line(char *line, int size, void *stream)
{
    reader *r = stream;
    const char *text = r->at;
    size_t length, next;

    if (r->st != TH_OK || *text == '\0')
        return NULL;
    length = strcspn(text, "\n");
    next = text[length] == '\n' ? length + 1 : length;
    if (length > 0 && text[length - 1] == '\r')
        --length;
    r->at += next;
    ++r->line;
    r->st = check_line(r, text, length, line, (size_t)size);
    return r->st == TH_OK ? line : NULL;
}

static th_case_entry *find(const th_case_source *source, const char *section, const char *key)
{
    for (int i = 0; i < source->entries; ++i)
        if (strcmp(source->entry[i].section, section) == 0 &&
            strcmp(source->entry[i].key, key) == 0)
            return &source->entry[i];
    return NULL;
}

/* Append an entry, or replace the value of the entry that an override finds. */
static th_status put(th_case_source *source, const char *section, const char *key, char *value,
                     int line, const char *override, th_error *err)
{
    th_case_entry *entry = find(source, section, key);

    if (entry != NULL) {
        free(entry->value);
        entry->value = value;
    } else if (source->entries == ENTRIES_MAX) {
        free(value);
        return th_case_blame_line(err, source->name, line, "a case has at most %d keys",
                                  ENTRIES_MAX);
    } else {
        entry = &source->entry[source->entries++];
        entry->section = copy_squeezed(section, strlen(section));
        entry->key = copy_squeezed(key, strlen(key));
        entry->value = value;
        if (entry->section == NULL || entry->key == NULL)
            return no_memory(err);
    }
    entry->line = line;
    entry->override = override;
    return TH_OK;
}

/* The line above goes on: append to the last value, without the inline comment inih leaves. */
static th_status take_more(reader *r, const char *text)
{
    th_case_entry *entry = &r->source->entry[r->source->entries - 1];
    size_t length = 0, before = strlen(entry->value);
    char *joined;

    while (text[length] != '\0' &&
           !(text[length] == ';' && length > 0 && is_blank(text[length - 1])))
        ++length;
    joined = th_alloc(before + length + 2, 1);
    if (joined == NULL)
        return no_memory(r->err);
    memcpy(joined, entry->value, before);
    joined[before] = ' ';
    memcpy(joined + before + 1, text, length);
    free(entry->value);
    entry->value = copy_squeezed(joined, before + 1 + length);
    free(joined);
    return entry->value != NULL ? TH_OK : no_memory(r->err);
}

static th_status take_key(reader *r, const char *section, const char *key, const char *value)
{
    const th_case_entry *first = find(r->source, section, key);
    char *copy, shown[TH_QUOTE_MAX];
    th_case_entry here = {.line = r->line};
    th_status st;

    th_quote(key, shown, sizeof shown);
    if (section[0] == '\0')
        return th_case_blame_line(r->err, r->source->name, r->line,
                                  "the key %s stands before the first [section]", shown);
    if (key[0] == '\0')
        return th_case_blame_line(r->err, r->source->name, r->line, "there is no key before the =");
    copy = copy_squeezed(value, strlen(value));
    if (copy == NULL)
        return no_memory(r->err);
    if (first == NULL)
        return put(r->source, section, key, copy, r->line, NULL, r->err);
    here.section = first->section;
    here.key = first->key;
    here.value = copy;
    st = th_case_blame(r->err, r->source, &here, "the key stands twice, first in line %d",
                       first->line);
    free(copy);
    return st;
}

/* inih's handler: one key, or one more line of the last value. */
static int take(void *user, const char *section, const char *key, const char *value)
{
    reader *r = user;

    r->st = r->continuing ? take_more(r, value) : take_key(r, section, key, value);
    return r->st == TH_OK;
}

/* One line of the text, for the message about it. */
static void show_line(const char *text, int number, char *shown, size_t size)
{
    char copy[LINE_MAX_BYTES + 1];
    size_t length;

    while (--number > 0)
        text += strcspn(text, "\n") + 1;
    text += strspn(text, " \t");
    length = strcspn(text, "\r\n");
    if (length > sizeof copy - 1)
        length = sizeof copy - 1;
    memcpy(copy, text, length);
    copy[length] = '\0';
    th_quote(copy, shown, size);
}

/* Apply "section.key=value". */
static th_status take_override(th_case_source *source, const char *override, th_error *err)
{
    const char *equal = strchr(override, '='), *dot = strchr(override, '.');
    th_case_entry whole = {.override = override, .key = ""};
    char *section = NULL, *key = NULL, *value = NULL;
    th_status st = TH_EBUG;

    if (strlen(override) > LINE_MAX_BYTES)
        return th_case_blame(err, source, &whole, "an override has at most %d bytes",
                             LINE_MAX_BYTES);
    if (find_unprintable(override, strlen(override)) != NULL)
        return th_case_blame(err, source, &whole, "an override is one line of UTF-8 text");
    if (equal == NULL || dot == NULL || dot > equal)
        return th_case_blame(err, source, &whole,
                             "want section.key=value, such as flow.gap=8, with a dot and a =");
    section = copy_squeezed(override, (size_t)(dot - override));
    key = copy_squeezed(dot + 1, (size_t)(equal - dot - 1));
    value = copy_squeezed(equal + 1, strlen(equal + 1));
    if (section == NULL || key == NULL || value == NULL) {
        st = no_memory(err);
    } else if (key[0] == '\0') {
        st = th_case_blame(err, source, &whole, "there is no key between the dot and the =");
    } else if (th_case_section_find(section) == TH_SECTIONS) {
        char shown[TH_QUOTE_MAX];

        th_quote(section, shown, sizeof shown);
        st = th_case_blame(err, source, &whole,
                           "[%s] is no section; the nearest valid section is [%s]", shown,
                           th_case_section_nearest(section));
    } else {
        st = put(source, section, key, value, 0, override, err);
        value = NULL; /* now the entry's */
    }
    free(section);
    free(key);
    free(value);
    return st;
}

/* Every value must be there, and its comments must be comments. */
static th_status check_values(const th_case_source *source, th_error *err)
{
    for (int i = 0; i < source->entries; ++i) {
        const th_case_entry *entry = &source->entry[i];
        const char *hash = strchr(entry->value, '#');

        if (entry->value[0] == '\0')
            return th_case_blame(err, source, entry, "the value is missing");
        if (strchr(entry->value, ';') != NULL)
            return th_case_blame(err, source, entry,
                                 "a comment after a value begins with a blank and a ;");
        if (hash != NULL && (hash == entry->value || hash[-1] == ' '))
            return th_case_blame(err, source, entry,
                                 "a comment after a value begins with ; here, # opens one only at "
                                 "the start of a line");
    }
    return TH_OK;
}

th_status th_case_source_read(const char *name, const char *text, const char *const *override,
                              int overrides, th_case_source *out, th_error *err)
{
    reader r = {.source = out, .at = text, .st = TH_OK, .err = err};
    int wrong;

    *out = (th_case_source){.name = name};
    out->entry = th_alloc(ENTRIES_MAX, sizeof *out->entry);
    if (out->entry == NULL)
        return no_memory(err);
    if (strlen(text) > TH_CASE_BYTES_MAX)
        return th_case_blame_line(err, name, 0, "the file is larger than %d bytes",
                                  TH_CASE_BYTES_MAX);
    if (strncmp(text, "\xEF\xBB\xBF", 3) == 0) /* byte order mark */
        r.at += 3;
    text = r.at;
    wrong = ini_parse_stream(next_line, &r, take, &r);
    if (wrong < 0)
        return no_memory(err);
    if (wrong > 0 && (r.st == TH_OK || wrong < r.line)) { /* a line that inih cannot take */
        char shown[TH_QUOTE_MAX];

        show_line(text, wrong, shown, sizeof shown);
        return th_case_blame_line(err, name, wrong,
                                  "want key = value, [section] or a comment, not \"%s\"", shown);
    }
    if (r.st != TH_OK)
        return r.st;
    for (int i = 0; i < overrides; ++i) {
        th_status st = take_override(out, override[i], err);

        if (st != TH_OK)
            return st;
    }
    return check_values(out, err);
}

void th_case_source_clear(th_case_source *source)
{
    for (int i = 0; i < source->entries; ++i) {
        free(source->entry[i].section);
        free(source->entry[i].key);
        free(source->entry[i].value);
    }
    free(source->entry);
    source->entry = NULL;
    source->entries = 0;
}

const th_case_entry *th_case_source_find(const th_case_source *source, const char *section,
                                         const char *key)
{
    return find(source, section, key);
}

const th_case_entry *th_case_source_key(const th_case_source *source, th_case_key_id id)
{
    return find(source, th_case_key_section(id), th_case_key_name(id));
}
