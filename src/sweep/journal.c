/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The journal of a sweep. In: points as they finish. Out: a file of one line a point, and the
 * points again. Calls head, record, flusher, io_error, units (quoting), status.
 * The file: a head (head.h), then a line a point (record.h) in the order in which they finished,
 * each with its checksum. A line is appended by one write to the end of the file, so a process that
 * is killed leaves at most one line that is cut short; a machine that dies may leave more, and
 * nothing after the first bad line is believed. Memory: where each point's line starts, no more.
 * A new thing to keep goes into the line of its point (record.c). Proof: tests/test_journal.c. */
#include "twinhorizon/journal.h"

#include "../alloc.h"
#include "../io_error.h"
#include "../units/text.h"
#include "flusher.h"
#include "head.h"
#include "record.h"

#include <errno.h>
#include <fcntl.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <unistd.h>

enum {
    CHUNK = 1024,       /* bytes a read: a line of ten modes */
    PATH_SHOWN = 200,   /* bytes of the path in a message, which has 512 in all */
    FOLDER_SIZE = 4096, /* bytes of a folder's path; Linux takes no longer one */
};

struct th_journal {
    char path[PATH_SHOWN]; /* for messages */
    int fd;                /* -1: not open */
    bool writes;           /* the flusher runs */
    bool cut;              /* the file may go on after `end`, with a line that failed */
    long points, count;    /* of the grid; finished */
    int64_t *offset; /* [points] where a point's line starts; 0, the head's place: unfinished */
    int64_t end;     /* of the last whole line */
    th_buffer line;  /* the line in hand */
    th_buffer head;  /* reading only: the head, in which the case's text lies */
    th_flusher flusher;
};

/* Release everything; TH_EIO when what was written may not be on the disk. NULL is allowed. */
static th_status finish(th_journal *j, th_error *err)
{
    th_status st = TH_OK;
    int number = 0;

    if (j == NULL)
        return TH_OK;
    if (j->writes)
        number = th_flusher_stop(&j->flusher);
    if (j->fd >= 0 && close(j->fd) != 0 && j->writes && number == 0)
        number = errno;
    if (number != 0)
        st = th_io_fail(err, j->path, "bring the journal to the disk", number);
    free(j->offset);
    free(j->line.data);
    free(j->head.data);
    free(j);
    return st;
}

/* An object without a file yet. */
static th_journal *create(const char *path)
{
    th_journal *j = th_alloc(1, sizeof *j);

    if (j != NULL) {
        th_quote_path(path, j->path, sizeof j->path);
        j->fd = -1;
    }
    return j;
}

/* Read the line that starts at `at` into j->line, its line feed included; without one when the
 * file ends before. */
static th_status read_line(th_journal *j, int64_t at, th_error *err)
{
    char chunk[CHUNK];

    j->line.length = 0;
    j->line.failed = false;
    for (;;) {
        const ssize_t got = pread(j->fd, chunk, sizeof chunk, (off_t)at);
        const char *stop;

        if (got < 0 && errno == EINTR)
            continue;
        if (got < 0)
            return th_io_fail(err, j->path, "read", errno);
        stop = memchr(chunk, '\n', (size_t)got);
        th_buffer_add(&j->line, chunk, stop != NULL ? (size_t)(stop - chunk) + 1 : (size_t)got);
        if (j->line.failed)
            return th_fail(err, TH_ENOMEM, "%s: a line of the journal", j->path);
        if (stop != NULL || got == 0)
            return TH_OK;
        at += got;
    }
}

/* Write all of the line in hand to the end of the file; 0 or errno. */
static int write_line(th_journal *j)
{
    for (size_t done = 0; done < j->line.length;) {
        const ssize_t put = write(j->fd, j->line.data + done, j->line.length - done);

        if (put < 0 && errno != EINTR)
            return errno;
        done += put > 0 ? (size_t)put : 0;
    }
    return 0;
}

/* Take away what follows the last whole line; 0 or errno. */
static int repair(th_journal *j)
{
    if (j->cut) {
        if (ftruncate(j->fd, (off_t)j->end) != 0)
            return errno;
        j->cut = false;
    }
    return 0;
}

/* Append the line in hand; the file ends in a whole line before and after, whatever happens, or
 * `cut` stays set and the next call begins with the repair. */
static th_status append_line(th_journal *j, th_error *err)
{
    int number = repair(j);

    if (number == 0) {
        number = write_line(j);
        if (number != 0) {
            j->cut = true;
            (void)repair(j);
        }
    }
    if (number != 0)
        return th_io_fail(err, j->path, "write to the journal", number);
    j->end += (int64_t)j->line.length;
    return TH_OK;
}

/* Find the points, from the end of the head to the last whole line. */
static th_status scan(th_journal *j, th_error *err)
{
    j->offset = th_alloc((size_t)j->points, sizeof *j->offset);
    if (j->offset == NULL)
        return th_fail(err, TH_ENOMEM, "%s: the places of %ld points", j->path, j->points);
    for (;;) {
        th_status st = read_line(j, j->end, err);
        long number;

        if (st != TH_OK || !th_line_whole(j->line.data, j->line.length))
            return st;
        number = th_record_number(j->line.data);
        if (number < 0 || number >= j->points || j->offset[number] != 0)
            return th_fail(err, TH_EINVAL,
                           "%s: a line at byte %lld is no point of this sweep or stands twice, so "
                           "something else than a sweep wrote to the file",
                           j->path, (long long)j->end);
        j->offset[number] = j->end;
        j->count++;
        j->end += (int64_t)j->line.length;
    }
}

static th_status check_regular(const th_journal *j, th_error *err)
{
    struct stat is;

    if (fstat(j->fd, &is) != 0)
        return th_io_fail(err, j->path, "read", errno);
    if (!S_ISREG(is.st_mode))
        return th_fail(err, TH_EINVAL, "%s: no journal of a sweep, not even a file", j->path);
    return TH_OK;
}

/* Open for writing and keep others from it. flock, not fcntl: it holds between two journals of one
 * process too, and is not lost when the process closes the same file that it also reads (merge).
 * Either ends with the process, however that ends. */
static th_status open_locked(th_journal *j, const char *path, bool resume, th_error *err)
{
    th_status st;

    j->fd = open(path, O_RDWR | O_APPEND | O_CREAT | O_CLOEXEC | (resume ? 0 : O_EXCL), 0666);
    if (j->fd < 0 && errno == EEXIST)
        return th_fail(err, TH_EIO, "%s: exists already; --resume continues it", j->path);
    if (j->fd < 0)
        return th_io_fail(err, j->path, "open for writing", errno);
    st = check_regular(j, err);
    if (st != TH_OK)
        return st;
    if (flock(j->fd, LOCK_EX | LOCK_NB) != 0)
        return errno == EWOULDBLOCK
                   ? th_fail(err, TH_EIO, "%s: another sweep is writing to it", j->path)
                   : th_io_fail(err, j->path, "lock", errno);
    return TH_OK;
}

/* Take up the head of the file, or write it: into a new file, and into one whose writer died over
 * the head. */
static th_status begin(th_journal *j, const char *case_text, th_error *err)
{
    th_buffer head = {0};
    char *old_text = NULL;
    long old_points = 0;
    th_status st;

    th_head_write(j->points, case_text, &head);
    if (head.failed) {
        st = th_fail(err, TH_ENOMEM, "%s: the head of the journal", j->path);
        goto done;
    }
    st = read_line(j, 0, err);
    if (st != TH_OK)
        goto done;
    if (j->line.length < head.length && memcmp(j->line.data, head.data, j->line.length) == 0) {
        j->cut = true;
        j->line.length = 0;
        th_buffer_add(&j->line, head.data, head.length);
        st = j->line.failed ? th_fail(err, TH_ENOMEM, "%s: the head of the journal", j->path)
                            : append_line(j, err);
        goto done;
    }
    j->end = (int64_t)j->line.length;
    st = th_head_read(j->path, j->line.data, j->line.length, &old_points, &old_text, err);
    if (st == TH_OK)
        st = th_head_compare(j->path, old_points, old_text, j->points, case_text, err);
done:
    free(head.data);
    return st;
}

/* Bring the file's name to the disk. Some file systems refuse that for folders, and then it is
 * theirs to keep names. */
static void flush_folder(const char *path)
{
    char folder[FOLDER_SIZE] = ".";
    const char *slash = strrchr(path, '/');
    int fd;

    if (slash != NULL) {
        const size_t length = (size_t)(slash - path) + 1; /* with the slash, for the root */

        if (length >= sizeof folder)
            return;
        memcpy(folder, path, length);
        folder[length] = '\0';
    }
    fd = open(folder, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (fd < 0)
        return;
    (void)fsync(fd);
    (void)close(fd);
}

th_status th_journal_open(const char *path, const th_case *c, long points, bool resume,
                          th_journal **out, th_error *err)
{
    th_journal *j = NULL;
    th_status st;
    int number;

    if (out != NULL)
        *out = NULL;
    if (path == NULL || c == NULL || points < 1 || out == NULL)
        return th_fail(err, TH_EINVAL, "journal: want a path, a case, points >= 1 (not %ld), out",
                       points);
    j = create(path);
    if (j == NULL)
        return th_fail(err, TH_ENOMEM, "journal: %zu bytes", sizeof *j);
    j->points = points;
    st = open_locked(j, path, resume, err);
    if (st == TH_OK)
        st = begin(j, c->text, err);
    if (st == TH_OK)
        st = scan(j, err);
    if (st != TH_OK)
        goto done;
    j->cut = true; /* whatever follows the last whole line goes */
    number = repair(j);
    if (number != 0) {
        st = th_io_fail(err, j->path, "shorten the journal", number);
        goto done;
    }
    st = th_flusher_start(&j->flusher, j->fd, err);
    if (st != TH_OK)
        goto done;
    j->writes = true;
    th_flusher_mark(&j->flusher);
    flush_folder(path);
    *out = j;
    j = NULL;
done:
    (void)finish(j, NULL);
    return st;
}

th_status th_journal_read_only(const char *path, th_journal **out, long *points,
                               const char **case_text, th_error *err)
{
    th_journal *j = NULL;
    char *text = NULL;
    th_status st;

    if (out != NULL)
        *out = NULL;
    if (path == NULL || out == NULL || points == NULL || case_text == NULL)
        return th_fail(err, TH_EINVAL, "journal: want a path and three places for results");
    j = create(path);
    if (j == NULL)
        return th_fail(err, TH_ENOMEM, "journal: %zu bytes", sizeof *j);
    j->fd = open(path, O_RDONLY | O_CLOEXEC);
    st = j->fd >= 0 ? check_regular(j, err) : th_io_fail(err, j->path, "open for reading", errno);
    if (st == TH_OK)
        st = read_line(j, 0, err);
    if (st != TH_OK)
        goto done;
    j->head = j->line;
    j->line = (th_buffer){0};
    j->end = (int64_t)j->head.length;
    st = th_head_read(j->path, j->head.data, j->head.length, &j->points, &text, err);
    if (st == TH_OK)
        st = scan(j, err);
    if (st != TH_OK)
        goto done;
    *points = j->points;
    *case_text = text;
    *out = j;
    j = NULL;
done:
    (void)finish(j, NULL);
    return st;
}

bool th_journal_has(const th_journal *journal, long number)
{
    return number >= 0 && number < journal->points && journal->offset[number] != 0;
}

long th_journal_count(const th_journal *journal)
{
    return journal->count;
}

th_status th_journal_append(th_journal *journal, const th_point *point, th_error *err)
{
    th_status st;
    int64_t at;
    int number;

    if (journal == NULL || point == NULL || !journal->writes)
        return th_fail(err, TH_EINVAL, "journal: want one open for writing, and a point");
    if (point->number < 0 || point->number >= journal->points)
        return th_fail(err, TH_EINVAL, "%s: point %ld, want one of 0 to %ld", journal->path,
                       point->number, journal->points - 1);
    if (th_journal_has(journal, point->number))
        return th_fail(err, TH_EINVAL, "%s: point %ld is finished already", journal->path,
                       point->number);
    number = th_flusher_trouble(&journal->flusher);
    if (number != 0)
        return th_io_fail(err, journal->path, "bring the journal to the disk", number);
    st = th_record_write(point, &journal->line, err);
    if (st != TH_OK)
        return st;
    at = journal->end;
    st = append_line(journal, err);
    if (st != TH_OK)
        return st;
    journal->offset[point->number] = at;
    journal->count++;
    th_flusher_mark(&journal->flusher);
    return TH_OK;
}

th_status th_journal_get(th_journal *journal, long number, th_point *point, th_error *err)
{
    th_buffer *line;
    th_status st;

    if (journal == NULL || point == NULL)
        return th_fail(err, TH_EINVAL, "journal: want a journal and a point");
    if (!th_journal_has(journal, number))
        return th_fail(err, TH_ENONE, "%s: point %ld is not finished", journal->path, number);
    st = read_line(journal, journal->offset[number], err);
    if (st != TH_OK)
        return st;
    line = &journal->line;
    st = TH_EINVAL;
    if (th_line_whole(line->data, line->length)) {
        th_line_unseal(line->data, line->length);
        st = th_record_read(line->data, point, err);
    }
    if (st == TH_EINVAL || (st == TH_OK && point->number != number))
        return th_fail(err, TH_EIO,
                       "%s: the line of point %ld at byte %lld was changed or is damaged",
                       journal->path, number, (long long)journal->offset[number]);
    return st;
}

th_status th_journal_close(th_journal *journal, th_error *err)
{
    return finish(journal, err);
}
