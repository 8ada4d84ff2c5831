/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Writing tables. What goes in: columns, then cells. What comes out: FILE (RFC 4180) and
 * FILE-metadata.json, both written beside and renamed. May call: units, status, io_error, buffer,
 * alloc.
 *
 * To add a kind of cell: a word in `kinds`, a value in th_cell_kind, a th_table_put_... here.
 * Tests: tests/test_table.c (rules, errors of the disk), tests/check_tables.py (read back by
 * another reader). */
#include "table.h"

#include "alloc.h"
#include "io_error.h"

#include <twinhorizon/units.h>

#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

enum {
    LOCK_TRIES = 100,    /* each lost try means that another process finished a table in between */
    NUMBER_TEXT_MAX = 64 /* bytes; th_number_write wants 32, a 64-bit integer takes 21 */
};

/* Words of CSVW, in the order of th_cell_kind. */
static const char *const kinds[] = {"number", "integer", "boolean", "string"};

/* A name is a variable of a URI template, as CSVW wants it; _ first is reserved there. */
static bool name_is_valid(const char *name)
{
    static const char letters[] = "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789_";
    size_t length = strlen(name);

    return length > 0 && length <= TH_COLUMN_NAME_MAX && name[0] != '_' &&
           strspn(name, letters) == length;
}

static th_status copy_columns(th_table *table, const th_column *column, th_error *err)
{
    for (int i = 0; i < table->count; i++) {
        const char *name = column[i].name;
        size_t kind = 0;

        if (!name_is_valid(name))
            return th_fail(err, TH_EINVAL,
                           "%s: column name '%s', want 1 to %d letters, digits and _, not _ first",
                           table->path, name, TH_COLUMN_NAME_MAX);
        while (kind < sizeof kinds / sizeof *kinds && strcmp(kinds[kind], column[i].datatype) != 0)
            kind++;
        if (kind == sizeof kinds / sizeof *kinds)
            return th_fail(err, TH_EINVAL,
                           "%s: column %s: datatype '%s', want number, integer, boolean or string",
                           table->path, name, column[i].datatype);
        if (column[i].format != NULL && kind != TH_KIND_STRING)
            return th_fail(err, TH_EINVAL,
                           "%s: column %s: a format is for strings only, not for %s", table->path,
                           name, column[i].datatype);
        for (int k = 0; k < i; k++)
            if (strcmp(table->column[k].name, name) == 0)
                return th_fail(err, TH_EINVAL, "%s: two columns are called %s", table->path, name);
        memcpy(table->column[i].name, name, strlen(name) + 1);
        table->column[i].kind = (th_cell_kind)kind;
    }
    return TH_OK;
}

/* path followed by ending, to be released with free; NULL when memory is short. */
static char *path_with(const char *path, const char *ending)
{
    size_t length = strlen(path);
    char *text = th_alloc(length + strlen(ending) + 1, 1);

    if (text != NULL) {
        memcpy(text, path, length);
        memcpy(text + length, ending, strlen(ending) + 1);
    }
    return text;
}

th_status th_table_prepare(const char *path, FILE *stream, const th_column *column, int count,
                           const char *title, const char *case_text, th_table **out, th_error *err)
{
    th_status st = TH_EBUG;
    th_table *table = NULL;
    struct stat found;

    *out = NULL;
    if (count < 1)
        return th_fail(err, TH_EINVAL, "%s: %d columns, want at least 1", path, count);
    table = th_alloc(1, sizeof *table);
    if (table == NULL)
        return th_fail(err, TH_ENOMEM, "%s: no memory for a table", path);
    table->count = count;
    table->path = path_with(path, "");
    table->column = th_alloc((size_t)count, sizeof *table->column);
    if (table->path == NULL || table->column == NULL) {
        st = th_fail(err, TH_ENOMEM, "%s: no memory for %d columns", path, count);
        goto done;
    }
    st = copy_columns(table, column, err);
    if (st != TH_OK)
        goto done;
    if (stream != NULL) {
        table->file = stream;
        table->borrowed = true;
        goto done;
    }
    if (stat(path, &found) == 0 && !S_ISREG(found.st_mode)) {
        /* a device or pipe: renaming a file over it would destroy it */
        int fd = open(path, O_WRONLY | O_CLOEXEC);

        table->file = fd >= 0 ? fdopen(fd, "w") : NULL;
        if (table->file == NULL) {
            st = th_io_fail(err, path, "open for writing", errno);
            if (fd >= 0)
                (void)close(fd);
        }
        goto done;
    }
    table->part = path_with(path, ".part");
    table->meta = path_with(path, "-metadata.json");
    table->meta_part = path_with(path, "-metadata.json.part");
    th_table_describe(path, column, count, title, case_text, &table->json);
    if (table->part == NULL || table->meta == NULL || table->meta_part == NULL ||
        table->json.failed)
        st = th_fail(err, TH_ENOMEM, "%s: no memory for the metadata", path);
done:
    if (st != TH_OK)
        th_table_destroy(table);
    else
        *out = table;
    return st;
}

/* True when the open file is still the one that `path` names. */
static bool names_file(const char *path, int fd)
{
    struct stat by_name, by_fd;

    return stat(path, &by_name) == 0 && fstat(fd, &by_fd) == 0 && by_name.st_dev == by_fd.st_dev &&
           by_name.st_ino == by_fd.st_ino;
}

th_status th_table_lock(th_table *table, th_error *err)
{
    int fd = -1;

    /* Between opening and locking, another process may have finished its table: the file then has
     * its final name and must not be touched, so look again. */
    for (int i = 0; i < LOCK_TRIES; i++) {
        struct flock lock = {.l_type = F_WRLCK, .l_whence = SEEK_SET};

        fd = open(table->part, O_RDWR | O_CREAT | O_CLOEXEC, 0666);
        if (fd < 0)
            return th_io_fail(err, table->part, "open for writing", errno);
        /* other errors: a file system without locks, where two writers are not told apart */
        if (fcntl(fd, F_SETLK, &lock) != 0 && (errno == EACCES || errno == EAGAIN)) {
            (void)close(fd);
            return th_fail(err, TH_EIO, "%s: cannot write: another process is writing it",
                           table->part);
        }
        if (names_file(table->part, fd))
            break;
        (void)close(fd);
        fd = -1;
    }
    if (fd < 0)
        return th_fail(err, TH_EIO, "%s: cannot lock: the file was replaced %d times", table->part,
                       LOCK_TRIES);
    table->file = fdopen(fd, "r+");
    if (table->file == NULL) {
        int number = errno;

        (void)close(fd);
        return th_io_fail(err, table->part, "open for writing", number);
    }
    return TH_OK;
}

th_status th_table_write_metadata(const th_table *table, th_error *err)
{
    FILE *file = fopen(table->meta_part, "w");
    bool good;
    int number;

    if (file == NULL)
        return th_io_fail(err, table->meta_part, "open for writing", errno);
    good = fwrite(table->json.data, 1, table->json.length, file) == table->json.length &&
           fflush(file) == 0 && fsync(fileno(file)) == 0;
    number = errno;
    if (fclose(file) != 0 && good) {
        good = false;
        number = errno;
    }
    if (!good) {
        (void)unlink(table->meta_part);
        return th_io_fail(err, table->meta_part, "write", number);
    }
    return TH_OK;
}

static th_status write_row(th_table *table, th_error *err)
{
    th_status st = TH_OK;

    if (table->number == 0 &&
        fwrite(table->row.data, 1, table->row.length, table->file) != table->row.length)
        table->number = errno;
    if (table->number != 0) {
        st = th_io_fail(err, table->part != NULL ? table->part : table->path, "write a row",
                        table->number);
    }
    table->row.length = 0;
    return st;
}

th_status th_table_begin(th_table *table, th_error *err)
{
    th_status st;

    if (table->part != NULL) {
        table->made = true;
        if (ftruncate(fileno(table->file), 0) != 0)
            return th_io_fail(err, table->part, "empty", errno);
        st = th_table_write_metadata(table, err);
        if (st != TH_OK)
            return st;
    }
    for (int i = 0; i < table->count; i++) {
        if (i > 0)
            th_buffer_text(&table->row, ",");
        th_buffer_text(&table->row, table->column[i].name); /* needs no quotes */
    }
    th_buffer_text(&table->row, "\r\n");
    if (table->row.failed)
        return th_fail(err, TH_ENOMEM, "%s: no memory for the header", table->path);
    return write_row(table, err);
}

th_status th_table_create(const char *path, FILE *stream, const th_column *column, int count,
                          const char *title, const char *case_text, th_table **out, th_error *err)
{
    th_table *table = NULL;
    th_status st;

    *out = NULL;
    st = th_table_prepare(path, stream, column, count, title, case_text, &table, err);
    if (st == TH_OK && table->part != NULL)
        st = th_table_lock(table, err);
    if (st == TH_OK)
        st = th_table_begin(table, err);
    if (st == TH_OK)
        *out = table;
    else
        th_table_destroy(table);
    return st;
}

/* Start a cell: the comma before it, and whether the column takes this kind. */
static bool start_cell(th_table *table, th_cell_kind kind)
{
    const th_table_column *column;

    if (table->cells >= table->count) {
        if (table->wrong.status == TH_OK)
            (void)th_fail(&table->wrong, TH_EINVAL, "%s: a row of more than %d cells", table->path,
                          table->count);
        return false;
    }
    column = &table->column[table->cells];
    if (table->cells++ > 0)
        th_buffer_text(&table->row, ",");
    if (column->kind == kind)
        return true;
    if (table->wrong.status == TH_OK)
        (void)th_fail(&table->wrong, TH_EINVAL, "%s: column %s: got %s, want %s", table->path,
                      column->name, kinds[kind], kinds[column->kind]);
    return false;
}

static void put_number(th_table *table, double value, bool exact)
{
    char text[NUMBER_TEXT_MAX];

    if (!start_cell(table, TH_KIND_NUMBER))
        return;
    if (exact)
        th_number_write_exact(value, text, sizeof text);
    else
        th_number_write(value, text, sizeof text);
    if (!isfinite(value) && table->wrong.status == TH_OK)
        (void)th_fail(&table->wrong, TH_EINVAL, "%s: column %s: got %s, want a finite number",
                      table->path, table->column[table->cells - 1].name, text);
    th_buffer_text(&table->row, text);
}

void th_table_put_number(th_table *table, double value)
{
    put_number(table, value, false);
}

void th_table_put_exact(th_table *table, double value)
{
    put_number(table, value, true);
}

void th_table_put_integer(th_table *table, long value)
{
    char text[NUMBER_TEXT_MAX];

    if (!start_cell(table, TH_KIND_INTEGER))
        return;
    (void)snprintf(text, sizeof text, "%ld", value);
    th_buffer_text(&table->row, text);
}

void th_table_put_boolean(th_table *table, bool value)
{
    if (start_cell(table, TH_KIND_BOOLEAN))
        th_buffer_text(&table->row, value ? "true" : "false");
}

void th_table_put_text(th_table *table, const char *text)
{
    if (!start_cell(table, TH_KIND_STRING))
        return;
    if (text[0] != '\0' && text[strcspn(text, ",\"\r\n")] == '\0' && text[0] != ' ' &&
        text[strlen(text) - 1] != ' ') {
        th_buffer_text(&table->row, text);
        return;
    }
    th_buffer_text(&table->row, "\"");
    for (; *text != '\0'; text++) {
        if (*text == '"')
            th_buffer_text(&table->row, "\"");
        th_buffer_add(&table->row, text, 1);
    }
    th_buffer_text(&table->row, "\"");
}

void th_table_put_nothing(th_table *table)
{
    th_cell_kind kind =
        table->cells < table->count ? table->column[table->cells].kind : TH_KIND_STRING;

    /* a line with nothing on it would be no row for many readers */
    if (start_cell(table, kind) && table->count == 1)
        th_buffer_text(&table->row, "\"\"");
}

th_status th_table_end_row(th_table *table, th_error *err)
{
    th_status st = TH_OK;

    if (table->wrong.status != TH_OK)
        st = th_fail(err, table->wrong.status, "%s", table->wrong.text);
    else if (table->cells < table->count)
        st = th_fail(err, TH_EINVAL, "%s: a row of %d cells, want %d", table->path, table->cells,
                     table->count);
    th_buffer_text(&table->row, "\r\n");
    if (st == TH_OK && table->row.failed)
        st = th_fail(err, TH_ENOMEM, "%s: no memory for a row", table->path);
    if (st == TH_OK)
        st = write_row(table, err);
    table->row.length = 0;
    table->row.failed = false;
    table->cells = 0;
    table->wrong.status = TH_OK;
    return st;
}

th_status th_table_flush(th_table *table, th_error *err)
{
    const char *name = table->part != NULL ? table->part : table->path;

    if (table->number == 0 && fflush(table->file) != 0)
        table->number = errno;
    if (table->number != 0)
        return th_io_fail(err, name, "write", table->number);
    if (table->part != NULL && fsync(fileno(table->file)) != 0)
        return th_io_fail(err, name, "bring to the disk", errno);
    return TH_OK;
}

void th_table_keep(th_table *table)
{
    table->keep = true;
}

/* Bring the new names to the disk. Some file systems cannot do this for a folder; the names are
 * in force all the same, so nothing is reported. */
static void sync_folder(const char *path)
{
    const char *slash = strrchr(path, '/');
    char *folder = path_with(slash != NULL ? path : ".", "");
    int fd;

    if (folder == NULL)
        return;
    if (slash != NULL)
        folder[slash == path ? 1 : slash - path] = '\0';
    fd = open(folder, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (fd >= 0) {
        (void)fsync(fd);
        (void)close(fd);
    }
    free(folder);
}

th_status th_table_finish(th_table *table, th_error *err)
{
    th_status st;

    if (table->cells > 0)
        return th_fail(err, TH_EINVAL, "%s: finished inside a row, after %d of %d cells",
                       table->path, table->cells, table->count);
    st = th_table_flush(table, err);
    if (st != TH_OK || table->part == NULL)
        return st;
    if (rename(table->meta_part, table->meta) != 0)
        return th_io_fail(err, table->meta, "give this name to the metadata", errno);
    if (rename(table->part, table->path) != 0)
        return th_io_fail(err, table->path, "give this name to the table", errno);
    table->made = false;
    sync_folder(table->path);
    return TH_OK;
}

void th_table_destroy(th_table *table)
{
    if (table == NULL)
        return;
    if (table->made && !table->keep) {
        (void)unlink(table->part);
        (void)unlink(table->meta_part);
    }
    if (table->file != NULL && !table->borrowed)
        (void)fclose(table->file); /* finish has flushed it, and reported what went wrong */
    free(table->path);
    free(table->part);
    free(table->meta);
    free(table->meta_part);
    free(table->json.data);
    free(table->column);
    free(table->row.data);
    free(table);
}
