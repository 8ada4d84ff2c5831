/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Profiles from CSV files, see data.h for the form of the file. In: a file. Out: columns sorted by
 * x. May call: units, io_error, buffer, alloc, status. Lines are split here and not by csv.h: they
 * hold numbers and names only, and a comment may hold any text.
 * To add a column: th_data_column and the table `known`. Tests: tests/test_data.c, tests/broken. */
#include "twinhorizon/data.h"

#include "alloc.h"
#include "io_error.h"
#include "units/text.h"

#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>

/* Longest file: a hundred thousand rows of nine long numbers are 25 MB. */
#define BYTES_MAX (64L << 20)
/* Longest line, longer than nine numbers of any form need; what is longer is no table. */
enum { LINE_MAX_BYTES = 4096 };
/* Longest text of a cell in a message or of a unit in a header. */
enum { CELL_MAX = 64 };

static const struct {
    const char *name;
    th_dimension dimension;
    bool positive;
} known[TH_DATA_COLUMNS] = {
    [TH_DATA_X] = {"x", TH_DIM_LENGTH, false},
    [TH_DATA_SPEED] = {"speed", TH_DIM_SPEED, false},
    [TH_DATA_SOUND] = {"sound", TH_DIM_SPEED, true},
    [TH_DATA_DENSITY] = {"density", TH_DIM_LINE_DENSITY, true},
    [TH_DATA_POTENTIAL] = {"potential", TH_DIM_ENERGY, false},
    [TH_DATA_SPEED + TH_DATA_ERROR] = {"speed_error", TH_DIM_SPEED, true},
    [TH_DATA_SOUND + TH_DATA_ERROR] = {"sound_error", TH_DIM_SPEED, true},
    [TH_DATA_DENSITY + TH_DATA_ERROR] = {"density_error", TH_DIM_LINE_DENSITY, true},
    [TH_DATA_POTENTIAL + TH_DATA_ERROR] = {"potential_error", TH_DIM_ENERGY, true},
};

struct th_data {
    char *path;
    uint64_t hash;
    int rows;
    double *column[TH_DATA_COLUMNS]; /* [rows], NULL: absent */
};

/* A file that is being read. */
typedef struct {
    char shown[128]; /* its name in messages */
    FILE *stream;
    long bytes;
    int line;
    char text[LINE_MAX_BYTES + 1];
    th_system system;
    int cells;                      /* of every row */
    int place[TH_DATA_COLUMNS];     /* cell of a column, -1: absent */
    double factor[TH_DATA_COLUMNS]; /* of the unit in the header */
    int room;
    th_data *data;
} reader;

/* One line without its end; *more false at the end of the file. Feeds the hash. */
static th_status next_line(reader *r, bool *more, th_error *err)
{
    size_t length = 0;
    int byte;

    while ((byte = getc(r->stream)) != EOF) {
        r->data->hash = (r->data->hash ^ (uint64_t)byte) * UINT64_C(1099511628211); /* FNV-1a */
        if (++r->bytes > BYTES_MAX)
            return th_fail(err, TH_EINVAL, "%s: longer than %ld bytes", r->shown, BYTES_MAX);
        if (byte == '\n')
            break;
        if (byte == '\0')
            return th_fail(err, TH_EINVAL, "%s:%d: a zero byte, so this is no text", r->shown,
                           r->line + 1);
        if (length == LINE_MAX_BYTES)
            return th_fail(err, TH_EINVAL, "%s:%d: a line of more than %d bytes", r->shown,
                           r->line + 1, LINE_MAX_BYTES);
        r->text[length++] = (char)byte;
    }
    if (ferror(r->stream))
        return th_io_fail(err, r->shown, "read", errno);
    *more = byte != EOF || length > 0;
    r->line += *more;
    if (length > 0 && r->text[length - 1] == '\r')
        length--;
    r->text[length] = '\0';
    if (r->line == 1 && strncmp(r->text, "\xEF\xBB\xBF", 3) == 0) /* byte order mark */
        memmove(r->text, r->text + 3, length - 2);
    return TH_OK;
}

/* The next line that is neither blank nor a comment. */
static th_status next_row(reader *r, bool *more, th_error *err)
{
    for (;;) {
        const th_status st = next_line(r, more, err);
        const char *first = r->text + strspn(r->text, " \t");

        if (st != TH_OK || !*more || (*first != '#' && *first != '\0'))
            return st;
    }
}

/* Cut the next cell off; NULL when there is none. Blanks and quotes around it go. */
static char *cut(char **rest)
{
    char *cell = *rest, *end;

    if (cell == NULL)
        return NULL;
    end = strchr(cell, ',');
    *rest = end != NULL ? end + 1 : NULL;
    end = end != NULL ? end : cell + strlen(cell);
    while (cell < end && (*cell == ' ' || *cell == '\t' || *cell == '"'))
        cell++;
    while (end > cell && (end[-1] == ' ' || end[-1] == '\t' || end[-1] == '"'))
        end--;
    *end = '\0';
    return cell;
}

/* `name` or `name [unit]` of the header. */
static th_status read_name(reader *r, char *cell, int place, th_error *err)
{
    char *bracket = strchr(cell, '['), *end = cell + strlen(cell), shown[TH_QUOTE_MAX];
    char one[CELL_MAX];
    double factor = 1.0;
    int c = 0;
    th_error why;

    if (bracket != NULL && end[-1] == ']') {
        end[-1] = '\0';
        *bracket = '\0';
        for (end = bracket; end > cell && end[-1] == ' '; end--)
            end[-1] = '\0';
        bracket++;
    } else if (bracket != NULL) {
        th_quote(cell, shown, sizeof shown);
        return th_fail(err, TH_EINVAL, "%s:%d: \"%s\" has no closing bracket", r->shown, r->line,
                       shown);
    }
    while (c < TH_DATA_COLUMNS && strcmp(cell, known[c].name) != 0)
        c++;
    th_quote(cell, shown, sizeof shown);
    if (c == TH_DATA_COLUMNS && strpbrk(cell, ";\t") != NULL)
        return th_fail(err, TH_EINVAL, "%s:%d: \"%s\": want commas between columns", r->shown,
                       r->line, shown);
    if (c == TH_DATA_COLUMNS)
        return th_fail(
            err, TH_EINVAL,
            "%s:%d: column \"%s\" is not known; want x, speed, sound, density, potential "
            "or one of the last four with _error",
            r->shown, r->line, shown);
    if (r->place[c] >= 0)
        return th_fail(err, TH_EINVAL, "%s:%d: column %s stands twice", r->shown, r->line, shown);
    if (r->system == TH_SYSTEM_REDUCED && bracket != NULL)
        return th_fail(err, TH_EINVAL,
                       "%s:%d: column %s has a unit, but a reduced case takes bare numbers",
                       r->shown, r->line, shown);
    if (r->system == TH_SYSTEM_SI) {
        (void)snprintf(one, sizeof one, "1 %s", bracket != NULL ? bracket : "");
        if (th_quantity_read(bracket != NULL ? one : "1", known[c].dimension, &factor, &why) !=
            TH_OK)
            return th_fail(err, TH_EINVAL, "%s:%d: column %s: %s", r->shown, r->line, shown,
                           why.text);
    }
    r->place[c] = place;
    r->factor[c] = factor;
    return TH_OK;
}

static th_status read_header(reader *r, th_error *err)
{
    char *rest = r->text, *cell;
    bool more = false;
    th_status st = next_row(r, &more, err);

    if (st == TH_OK && !more)
        return th_fail(err, TH_EINVAL, "%s: empty, want a line with the names of the columns",
                       r->shown);
    for (int c = 0; c < TH_DATA_COLUMNS; c++)
        r->place[c] = -1;
    for (r->cells = 0; st == TH_OK && (cell = cut(&rest)) != NULL; r->cells++)
        st = read_name(r, cell, r->cells, err);
    if (st != TH_OK)
        return st;
    if (r->place[TH_DATA_X] < 0 || r->cells < 2)
        return th_fail(err, TH_EINVAL,
                       "%s:%d: want a column x and one or more of speed, sound, density, potential",
                       r->shown, r->line);
    for (int c = TH_DATA_SPEED; c < TH_DATA_NAMES; c++)
        if (r->place[c] < 0 && r->place[c + TH_DATA_ERROR] >= 0)
            return th_fail(err, TH_EINVAL, "%s:%d: column %s without %s", r->shown, r->line,
                           known[c + TH_DATA_ERROR].name, known[c].name);
    return TH_OK;
}

static th_status grow(reader *r, th_error *err)
{
    const int room = r->room > 0 ? 2 * r->room : 1024;

    for (int c = 0; c < TH_DATA_COLUMNS; c++) {
        double *more;

        if (r->place[c] < 0)
            continue;
        more = realloc(r->data->column[c], (size_t)room * sizeof *more);
        if (more == NULL)
            return th_fail(err, TH_ENOMEM, "%s: no memory for %d rows", r->shown, room);
        r->data->column[c] = more;
    }
    r->room = room;
    return TH_OK;
}

static th_status read_numbers(reader *r, th_error *err)
{
    char *rest = r->text, *cell[TH_DATA_COLUMNS], shown[TH_QUOTE_MAX];
    int cells = 0;
    char *next;

    while ((next = cut(&rest)) != NULL) {
        if (cells < r->cells)
            cell[cells] = next;
        cells++;
    }
    if (cells != r->cells)
        return th_fail(err, TH_EINVAL, "%s:%d: %d cells, the header has %d%s", r->shown, r->line,
                       cells, r->cells,
                       cells == 2 * r->cells ? "; numbers take a decimal point, not a comma" : "");
    for (int c = 0; c < TH_DATA_COLUMNS; c++) {
        double value;
        th_error why;

        if (r->place[c] < 0)
            continue;
        if (th_number_read(cell[r->place[c]], &value, &why) != TH_OK) {
            th_quote(cell[r->place[c]], shown, sizeof shown);
            return th_fail(err, TH_EINVAL, "%s:%d: column %s holds \"%s\": %s", r->shown, r->line,
                           known[c].name, shown, why.text);
        }
        value *= r->factor[c];
        if (!isfinite(value) || (known[c].positive && !(value > 0)))
            return th_fail(err, TH_EINVAL, "%s:%d: column %s holds %.15g, want %s", r->shown,
                           r->line, known[c].name, value,
                           known[c].positive ? "a finite number > 0" : "a finite number");
        r->data->column[c][r->data->rows] = value;
    }
    r->data->rows++;
    return TH_OK;
}

/* A row with its place, for sorting. */
typedef struct {
    double x;
    int row;
} place;

static int by_x(const void *a, const void *b)
{
    const place *p = a, *q = b;

    if (p->x != q->x)
        return p->x < q->x ? -1 : 1;
    return (p->row > q->row) - (p->row < q->row);
}

/* Sort all columns by x; no two rows have the same. */
static th_status sort(const reader *r, th_error *err)
{
    th_data *d = r->data;
    const size_t rows = (size_t)d->rows;
    place *order = th_alloc(rows, sizeof *order);
    double *copy = th_alloc(rows, sizeof *copy);
    th_status st = TH_OK;

    if (order == NULL || copy == NULL) {
        st = th_fail(err, TH_ENOMEM, "%s: no memory for %d rows", r->shown, d->rows);
        goto done;
    }
    for (int i = 0; i < d->rows; i++)
        order[i] = (place){d->column[TH_DATA_X][i], i};
    qsort(order, rows, sizeof *order, by_x);
    for (int i = 1; i < d->rows; i++)
        if (order[i].x == order[i - 1].x) {
            st = th_fail(err, TH_EINVAL, "%s: rows %d and %d have the same x = %.15g", r->shown,
                         order[i - 1].row + 1, order[i].row + 1, order[i].x / r->factor[TH_DATA_X]);
            goto done;
        }
    for (int c = 0; c < TH_DATA_COLUMNS; c++) {
        if (d->column[c] == NULL)
            continue;
        for (int i = 0; i < d->rows; i++)
            copy[i] = d->column[c][order[i].row];
        memcpy(d->column[c], copy, rows * sizeof *copy);
    }
done:
    free(order);
    free(copy);
    return st;
}

static th_status check(const reader *r, th_error *err)
{
    const double *speed = r->data->column[TH_DATA_SPEED];

    if (r->data->rows < TH_DATA_ROWS_MIN)
        return th_fail(err, TH_EINVAL, "%s: %d rows, want %d or more", r->shown, r->data->rows,
                       TH_DATA_ROWS_MIN);
    for (int i = 0; speed != NULL && i < r->data->rows; i++)
        if (speed[i] == 0 || signbit(speed[i]) != signbit(speed[0]))
            return th_fail(err, TH_EINVAL,
                           "%s: row %d has speed %.15g and row 1 %.15g, want the same sign "
                           "everywhere and not zero",
                           r->shown, i + 1, speed[i] / r->factor[TH_DATA_SPEED],
                           speed[0] / r->factor[TH_DATA_SPEED]);
    return TH_OK;
}

static th_status read_rows(reader *r, th_error *err)
{
    bool more = true;
    th_status st = TH_OK;

    while (st == TH_OK) {
        st = next_row(r, &more, err);
        if (st != TH_OK || !more)
            break;
        if (r->data->rows == TH_DATA_ROWS_MAX)
            return th_fail(err, TH_EINVAL, "%s:%d: more than %d rows", r->shown, r->line,
                           TH_DATA_ROWS_MAX);
        if (r->data->rows == r->room)
            st = grow(r, err);
        if (st == TH_OK)
            st = read_numbers(r, err);
    }
    return st;
}

th_status th_data_read(const char *path, th_system system, th_data **out, th_error *err)
{
    th_status st = TH_EBUG;
    reader *r = NULL;
    struct stat what;

    if (path == NULL || out == NULL)
        return th_fail(err, TH_EINVAL, "data: want a path and a place for the result");
    *out = NULL;
    r = th_alloc(1, sizeof *r);
    if (r != NULL)
        r->data = th_alloc(1, sizeof *r->data);
    if (r != NULL && r->data != NULL)
        r->data->path = th_alloc(strlen(path) + 1, 1);
    if (r == NULL || r->data == NULL || r->data->path == NULL) {
        st = th_fail(err, TH_ENOMEM, "data: no memory for a table");
        goto done;
    }
    memcpy(r->data->path, path, strlen(path) + 1);
    r->data->hash = UINT64_C(14695981039346656037);
    r->system = system;
    th_quote_path(path, r->shown, sizeof r->shown);
    if (stat(path, &what) != 0) {
        st = th_io_fail(err, r->shown, "read", errno);
        goto done;
    }
    if (!S_ISREG(what.st_mode)) { /* a pipe would have to be read twice by resumed sweeps */
        st = th_fail(err, TH_EINVAL, "%s: no file", r->shown);
        goto done;
    }
    r->stream = fopen(path, "rb");
    if (r->stream == NULL) {
        st = th_io_fail(err, r->shown, "read", errno);
        goto done;
    }
    st = read_header(r, err);
    if (st == TH_OK)
        st = read_rows(r, err);
    if (st == TH_OK)
        st = check(r, err);
    if (st == TH_OK)
        st = sort(r, err);
    if (st == TH_OK) {
        *out = r->data;
        r->data = NULL;
    }
done:
    if (r != NULL) {
        if (r->stream != NULL)
            (void)fclose(r->stream);
        th_data_destroy(r->data);
    }
    free(r);
    return st;
}

void th_data_scale(th_data *data, const th_scale *scale)
{
    for (int c = 0; c < TH_DATA_COLUMNS; c++)
        for (int i = 0; data->column[c] != NULL && i < data->rows; i++)
            data->column[c][i] /= th_scale_factor(scale, known[c].dimension);
}

void th_data_destroy(th_data *data)
{
    if (data == NULL)
        return;
    for (int c = 0; c < TH_DATA_COLUMNS; c++)
        free(data->column[c]);
    free(data->path);
    free(data);
}

int th_data_rows(const th_data *data)
{
    return data->rows;
}

const double *th_data_values(const th_data *data, th_data_column column)
{
    return data->column[column];
}

const char *th_data_name(th_data_column column)
{
    return known[column].name;
}

uint64_t th_data_hash(const th_data *data)
{
    return data->hash;
}

const char *th_data_path(const th_data *data)
{
    return data->path;
}
