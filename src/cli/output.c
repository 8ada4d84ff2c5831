/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Output files: complete under their name, or not there. */
#define _XOPEN_SOURCE 700 /* realpath */
#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "cli.h"

#define METADATA "-metadata.json"

/* The file that a path names: its folder, followed to the end of all links, and its name there. */
typedef struct {
    dev_t device;
    ino_t folder;
    char name[CLI_PATH_MAX];
} whereabouts;

/* false when the folder is not there. */
static bool locate(const char *path, const char *ending, whereabouts *out)
{
    const char *slash = strrchr(path, '/');
    const size_t length = slash != NULL ? (size_t)(slash - path) + 1 : 0;
    struct stat is;
    char folder[CLI_PATH_MAX] = ".";

    if (strlen(path) + strlen(ending) >= CLI_PATH_MAX)
        return false;
    if (length > 0) {
        memcpy(folder, path, length);
        folder[length] = '\0';
    }
    (void)snprintf(out->name, sizeof out->name, "%s%s", path + length, ending);
    if (stat(folder, &is) != 0 || !S_ISDIR(is.st_mode))
        return false;
    out->device = is.st_dev;
    out->folder = is.st_ino;
    return true;
}

bool cli_same_folder(const char *a, const char *b)
{
    struct stat x, y;

    return stat(a, &x) == 0 && stat(b, &y) == 0 && S_ISDIR(x.st_mode) && x.st_dev == y.st_dev &&
           x.st_ino == y.st_ino;
}

static bool same_file(const char *a, const char *a_ending, const char *b, const char *b_ending)
{
    struct stat x, y;
    whereabouts p, q;

    if (stat(a, &x) == 0 && !S_ISREG(x.st_mode))
        return false; /* a device or pipe may take any number of outputs */
    if (*a_ending == '\0' && *b_ending == '\0' && stat(a, &x) == 0 && stat(b, &y) == 0 &&
        S_ISREG(x.st_mode) && x.st_dev == y.st_dev && x.st_ino == y.st_ino)
        return true; /* links of either kind */
    return locate(a, a_ending, &p) && locate(b, b_ending, &q) && p.device == q.device &&
           p.folder == q.folder && strcmp(p.name, q.name) == 0;
}

static bool is_standard(const char *path)
{
    return strcmp(path, "-") == 0;
}

/* Replace a link by what it leads to. */
static th_status follow(const cli_option *option, char *target, th_error *err)
{
    struct stat is;
    char *end;

    if (lstat(*option->place, &is) != 0 || !S_ISLNK(is.st_mode))
        return TH_OK;
    end = realpath(*option->place, NULL);
    if (end == NULL || strlen(end) >= CLI_PATH_MAX) {
        free(end);
        return th_fail(err, TH_EINVAL, "%s %s: a link that leads to no file", option->name,
                       *option->place);
    }
    memcpy(target, end, strlen(end) + 1);
    free(end);
    *option->place = target;
    return TH_OK;
}

static th_status check_one(const cli_option *option, bool folder_there, th_error *err)
{
    const char *path = *option->place, *slash = strrchr(path, '/');
    char folder[CLI_PATH_MAX] = ".";
    struct stat is;

    if (*path == '\0' || strlen(path) >= CLI_PATH_MAX - sizeof METADATA)
        return th_fail(err, TH_EINVAL, "%s: a name of %zu bytes", option->name, strlen(path));
    if (is_standard(path))
        return th_fail(err, TH_EINVAL, "%s -: it cannot go to standard output, give a file",
                       option->name);
    if (stat(path, &is) == 0 && S_ISDIR(is.st_mode))
        return th_fail(err, TH_EIO, "%s %s: a folder, give a file", option->name, path);
    if (stat(path, &is) == 0 && !S_ISREG(is.st_mode)) /* a device or pipe is written as it stands */
        return access(path, W_OK) == 0 ? TH_OK
                                       : th_fail(err, TH_EIO, "%s %s: cannot be written (%s)",
                                                 option->name, path, strerror(errno));
    if (slash != NULL) {
        memcpy(folder, path, (size_t)(slash - path) + 1);
        folder[slash - path + 1] = '\0';
    }
    if (!folder_there && option->use == CLI_LATE && access(folder, F_OK) != 0 && errno == ENOENT)
        return TH_OK;
    if (access(folder, W_OK | X_OK) != 0)
        return th_fail(err, TH_EIO, "%s %s: its folder cannot be written (%s)", option->name, path,
                       strerror(errno));
    return TH_OK;
}

/* What an output puts beside its name, itself first; each is written as NAME.part before. */
static const char *const beside[] = {"", ".part", METADATA, METADATA ".part"};

static int names_of(const cli_option *option)
{
    return option->use == CLI_TABLE ? 4 : 2;
}

/* Whether one of the files of an output is this one. */
static bool writes(const cli_option *option, const char *path, const char *ending)
{
    for (int i = 0; i < names_of(option); i++)
        if (same_file(*option->place, beside[i], path, ending))
            return true;
    return false;
}

static bool clash(const cli_option *a, const cli_option *b)
{
    for (int i = 0; i < names_of(b); i++)
        if (writes(a, *b->place, beside[i]))
            return true;
    return false;
}

th_status cli_check_outputs(const char *command, cli_arguments *arguments, bool folder_there,
                            th_error *err)
{
    th_error why;

    for (int i = 0; i < arguments->outputs; i++) {
        const cli_option *option = arguments->output[i];
        th_status st;

        if (option->use == CLI_TABLE && is_standard(*option->place))
            continue;
        st = follow(option, arguments->target[i], &why);
        if (st == TH_OK)
            st = check_one(option, folder_there, &why);
        if (st != TH_OK)
            return th_fail(err, st, "%s: %s", command, why.text);
        for (int k = 0; k < i; k++)
            if (!is_standard(*arguments->output[k]->place) && clash(option, arguments->output[k]))
                return th_fail(err, TH_EINVAL, "%s: %s %s and %s %s would be one file", command,
                               arguments->output[k]->name, *arguments->output[k]->place,
                               option->name, *option->place);
    }
    return TH_OK;
}

th_status cli_check_input(const cli_arguments *arguments, const char *path, th_error *err)
{
    for (int i = 0; i < arguments->outputs; i++) {
        const cli_option *option = arguments->output[i];

        if (writes(option, path, ""))
            return th_fail(err, TH_EINVAL, "%s %s would write over %s, which is read", option->name,
                           *option->place, path);
    }
    return TH_OK;
}

th_status cli_check_folder(const char *folder, const char *const *name, int names, const char *path,
                           th_error *err)
{
    for (int i = 0; i < names; i++)
        for (size_t k = 0; k < sizeof beside / sizeof *beside; k++) {
            char own[CLI_PATH_MAX];

            (void)snprintf(own, sizeof own, "%s/%s", folder, name[i]);
            if (same_file(own, beside[k], path, ""))
                return th_fail(err, TH_EINVAL,
                               "%s would be written over by the sweep: %s is its own", path,
                               name[i]);
        }
    return TH_OK;
}

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
