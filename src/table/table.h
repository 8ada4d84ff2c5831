/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What the files of the table subject share, private to them. Depends on buffer, status. */
#ifndef TH_TABLE_TABLE_H
#define TH_TABLE_TABLE_H

#include <twinhorizon/table.h>

#include "buffer.h"

typedef enum { TH_KIND_NUMBER, TH_KIND_INTEGER, TH_KIND_BOOLEAN, TH_KIND_STRING } th_cell_kind;

typedef struct {
    char name[TH_COLUMN_NAME_MAX + 1];
    th_cell_kind kind;
} th_table_column;

struct th_table {
    char *path;
    char *part;      /* PATH.part; NULL when the table is written as it stands */
    char *meta;      /* PATH-metadata.json; NULL as part */
    char *meta_part; /* PATH-metadata.json.part; NULL as part */
    th_buffer json;  /* the metadata */
    FILE *file;
    bool borrowed; /* file is the caller's */
    bool keep;     /* destroy leaves the .part files */
    bool made;     /* the .part files are this table's */
    int number;    /* errno of the first write that failed; 0: none did */
    int count;
    th_table_column *column; /* [count] */
    int cells;               /* put so far in the row */
    th_buffer row;           /* text of the row so far */
    th_error wrong;          /* the first cell that broke a rule; TH_OK when none did */
};

/** Write the metadata of a table: one JSON object into json (grows; look at json->failed). */
void th_table_describe(const char *path, const th_column *column, int count, const char *title,
                       const char *case_text, th_buffer *json);

/** Check the columns and make a table without a file yet. stream as in th_table_create. */
TH_MUST_USE th_status th_table_prepare(const char *path, FILE *stream, const th_column *column,
                                       int count, const char *title, const char *case_text,
                                       th_table **out, th_error *err);

/** Open PATH.part for this process alone, making it when it is missing; nothing is truncated. */
TH_MUST_USE th_status th_table_lock(th_table *table, th_error *err);

/** Empty the file, write the metadata beside it, and the header. */
TH_MUST_USE th_status th_table_begin(th_table *table, th_error *err);

/** Write the metadata to PATH-metadata.json.part and bring it to the disk. */
TH_MUST_USE th_status th_table_write_metadata(const th_table *table, th_error *err);

#endif
