/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Reading tables and taking up unfinished ones. What goes in: a file that write.c left, whole or
 * torn. What comes out: its rows, one call each, and for th_table_resume a table that goes on
 * after the last whole row. May call: csv, io_error, status, buffer.
 * Tests: tests/test_table.c. */
#include "table.h"

#include "csv.h"
#include "io_error.h"

#include <errno.h>
#include <string.h>
#include <unistd.h>

th_status th_table_read(const char *path, th_row_reader read, void *ctx, th_error *err)
{
    th_status st = TH_EBUG;
    th_csv *csv = NULL;
    FILE *file = fopen(path, "r");
    const char *const *cell;
    int count, columns = 0;
    th_csv_end end;

    if (file == NULL)
        return th_io_fail(err, path, "open for reading", errno);
    st = th_csv_create(path, file, &csv, err);
    for (long row = 0; st == TH_OK; row++) {
        st = th_csv_next(csv, &cell, &count, &end, err);
        if (st != TH_OK || end == TH_CSV_NONE)
            break;
        if (row == 0)
            columns = count;
        if (end == TH_CSV_TORN)
            st = th_fail(err, TH_EINVAL, "%s:%ld: the file ends inside quotes", path,
                         th_csv_line(csv));
        else if (count != columns)
            st = th_fail(err, TH_EINVAL, "%s:%ld: %d cells, the header has %d", path,
                         th_csv_line(csv), count, columns);
        else if (!read(ctx, row, count, cell))
            break;
    }
    th_csv_destroy(csv);
    (void)fclose(file);
    return st;
}

/* TH_OK when the file holds exactly the metadata of the table. */
static th_status check_metadata(const th_table *table, const char *path, th_error *err)
{
    FILE *file = fopen(path, "r");
    size_t i = 0;
    int byte;

    if (file == NULL)
        return th_io_fail(err, path, "open for reading", errno);
    while ((byte = getc(file)) != EOF && i < table->json.length &&
           byte == (unsigned char)table->json.data[i])
        i++;
    (void)fclose(file);
    if (byte != EOF || i != table->json.length)
        return th_fail(err, TH_EINVAL,
                       "%s: written for another case, other columns or by another version, so the "
                       "table beside it cannot be continued",
                       path);
    return TH_OK;
}

static bool header_fits(const th_table *table, int count, const char *const *cell)
{
    if (count != table->count)
        return false;
    for (int i = 0; i < count; i++)
        if (strcmp(cell[i], table->column[i].name) != 0)
            return false;
    return true;
}

/* Hand out the whole rows of table->file; *kept is where the next row goes, 0 when there is not
 * even a header. */
static th_status read_kept(th_table *table, th_row_reader read, void *ctx, off_t *kept,
                           th_error *err)
{
    th_csv *csv = NULL;
    th_status st = th_csv_create(table->part, table->file, &csv, err);
    const char *const *cell;
    int count;
    th_csv_end end;

    *kept = 0;
    for (long row = 0; st == TH_OK; row++) {
        st = th_csv_next(csv, &cell, &count, &end, err);
        if (st != TH_OK || end != TH_CSV_WHOLE)
            break;
        if (row == 0) {
            const char *beside =
                access(table->meta_part, F_OK) == 0 ? table->meta_part : table->meta;

            st = check_metadata(table, beside, err);
            if (st != TH_OK)
                break;
        }
        if (row == 0 ? !header_fits(table, count, cell) : count != table->count) {
            st = th_fail(err, TH_EINVAL, "%s:%ld: the cells do not fit the table's %d columns",
                         table->part, th_csv_line(csv), table->count);
            break;
        }
        if (read != NULL && !read(ctx, row, count, cell))
            break;
        *kept = th_csv_offset(csv);
    }
    th_csv_destroy(csv);
    return st;
}

/* A finished table becomes unfinished again. */
static th_status reopen(const th_table *table, th_error *err)
{
    th_status st = check_metadata(table, table->meta, err);

    if (st != TH_OK)
        return st;
    if (rename(table->path, table->part) != 0)
        return th_io_fail(err, table->part, "give this name to the table", errno);
    if (rename(table->meta, table->meta_part) != 0)
        return th_io_fail(err, table->meta_part, "give this name to the metadata", errno);
    return TH_OK;
}

th_status th_table_resume(const char *path, const th_column *column, int count, const char *title,
                          const char *case_text, th_row_reader read, void *ctx, th_table **out,
                          th_error *err)
{
    th_status st = TH_EBUG;
    th_table *table = NULL;
    off_t kept = 0;

    *out = NULL;
    st = th_table_prepare(path, NULL, column, count, title, case_text, &table, err);
    if (st != TH_OK)
        return st;
    table->keep = true;
    if (table->part == NULL) {
        st = th_fail(err, TH_EINVAL, "%s: no file, so it cannot be continued", path);
        goto done;
    }
    if (access(table->part, F_OK) != 0 && access(path, F_OK) == 0) {
        st = reopen(table, err);
        if (st != TH_OK)
            goto done;
    }
    st = th_table_lock(table, err);
    if (st != TH_OK)
        goto done;
    st = read_kept(table, read, ctx, &kept, err);
    if (st != TH_OK)
        goto done;
    if (kept == 0) {
        rewind(table->file);
        st = th_table_begin(table, err);
        goto done;
    }
    if (fseeko(table->file, kept, SEEK_SET) != 0 || ftruncate(fileno(table->file), kept) != 0) {
        st = th_io_fail(err, table->part, "drop a torn row", errno);
        goto done;
    }
    if (access(table->meta_part, F_OK) != 0)
        st = th_table_write_metadata(table, err);
    table->made = st == TH_OK;
done:
    if (st == TH_OK)
        *out = table;
    else
        th_table_destroy(table);
    return st;
}
