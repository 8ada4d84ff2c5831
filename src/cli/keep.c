/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The folder of a sweep holds a copy of the table that its case names, so that the sweep can be
 * merged and its tables understood when the original has moved. */
#include <errno.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

#include "cli.h"
#include "tables.h"

/* Names that the sweep itself uses. */
static const char *const taken[] = {"journal", "points.csv", "modes.csv", "events.csv"};

static th_status copy(const char *from, const char *to, th_error *err)
{
    char block[1 << 14];
    cli_file file = {0};
    FILE *stream = fopen(from, "rb");
    size_t size;
    th_status st;

    if (stream == NULL)
        return th_fail(err, TH_EIO, "%s: cannot be read (%s)", from, strerror(errno));
    st = cli_file_open(to, &file, err);
    while (st == TH_OK && (size = fread(block, 1, sizeof block, stream)) > 0)
        if (fwrite(block, 1, size, file.stream) != size)
            st = th_fail(err, TH_EIO, "%s: cannot be written (%s)", to, strerror(errno));
    if (st == TH_OK && ferror(stream))
        st = th_fail(err, TH_EIO, "%s: cannot be read", from);
    if (st == TH_OK)
        st = cli_file_finish(&file, err);
    cli_file_abandon(&file);
    (void)fclose(stream);
    return st;
}

th_status cli_spare_case(const th_case *c, const char *folder, th_error *err)
{
    return cli_check_folder(folder, taken, (int)(sizeof taken / sizeof *taken), c->path, err);
}

th_status cli_keep_table(const th_case *c, const char *folder, th_error *err)
{
    const char *from = c->data != NULL ? th_data_path(c->data) : NULL, *name;
    struct stat a, b;
    char *to;
    th_status st = TH_OK;

    if (from == NULL)
        return TH_OK;
    name = strrchr(from, '/') != NULL ? strrchr(from, '/') + 1 : from;
    for (size_t i = 0; i < sizeof taken / sizeof *taken; i++)
        if (strncmp(name, taken[i], strlen(taken[i])) == 0)
            return th_fail(
                err, TH_EINVAL,
                "%s: the folder of a sweep has a file of its own called %s, so the table "
                "needs another name",
                from, taken[i]);
    to = cli_join(folder, name);
    if (to == NULL)
        return th_fail(err, TH_ENOMEM, "sweep: the name of a table");
    if (!(stat(from, &a) == 0 && stat(to, &b) == 0 && a.st_dev == b.st_dev && a.st_ino == b.st_ino))
        st = copy(from, to, err);
    free(to);
    return st;
}
