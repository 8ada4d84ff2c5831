/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Reading comma-separated values. What goes in: an open file. What comes out: one record of
 * unquoted cells a call. May call: status, io_error, buffer, alloc.
 * Source of the grammar: RFC 4180, "Common Format and MIME Type for Comma-Separated Values (CSV)
 * Files", section 2; a line may also end in a line feed alone, and a byte order mark is passed
 * over, as spreadsheets write them.
 * Tests: tests/test_table.c, tests/check_tables.py. */
#include "csv.h"

#include "alloc.h"
#include "buffer.h"
#include "io_error.h"

#include <errno.h>
#include <limits.h>
#include <string.h>

struct th_csv {
    const char *name;
    FILE *file;
    long line;         /* of the next byte, from 1 */
    long first;        /* line of the last record */
    off_t offset;      /* bytes read */
    th_buffer text;    /* the cells of a record, each with a NUL */
    const char **cell; /* [room] into text, set when the record is complete */
    int room;
};

/* Where the scan of a record stands. */
typedef enum { AT_START, IN_BARE, IN_QUOTES, AFTER_QUOTE } place;

static int take(th_csv *csv)
{
    int byte = getc(csv->file);

    if (byte != EOF)
        csv->offset++;
    if (byte == '\n')
        csv->line++;
    return byte;
}

th_status th_csv_create(const char *name, FILE *file, th_csv **out, th_error *err)
{
    static const char mark[] = "\xEF\xBB\xBF"; /* U+FEFF in UTF-8 */
    th_csv *csv = th_alloc(1, sizeof *csv);
    int byte;

    *out = NULL;
    if (csv == NULL)
        return th_fail(err, TH_ENOMEM, "%s: no memory for reading", name);
    csv->name = name;
    csv->file = file;
    csv->line = 1;
    byte = getc(file);
    if (byte == (unsigned char)mark[0]) {
        if (getc(file) != (unsigned char)mark[1] || getc(file) != (unsigned char)mark[2]) {
            th_csv_destroy(csv);
            return th_fail(err, TH_EINVAL, "%s:1: the first bytes are no UTF-8 text", name);
        }
        csv->offset = (off_t)strlen(mark);
    } else if (byte != EOF) {
        (void)ungetc(byte, file);
    }
    *out = csv;
    return TH_OK;
}

void th_csv_destroy(th_csv *csv)
{
    if (csv == NULL)
        return;
    free(csv->text.data);
    free(csv->cell);
    free(csv);
}

/* Point cell[0..count-1] at the texts that follow one another in the buffer. */
static th_status split(th_csv *csv, int count, th_error *err)
{
    const char *text = csv->text.data;

    if (csv->text.failed)
        return th_fail(err, TH_ENOMEM, "%s:%ld: no memory for the record", csv->name, csv->first);
    if (count > csv->room) {
        const char **cell = realloc(csv->cell, (size_t)count * sizeof *cell);

        if (cell == NULL)
            return th_fail(err, TH_ENOMEM, "%s:%ld: no memory for %d cells", csv->name, csv->first,
                           count);
        csv->cell = cell;
        csv->room = count;
    }
    for (int i = 0; i < count; i++) {
        csv->cell[i] = text;
        text += strlen(text) + 1;
    }
    return TH_OK;
}

/* A byte that no rule of the grammar allows where it stands; NULL when all is well. */
static const char *broken_rule(place where, int byte)
{
    if (byte == '\0')
        return "a NUL byte";
    if (where == IN_BARE && byte == '"')
        return "a quote inside a cell that is not quoted";
    if (where == AFTER_QUOTE && byte != '"' && byte != ',' && byte != '\r' && byte != '\n')
        return "text after the closing quote of a cell";
    return NULL;
}

th_status th_csv_next(th_csv *csv, const char *const **cell, int *count, th_csv_end *end,
                      th_error *err)
{
    place where = AT_START;
    int cells = 0;
    th_status st;

    *cell = NULL;
    *count = 0;
    *end = TH_CSV_NONE;
    csv->text.length = 0;
    csv->first = csv->line;
    for (;;) {
        int byte = take(csv);
        const char *rule;
        char kept;

        if (byte == EOF) {
            if (ferror(csv->file))
                return th_io_fail(err, csv->name, "read", errno);
            if (where == AT_START && cells == 0)
                return TH_OK;
            *end = where == IN_QUOTES ? TH_CSV_TORN : TH_CSV_BARE;
            break;
        }
        rule = broken_rule(where, byte);
        if (rule != NULL)
            return th_fail(err, TH_EINVAL, "%s:%ld: %s", csv->name, csv->line, rule);
        if (where == IN_QUOTES && byte == '"') {
            where = AFTER_QUOTE;
            continue;
        }
        if (where == AT_START && byte == '"') {
            where = IN_QUOTES;
            continue;
        }
        if (where != IN_QUOTES && byte == ',') {
            if (cells == INT_MAX - 1)
                return th_fail(err, TH_EINVAL, "%s:%ld: too many cells", csv->name, csv->first);
            th_buffer_add(&csv->text, "", 1); /* the NUL that ends the cell */
            cells++;
            where = AT_START;
            continue;
        }
        if (where != IN_QUOTES && byte == '\r') {
            byte = take(csv);
            if (byte == EOF) { /* the line end is torn */
                *end = TH_CSV_BARE;
                break;
            }
            if (byte != '\n')
                return th_fail(err, TH_EINVAL, "%s:%ld: a carriage return without a line feed",
                               csv->name, csv->line);
        }
        if (where != IN_QUOTES && byte == '\n') {
            *end = TH_CSV_WHOLE;
            break;
        }
        /* AFTER_QUOTE a second quote stands for one quote, and the cell goes on */
        where = where == AT_START || where == IN_BARE ? IN_BARE : IN_QUOTES;
        kept = (char)byte;
        th_buffer_add(&csv->text, &kept, 1);
    }
    th_buffer_add(&csv->text, "", 1);
    st = split(csv, cells + 1, err);
    if (st == TH_OK) {
        *cell = csv->cell;
        *count = cells + 1;
    }
    return st;
}

long th_csv_line(const th_csv *csv)
{
    return csv->first;
}

off_t th_csv_offset(const th_csv *csv)
{
    return csv->offset;
}
