/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A measured or computed profile: rows of numbers over x, from a CSV file. What goes in: a file,
 * the system of units. What comes out: ascending rows with names, in reduced units after scaling.
 * Depends on units, status.
 *
 * The file: RFC 4180, UTF-8, decimal points. Lines that begin with # are comments, before and
 * between rows. The first other line names the columns, in any order: x and one or more of speed,
 * sound, density, potential, and for each of these NAME_error, its standard deviation. In SI each
 * name is followed by its unit in brackets, such as `x [um],speed [mm/s]`; in reduced units by
 * nothing. Rows may be unevenly spaced and must have different x; they are sorted by x. */
#ifndef TWINHORIZON_DATA_H
#define TWINHORIZON_DATA_H

#include <stdbool.h>
#include <stdint.h>
#include <twinhorizon/status.h>
#include <twinhorizon/units.h>

#ifdef __cplusplus
extern "C" {
#endif

/* Columns; NAME + TH_DATA_ERROR is the standard deviation of NAME. */
typedef enum {
    TH_DATA_X,
    TH_DATA_SPEED,
    TH_DATA_SOUND,
    TH_DATA_DENSITY,
    TH_DATA_POTENTIAL,
    TH_DATA_NAMES,
    TH_DATA_ERROR = TH_DATA_NAMES - TH_DATA_SPEED, /* offset from NAME to its error */
    TH_DATA_COLUMNS = TH_DATA_NAMES + TH_DATA_ERROR
} th_data_column;

enum { TH_DATA_ROWS_MIN = 50, TH_DATA_ROWS_MAX = 100000 };

typedef struct th_data th_data;

/**
 * Read a table.
 *
 * @param[in]  path    file to read
 * @param[in]  system  reduced: bare names; SI: names with units
 * @param[out] out     owned by the caller; values as written (reduced, or in SI units)
 *
 * @retval TH_EIO     the file cannot be read
 * @retval TH_EINVAL  the sentence begins with FILE:LINE and names column, rule and value: unknown,
 *                    repeated or missing column, unit missing or wrong, not a finite number, a row
 *                    of another length, two rows with one x, speeds, sound speeds, densities or
 *                    errors that are not > 0 (speeds may all be < 0: the flow then goes to smaller
 *                    x), fewer than TH_DATA_ROWS_MIN or more than TH_DATA_ROWS_MAX rows
 * Tests: tests/test_data.c.
 */
TH_MUST_USE th_status th_data_read(const char *path, th_system system, th_data **out,
                                   th_error *err);

/** Values divided by the scale's factors: from SI to reduced units. At most once. */
void th_data_scale(th_data *data, const th_scale *scale);

/** Release a table; NULL is allowed. */
void th_data_destroy(th_data *data);

int th_data_rows(const th_data *data);
/** [rows] values of a column, ascending in x; NULL when the file has none. */
const double *th_data_values(const th_data *data, th_data_column column);
/** Name of a column as in the file's header, such as "speed_error". */
const char *th_data_name(th_data_column column);
/** FNV-1a hash of the bytes of the file: tells whether the file changed. */
uint64_t th_data_hash(const th_data *data);
/** Path as it was given to th_data_read. */
const char *th_data_path(const th_data *data);

#ifdef __cplusplus
}
#endif
#endif
