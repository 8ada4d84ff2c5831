/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Output files: complete under their name, or not there. */
#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
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
    struct stat found;

    *file = (cli_file){.path = path};
    if (stat(path, &found) == 0 && !S_ISREG(found.st_mode)) {
        /* a device or pipe: renaming a file over it would destroy it */
        const int fd = open(path, O_WRONLY | O_CLOEXEC);

        file->stream = fd >= 0 ? fdopen(fd, "w") : NULL;
        if (file->stream != NULL)
            return TH_OK;
        (void)th_fail(err, TH_EIO, "%s: cannot be written (%s)", path, strerror(errno));
        if (fd >= 0)
            (void)close(fd);
        return TH_EIO;
    }
    file->part = malloc(size);
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
    written = fflush(stream) == 0 && !ferror(stream) &&
              (file->part == NULL || fsync(fileno(stream)) == 0);
    written = fclose(stream) == 0 && written;
    if (!written)
        (void)th_fail(err, TH_EIO, "%s: cannot be written (%s)", file->path, strerror(errno));
    else if (file->part == NULL || rename(file->part, file->path) == 0)
        return TH_OK;
    else
        (void)th_fail(err, TH_EIO, "%s: cannot be named so (%s)", file->path, strerror(errno));
    if (file->part != NULL)
        (void)remove(file->part);
    return TH_EIO;
}

void cli_file_abandon(cli_file *file)
{
    if (file->stream != NULL) {
        (void)fclose(file->stream);
        if (file->part != NULL)
            (void)remove(file->part);
    }
    free(file->part);
    *file = (cli_file){0};
}
