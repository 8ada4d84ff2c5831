/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tables: comma-separated values (RFC 4180: lines end in CR LF, cells with commas, quotes or line
 * ends are quoted) with, beside each table FILE, its metadata FILE-metadata.json in the vocabulary
 * of "Metadata Vocabulary for Tabular Data", W3C Recommendation, 17 December 2015. What goes in:
 * columns, then rows cell by cell. What comes out: both files, or neither. Depends on units,
 * status.
 *
 * A table grows in FILE.part and FILE-metadata.json.part and gets its name when it is finished, so
 * that no reader sees half a table. A run that is killed leaves the .part files with every row
 * that was flushed; th_table_resume takes them up again. */
#ifndef TWINHORIZON_TABLE_H
#define TWINHORIZON_TABLE_H

#include <stdbool.h>
#include <stdio.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

enum { TH_COLUMN_NAME_MAX = 63 }; /* bytes in a column's name; a key of a case has at most 31 */

typedef struct {
    const char *name;        /* the header cell: letters, digits and _, not _ first */
    const char *title;       /* a few words for people; may be NULL */
    const char *unit;        /* as th_dimension_unit gives it; NULL: the column has none */
    const char *datatype;    /* "number", "integer", "boolean" or "string" */
    const char *description; /* a sentence; may be NULL */
    const char *format;      /* "string" only: regular expression of all values, such as
                                "ok|undecided|failed"; may be NULL */
} th_column;

typedef struct th_table th_table;

/**
 * Start a table.
 *
 * @param[in]  path       the file; a device or pipe is written as it stands, without metadata
 * @param[in]  stream     NULL, or an open stream that gets the table instead of a file, without
 *                        metadata (borrowed; path then only names it in messages)
 * @param[in]  column     [count] copied
 * @param[in]  title      of the whole table
 * @param[in]  case_text  the case in force (th_case.text), put into the metadata
 * @param[out] out        owned by the caller; NULL on failure
 *
 * @retval TH_EINVAL  count < 1, a column's name or datatype breaks its rule, two names are equal
 * @retval TH_EIO     a file cannot be written, or another process is writing this table; the text
 *                    names the file, the action and the system's reason
 *
 * An older FILE stays as it is until th_table_finish; an older FILE.part is overwritten.
 */
TH_MUST_USE th_status th_table_create(const char *path, FILE *stream, const th_column *column,
                                      int count, const char *title, const char *case_text,
                                      th_table **out, th_error *err);

/* What a caller does with a row that is read: row 0 is the header. Cells are valid during the call
 * only. False stops the reading. */
typedef bool (*th_row_reader)(void *ctx, long row, int count, const char *const *cell);

/**
 * Take up a table that a killed run left, or a finished one, to add rows; start one when there is
 * neither.
 *
 * Arguments as th_table_create, and:
 * @param[in]  read  called for the header and each complete row that is kept; when it returns
 *                   false, that row and all after it are dropped. May be NULL.
 *
 * @retval TH_EINVAL  the table was written for other columns, another case, title or version, or
 *                    it is no RFC 4180; nothing was changed
 *
 * A row without its line end (the run was killed while writing it) is dropped. The table is kept,
 * as by th_table_keep: it may hold the work of days.
 */
TH_MUST_USE th_status th_table_resume(const char *path, const th_column *column, int count,
                                      const char *title, const char *case_text, th_row_reader read,
                                      void *ctx, th_table **out, th_error *err);

/**
 * The next cell of a row. A cell that breaks a rule (its kind is not the column's, a number is not
 * finite, the row is full) or finds no memory makes th_table_end_row fail.
 */
void th_table_put_number(th_table *table, double value); /* as th_number_write */
void th_table_put_exact(th_table *table, double value);  /* as th_number_write_exact */
void th_table_put_integer(th_table *table, long value);
void th_table_put_boolean(th_table *table, bool value); /* true or false */
void th_table_put_text(th_table *table, const char *text);
void th_table_put_nothing(th_table *table); /* the column has no value in this row */

/**
 * End a row and write it.
 *
 * @retval TH_EINVAL  a cell broke its rule, or cells are missing; the row is not written and the
 *                    next put starts a new row
 * @retval TH_EIO     the row cannot be written; what the file holds after that is unknown
 */
TH_MUST_USE th_status th_table_end_row(th_table *table, th_error *err);

/** Bring all rows so far to the disk (TH_EIO). Costs one fsync. */
TH_MUST_USE th_status th_table_flush(th_table *table, th_error *err);

/** From now on th_table_destroy leaves the .part files for th_table_resume. */
void th_table_keep(th_table *table);

/**
 * Bring the table to the disk under its own name, the metadata first: a reader who finds a new
 * table finds its metadata too. After success only th_table_destroy may follow.
 *
 * @retval TH_EIO     as above; the older FILE, if any, is still there
 * @retval TH_EINVAL  a row has begun and not ended
 */
TH_MUST_USE th_status th_table_finish(th_table *table, th_error *err);

/** Release a table; NULL is allowed. Unless it is finished or kept, its .part files are removed. */
void th_table_destroy(th_table *table);

/**
 * Read a finished table of any origin.
 *
 * @retval TH_EIO     the file cannot be read
 * @retval TH_EINVAL  it is no RFC 4180, or a row has not as many cells as the header; the text
 *                    starts with FILE:LINE. Rows before that were handed to `read`.
 */
TH_MUST_USE th_status th_table_read(const char *path, th_row_reader read, void *ctx, th_error *err);

#ifdef __cplusplus
}
#endif
#endif
