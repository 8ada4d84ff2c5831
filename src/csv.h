/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Reading comma-separated values (RFC 4180), private to the library. Depends on status. */
#ifndef TH_CSV_H
#define TH_CSV_H

#include <stdio.h>
#include <sys/types.h>
#include <twinhorizon/status.h>

typedef struct th_csv th_csv;

/* How a record ended. */
typedef enum {
    TH_CSV_NONE,  /* there was none: end of file */
    TH_CSV_WHOLE, /* with a line end */
    TH_CSV_BARE,  /* at the end of the file, without a line end */
    TH_CSV_TORN   /* at the end of the file, inside quotes */
} th_csv_end;

/**
 * Start reading at the position of `file`, past a byte order mark.
 *
 * @param[in] name  stands for the file in messages (borrowed)
 * @param[in] file  borrowed, open for reading
 */
TH_MUST_USE th_status th_csv_create(const char *name, FILE *file, th_csv **out, th_error *err);

/** Release a reader, not its file; NULL is allowed. */
void th_csv_destroy(th_csv *csv);

/**
 * Read the next record.
 *
 * @param[out] cell   [count] unquoted texts, valid until the next call
 * @param[out] count  >= 1; 0 when end is TH_CSV_NONE
 *
 * @retval TH_EINVAL  a quote inside a bare cell, text after a closing quote, a carriage return
 *                    without a line feed, or a NUL byte: the text says FILE:LINE
 * @retval TH_EIO     the file cannot be read
 */
TH_MUST_USE th_status th_csv_next(th_csv *csv, const char *const **cell, int *count,
                                  th_csv_end *end, th_error *err);

/** Line on which the last record began, from 1. */
long th_csv_line(const th_csv *csv);

/** Bytes read so far: the place after the last record. */
off_t th_csv_offset(const th_csv *csv);

#endif
