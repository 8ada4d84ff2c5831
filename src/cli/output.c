/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Output files: complete under their name, or not there. */
#include <errno.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "cli.h"

th_status cli_table(const char *path, const th_column *column, int columns, const char *title,
                    const th_case *c, th_table **out, th_error *err)
{
    if (strcmp(path, "-") == 0)
        return th_table_create("standard output", stdout, column, columns, title, c->text, out,
                               err);
    return th_table_create(path, NULL, column, columns, title, c->text, out, err);
}

th_status cli_file_open(const char *path, cli_file *file, th_error *err)
{
    const size_t size = strlen(path) + sizeof ".part";

    *file = (cli_file){.path = path, .part = malloc(size)};
    if (file->part == NULL)
        return th_fail(err, TH_ENOMEM, "%s: a name of %zu bytes", path, size);
    (void)snprintf(file->part, size, "%s.part", path);
    file->stream = fopen(file->part, "w");
    if (file->stream == NULL)
        return th_fail(err, TH_EIO, "%s: cannot be written (%s)", file->part, strerror(errno));
    return TH_OK;
}

th_status cli_file_finish(cli_file *file, th_error *err)
{
    FILE *stream = file->stream;
    bool written;

    file->stream = NULL;
    written = fflush(stream) == 0 && fsync(fileno(stream)) == 0;
    written = fclose(stream) == 0 && written;
    if (!written) {
        const int reason = errno;

        (void)remove(file->part);
        return th_fail(err, TH_EIO, "%s: cannot be written (%s)", file->part, strerror(reason));
    }
    if (rename(file->part, file->path) != 0)
        return th_fail(err, TH_EIO, "%s: cannot be named so (%s)", file->path, strerror(errno));
    return TH_OK;
}

void cli_file_abandon(cli_file *file)
{
    if (file->stream != NULL) {
        (void)fclose(file->stream);
        (void)remove(file->part);
    }
    free(file->part);
    *file = (cli_file){0};
}
