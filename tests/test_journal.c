/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The journal of a sweep: points come back to the last bit, after a cut or a changed byte anywhere,
 * after a kill at any moment, after a full disk; nothing is taken from another sweep's journal.
 * What is expected follows from the promises in journal.h; other sources stand beside the values.
 */
#define _XOPEN_SOURCE 700
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include <errno.h>
#include <float.h>
#include <math.h>
#include <signal.h>
#include <stdatomic.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/uio.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#include "comma_locale.h"
#include "refuse.h"
#include "sweep/head.h"
#include "sweep/line.h"
#include "twinhorizon/journal.h"
#include "twinhorizon/version.h"

/* ---- the disk: stands between the library and the system ----------------------------------- */

static atomic_int fsyncs;      /* calls so far */
static atomic_int fsync_error; /* errno with which they fail; 0: they do not */
static atomic_bool disturbed;  /* writes are interrupted first, and then write half */

/* Counted, not done: no test here can take the power away, and thousands of calls take a minute. */
int fsync(int fd)
{
    const int number = fsync_error;

    (void)fd;
    fsyncs++;
    if (number == 0)
        return 0;
    errno = number;
    return -1;
}

ssize_t write(int fd, const void *bytes, size_t count)
{
    static bool again; /* the interruption was shown */
    struct iovec part = {.iov_base = (void *)(uintptr_t)bytes, .iov_len = count};

    if (disturbed && !again) {
        again = true;
        errno = EINTR;
        return -1;
    }
    again = false;
    if (disturbed)
        part.iov_len = (count + 1) / 2;
    return writev(fd, &part, 1);
}

/* ---- files and points ---------------------------------------------------------------------- */

enum { POINTS = 30 };

#define CASE_HEAD                                                                                  \
    "[units]\nsystem = reduced\n[flow]\nshape = step\nspeed = 0.75\nsound_upstream = 1\n"          \
    "sound_pocket = 0.3\nsound_downstream = 1\n"
#define CASE_TAIL "[ends]\nkind = open\n[sweep]\ngap = 1 to 30 in 30\n"

static char folder[] = "/tmp/test_journal_XXXXXX";
static char path[64];
static th_case *the_case;

static th_case *case_of(const char *text)
{
    th_case *c = NULL;
    th_error err = {0};

    if (th_case_read_text("text", text, NULL, 0, &c, &err) != TH_OK)
        fail_msg("%s", err.text);
    return c;
}

static int make_folder(void **state)
{
    (void)state;
    if (mkdtemp(folder) == NULL)
        return -1;
    (void)snprintf(path, sizeof path, "%s/journal", folder);
    the_case = case_of(CASE_HEAD "gap = 2\n" CASE_TAIL);
    return 0;
}

static int remove_file(void **state)
{
    (void)state;
    (void)unlink(path);
    return 0;
}

static int remove_folder(void **state)
{
    (void)state;
    th_case_destroy(the_case);
    return rmdir(folder);
}

/* Bytes of the journal; the caller frees them. */
static char *bytes_of_file(size_t *length)
{
    FILE *file = fopen(path, "rb");
    char *bytes = NULL;
    struct stat is;

    assert_non_null(file);
    assert_int_equal(fstat(fileno(file), &is), 0);
    *length = (size_t)is.st_size;
    bytes = malloc(*length + 1);
    assert_non_null(bytes);
    assert_int_equal(fread(bytes, 1, *length, file), *length);
    bytes[*length] = '\0';
    (void)fclose(file);
    return bytes;
}

/* A new file with these bytes: some file systems write to the disk at once when an old one is
 * shortened and filled again, and that takes long. */
static void put_file(const char *bytes, size_t length)
{
    FILE *file;

    (void)unlink(path);
    file = fopen(path, "wb");
    assert_non_null(file);
    assert_int_equal(fwrite(bytes, 1, length, file), length);
    assert_int_equal(fclose(file), 0);
}

static size_t file_size(void)
{
    struct stat is;

    assert_int_equal(stat(path, &is), 0);
    return (size_t)is.st_size;
}

/* xorshift64, "Xorshift RNGs", J. Stat. Softw. 8 (14), 2003 (from memory) */
static uint64_t draw(uint64_t *seed)
{
    *seed ^= *seed << 13;
    *seed ^= *seed >> 7;
    *seed ^= *seed << 17;
    return *seed;
}

/* Any finite double, each exponent as likely as any other; now and then one of the ends. */
static double draw_number(uint64_t *seed)
{
    static const double ends[] = {0.0,
                                  -0.0,
                                  4.9406564584124654e-324,
                                  -2.2250738585072009e-308,
                                  DBL_MIN,
                                  DBL_MAX,
                                  -DBL_MAX,
                                  0.1,
                                  1.0 / 3.0};
    uint64_t bits;
    double value;

    if (draw(seed) % 4 == 0)
        return ends[draw(seed) % (sizeof ends / sizeof *ends)];
    do {
        bits = draw(seed);
        memcpy(&value, &bits, sizeof value);
    } while (!isfinite(value));
    return value;
}

/* A point that depends on its number alone. */
static void make_point(long number, th_point *point)
{
    static const char *const words[] = {"",
                                        "the census says 2, the index 1",
                                        "\"quoted\", and 'so'",
                                        "a\\nb \\ c\\\\",
                                        "\xC3\xA4\xCF\x89\xE2\x86\x92\xF0\x9F\x8C\x80 \xC2\xB5m",
                                        ",,,",
                                        "line\nbreak",
                                        " blanks "};
    uint64_t seed = 88172645463325252u + (uint64_t)number * 7919u;

    for (int i = 0; i < 10; i++)
        (void)draw(&seed);
    assert_int_equal(th_point_resize(point, (int)(draw(&seed) % 9), NULL), TH_OK);
    point->number = number;
    point->state = (th_point_state)(draw(&seed) % 3);
    point->horizon_distance = draw_number(&seed);
    point->index_known = draw(&seed) % 2 == 0;
    point->census_known = draw(&seed) % 2 == 0;
    point->index = (int)(uint32_t)draw(&seed);
    point->census = (int)(draw(&seed) % 5);
    point->unstable = (int)(draw(&seed) % 5) - 1;
    for (int i = 0; i < point->count; i++) {
        point->mode[i].omega_re = draw_number(&seed);
        point->mode[i].omega_im = draw_number(&seed);
        point->mode[i].omega_error = draw_number(&seed);
        point->mode[i].label = (th_label)(draw(&seed) % 4);
        point->mode[i].confirmed = (unsigned)(draw(&seed) % 16);
    }
    memset(point->message, 0, sizeof point->message);
    if (draw(&seed) % 16 == 0) /* as long as it can be */
        memset(point->message, '\\', sizeof point->message - 1);
    else
        (void)snprintf(point->message, sizeof point->message, "%s", words[draw(&seed) % 8]);
}

static bool same_bits(double a, double b)
{
    return memcmp(&a, &b, sizeof a) == 0;
}

static void assert_same_point(const th_point *a, const th_point *b)
{
    assert_int_equal(a->number, b->number);
    assert_int_equal(a->state, b->state);
    assert_true(same_bits(a->horizon_distance, b->horizon_distance));
    assert_int_equal(a->index_known, b->index_known);
    assert_int_equal(a->index, b->index);
    assert_int_equal(a->census_known, b->census_known);
    assert_int_equal(a->census, b->census);
    assert_int_equal(a->unstable, b->unstable);
    assert_int_equal(a->count, b->count);
    for (int i = 0; i < a->count; i++) {
        assert_true(same_bits(a->mode[i].omega_re, b->mode[i].omega_re));
        assert_true(same_bits(a->mode[i].omega_im, b->mode[i].omega_im));
        assert_true(same_bits(a->mode[i].omega_error, b->mode[i].omega_error));
        assert_int_equal(a->mode[i].label, b->mode[i].label);
        assert_int_equal(a->mode[i].confirmed, b->mode[i].confirmed);
    }
    assert_string_equal(a->message, b->message);
}

static th_journal *open_journal(long points, bool resume)
{
    th_journal *journal = NULL;
    th_error err = {0};

    if (th_journal_open(path, the_case, points, resume, &journal, &err) != TH_OK)
        fail_msg("%s", err.text);
    return journal;
}

static void append(th_journal *journal, long number)
{
    th_point point = {0};
    th_error err = {0};

    make_point(number, &point);
    if (th_journal_append(journal, &point, &err) != TH_OK)
        fail_msg("%s", err.text);
    th_point_clear(&point);
}

static void assert_holds(th_journal *journal, long number)
{
    th_point expected = {0}, found = {0};
    th_error err = {0};

    make_point(number, &expected);
    assert_true(th_journal_has(journal, number));
    if (th_journal_get(journal, number, &found, &err) != TH_OK)
        fail_msg("%s", err.text);
    assert_same_point(&expected, &found);
    th_point_clear(&expected);
    th_point_clear(&found);
}

static void close_journal(th_journal *journal)
{
    th_error err = {0};

    if (th_journal_close(journal, &err) != TH_OK)
        fail_msg("%s", err.text);
}

/* Opening must fail so; what it says is left in err. */
static void assert_refused(long points, bool resume, th_status status, th_error *err)
{
    th_journal *journal = (th_journal *)&err; /* must become NULL */

    *err = (th_error){0};
    assert_int_equal(th_journal_open(path, the_case, points, resume, &journal, err), status);
    assert_null(journal);
    assert_int_equal(err->status, status);
}

static void assert_says(const th_error *err, const char *part)
{
    if (strstr(err->text, part) == NULL)
        fail_msg("\"%s\" does not say \"%s\"", err->text, part);
}

/* A journal of `count` points 0, 1, ... in the file; *start[i] is where line i + 1 begins, and
 * start[count] the end. */
static char *small_journal(long count, size_t *start, size_t *length)
{
    th_journal *journal = open_journal(POINTS, false);
    char *bytes;

    start[0] = file_size();
    for (long i = 0; i < count; i++) {
        append(journal, i);
        start[i + 1] = file_size();
    }
    close_journal(journal);
    bytes = bytes_of_file(length);
    assert_int_equal(start[count], *length);
    return bytes;
}

/* ---- tests --------------------------------------------------------------------------------- */

/* Check value of CRC-32 as listed for ISO 3309 and V.42 (from memory; zlib.crc32 agrees). */
static void test_checksum(void **state)
{
    (void)state;
    assert_int_equal(th_crc32("123456789", 9), 0xCBF43926);
    assert_int_equal(th_crc32("", 0), 0);
}

/* Every point once, in an order of its own, read while writing, afterwards, and after resuming. */
static void test_round_trip(void **state)
{
    enum { MANY = 600 };
    static long order[MANY];
    th_journal *journal = open_journal(MANY, false);
    const char *text = NULL;
    uint64_t seed = 20240607;
    long points = 0;

    (void)state;
    for (long i = 0; i < MANY; i++)
        order[i] = i;
    for (long i = MANY - 1; i > 0; i--) {
        const long k = (long)(draw(&seed) % (uint64_t)(i + 1)), kept = order[i];

        order[i] = order[k];
        order[k] = kept;
    }
    for (long i = 0; i < MANY / 2; i++) {
        append(journal, order[i]);
        assert_holds(journal, order[draw(&seed) % (uint64_t)(i + 1)]);
        assert_int_equal(th_journal_count(journal), i + 1);
    }
    close_journal(journal);

    journal = open_journal(MANY, true);
    assert_int_equal(th_journal_count(journal), MANY / 2);
    for (long i = MANY / 2; i < MANY; i++) {
        assert_false(th_journal_has(journal, order[i]));
        append(journal, order[i]);
    }
    close_journal(journal);

    assert_int_equal(th_journal_read_only(path, &journal, &points, &text, NULL), TH_OK);
    assert_int_equal(points, MANY);
    assert_string_equal(text, the_case->text);
    assert_int_equal(th_journal_count(journal), MANY);
    for (long i = 0; i < MANY; i++)
        assert_holds(journal, i);
    assert_string_equal(text, the_case->text);
    close_journal(journal);
}

/* Numbers do not depend on the locale of either process. */
static void test_locale(void **state)
{
    th_journal *journal;

    (void)state;
    if (!use_comma_locale())
        skip();
    journal = open_journal(POINTS, false);
    for (long i = 0; i < POINTS; i++)
        append(journal, i);
    assert_holds(journal, 7);
    (void)setlocale(LC_ALL, "C");
    for (long i = 0; i < POINTS; i++)
        assert_holds(journal, i);
    close_journal(journal);
}

/* A journal cut anywhere: the whole lines stay, or it begins anew when it was cut inside its head,
 * before any point. Then it goes on as if nothing had happened. For reading, a cut head is none. */
static void test_every_prefix(void **state)
{
    enum { LINES = 4 };
    size_t start[LINES + 1], length;
    char *bytes = small_journal(LINES, start, &length);

    (void)state;
    for (size_t cut = 0; cut <= length; cut++) {
        th_journal *journal = NULL;
        const char *text;
        long whole = 0, points;
        size_t now;
        char *after;

        while (whole < LINES && start[whole + 1] <= cut)
            whole++;
        put_file(bytes, cut);
        assert_int_equal(th_journal_read_only(path, &journal, &points, &text, NULL),
                         cut < start[0] ? TH_EINVAL : TH_OK);
        if (cut >= start[0])
            assert_int_equal(th_journal_count(journal), whole);
        close_journal(journal);
        assert_int_equal(file_size(), cut); /* reading changes nothing */

        journal = open_journal(POINTS, true);
        assert_int_equal(th_journal_count(journal), whole);
        assert_int_equal(file_size(), start[whole]);
        for (long i = 0; i < LINES; i++) {
            if (i >= whole)
                append(journal, i);
            assert_holds(journal, i);
        }
        close_journal(journal);
        after = bytes_of_file(&now);
        assert_int_equal(now, length);
        assert_memory_equal(after, bytes, length);
        free(after);
    }
    free(bytes);
}

/* A changed byte anywhere: in the head the journal is refused and left alone, in a line that line
 * and all after it go. */
static void test_every_byte(void **state)
{
    enum { LINES = 4 };
    size_t start[LINES + 1], length;
    char *bytes = small_journal(LINES, start, &length);
    th_error err;

    (void)state;
    for (size_t at = 0; at < length; at++) {
        long whole = 0;

        const char kept = bytes[at];

        bytes[at] = (char)(kept ^ 1 << at % 8);
        put_file(bytes, length);
        bytes[at] = kept;
        if (at < start[0]) {
            assert_refused(POINTS, true, TH_EINVAL, &err);
            assert_int_equal(file_size(), length);
            continue;
        }
        while (start[whole + 1] <= at)
            whole++;
        th_journal *journal = open_journal(POINTS, true);

        assert_int_equal(th_journal_count(journal), whole);
        assert_int_equal(file_size(), start[whole]);
        for (long i = 0; i < LINES; i++)
            assert_int_equal(th_journal_has(journal, i), i < whole);
        close_journal(journal);
    }
    free(bytes);
}

/* A head cut short that another case wrote: not the beginning of ours, so it is left alone. */
static void test_foreign_prefix(void **state)
{
    static const char foreign[] = "twinhorizon journal 1,another", table[] = "gap,index\n1,2\n";
    th_error err;

    (void)state;
    put_file(foreign, sizeof foreign - 1);
    assert_refused(POINTS, true, TH_EINVAL, &err);
    assert_says(&err, "damaged");
    assert_int_equal(file_size(), sizeof foreign - 1);
    put_file(table, sizeof table - 1);
    assert_refused(POINTS, true, TH_EINVAL, &err);
    assert_says(&err, "no journal of a sweep");
    assert_int_equal(file_size(), sizeof table - 1);
}

static void test_other_case(void **state)
{
    size_t start[3], length;
    th_case *ours = the_case;
    th_error err;
    char *bytes, *found;

    (void)state;
    free(small_journal(2, start, &length));

    the_case = case_of(CASE_HEAD "gap = 2.385\n" CASE_TAIL);
    assert_refused(POINTS, true, TH_EINVAL, &err);
    assert_says(&err, "\"gap = 2\", now it is \"gap = 2.385\"");
    assert_says(&err, path);
    th_case_destroy(the_case);

    the_case = case_of(CASE_HEAD "gap = 2\n" CASE_TAIL "speed = 0.7, 0.75\n"); /* one line more */
    assert_refused(POINTS, true, TH_EINVAL, &err);
    assert_says(&err, "was missing, now it is \"speed = 0.7, 0.75\"");
    th_case_destroy(the_case);
    the_case = ours;

    assert_refused(POINTS + 1, true, TH_EINVAL, &err);
    assert_says(&err, "30 points, the sweep has 31");

    /* the same head by another version, and in another format, checksums right */
    for (int k = 0; k < 2; k++) {
        th_buffer head = {0};

        th_line_put(&head, k == 0 ? "twinhorizon journal 1" : "twinhorizon journal 2");
        th_line_put(&head, k == 0 ? "99.1" : th_version());
        th_line_put_integer(&head, POINTS);
        th_line_put_text(&head, the_case->text);
        th_line_seal(&head);
        assert_false(head.failed);
        put_file(head.data, head.length);
        free(head.data);
        assert_refused(POINTS, true, TH_EINVAL, &err);
        assert_says(&err, k == 0 ? "version 99.1" : "another format");
    }

    /* a whole line that stands twice: not the journal's doing, so nothing is thrown away */
    (void)unlink(path);
    bytes = small_journal(2, start, &length);
    found = malloc(length + start[1]);
    assert_non_null(found);
    memcpy(found, bytes, length);
    memcpy(found + length, bytes + start[0], start[1] - start[0]);
    length += start[1] - start[0];
    put_file(found, length);
    assert_refused(POINTS, true, TH_EINVAL, &err);
    assert_says(&err, "stands twice");
    assert_int_equal(file_size(), length);
    free(found);
    free(bytes);
}

static void test_places(void **state)
{
    th_journal *journal = open_journal(POINTS, false);
    const char *text;
    char inside[sizeof path + 8], missing[sizeof path + 8];
    long points;
    th_error err;

    (void)state;
    close_journal(journal);
    assert_refused(POINTS, false, TH_EIO, &err);
    assert_says(&err, "--resume continues it");
    assert_refused(0, true, TH_EINVAL, &err);

    (void)snprintf(missing, sizeof missing, "%s/no/journal", folder);
    assert_int_equal(th_journal_open(missing, the_case, POINTS, true, &journal, &err), TH_EIO);
    assert_says(&err, "cannot open for writing");
    assert_int_equal(th_journal_read_only(missing, &journal, &points, &text, &err), TH_EIO);
    (void)snprintf(inside, sizeof inside, "%s/in", path);
    assert_int_equal(th_journal_open(inside, the_case, POINTS, false, &journal, &err), TH_EIO);
    assert_int_equal(th_journal_open(folder, the_case, POINTS, true, &journal, &err), TH_EIO);
    assert_int_equal(th_journal_open("/dev/full", the_case, POINTS, true, &journal, &err),
                     TH_EINVAL);
    assert_int_equal(th_journal_read_only(folder, &journal, &points, &text, &err), TH_EINVAL);
    assert_null(journal);
}

static void test_arguments(void **state)
{
    th_journal *journal = open_journal(POINTS, false), *reader = NULL;
    th_point point = {0}, found = {0};
    const char *text;
    const size_t before = file_size();
    long points;
    th_error err;

    (void)state;
    make_point(3, &point);
    point.number = -1;
    assert_int_equal(th_journal_append(journal, &point, &err), TH_EINVAL);
    point.number = POINTS;
    assert_int_equal(th_journal_append(journal, &point, &err), TH_EINVAL);
    point.number = 3;
    point.horizon_distance = NAN;
    assert_int_equal(th_journal_append(journal, &point, &err), TH_EINVAL);
    assert_int_equal(th_point_resize(&point, 1, NULL), TH_OK);
    point.horizon_distance = 1.0;
    point.mode[0].omega_error = INFINITY;
    assert_int_equal(th_journal_append(journal, &point, &err), TH_EINVAL);
    assert_int_equal(file_size(), before);
    assert_int_equal(th_journal_count(journal), 0);

    append(journal, 3);
    make_point(3, &point);
    assert_int_equal(th_journal_append(journal, &point, &err), TH_EINVAL);
    assert_says(&err, "point 3 is finished already");
    assert_false(th_journal_has(journal, -1));
    assert_false(th_journal_has(journal, 2));
    assert_false(th_journal_has(journal, POINTS));
    assert_int_equal(th_journal_get(journal, 2, &found, &err), TH_ENONE);
    assert_int_equal(th_journal_get(journal, POINTS, &found, &err), TH_ENONE);

    assert_int_equal(th_journal_read_only(path, &reader, &points, &text, NULL), TH_OK);
    make_point(4, &point);
    assert_int_equal(th_journal_append(reader, &point, &err), TH_EINVAL);
    close_journal(reader);
    close_journal(journal);
    assert_int_equal(th_journal_close(NULL, NULL), TH_OK);
    th_point_clear(&point);
    th_point_clear(&found);
}

/* A file that changed under an open journal is noticed when the point is read. */
static void test_changed_beneath(void **state)
{
    th_journal *journal = open_journal(POINTS, false);
    th_point point = {0};
    th_error err = {0};
    FILE *file;
    long end;

    (void)state;
    append(journal, 1);
    end = (long)file_size();
    append(journal, 0);
    file = fopen(path, "r+b");
    assert_non_null(file);
    assert_int_equal(fseek(file, end - 2, SEEK_SET),
                     0); /* in the checksum: the point still reads */
    assert_int_equal(fputc('?', file), '?');
    assert_int_equal(fclose(file), 0);
    assert_int_equal(th_journal_get(journal, 1, &point, &err), TH_EIO);
    assert_says(&err, "point 1 at byte");
    assert_holds(journal, 0);
    close_journal(journal);
    th_point_clear(&point);
}

/* In another process: what opening gives. */
static th_status open_elsewhere(void)
{
    int result;
    const pid_t child = fork();

    assert_true(child >= 0);
    if (child == 0) {
        th_journal *journal = NULL;
        const th_status st = th_journal_open(path, the_case, POINTS, true, &journal, NULL);

        if (journal != NULL && th_journal_close(journal, NULL) != TH_OK)
            _exit(99);
        _exit((int)st);
    }
    assert_int_equal(waitpid(child, &result, 0), child);
    assert_true(WIFEXITED(result));
    return (th_status)WEXITSTATUS(result);
}

static void test_second_writer(void **state)
{
    th_journal *journal, *reader = NULL;
    const char *text;
    long points;
    th_error err;

    (void)state;
    journal = open_journal(POINTS, false);
    append(journal, 5);
    assert_int_equal(open_elsewhere(), TH_EIO);
    assert_refused(POINTS, true, TH_EIO, &err); /* nor a second one in this process */
    assert_says(&err, "another sweep is writing to it");

    /* reading needs no lock, and does not take the writer's away */
    assert_int_equal(th_journal_read_only(path, &reader, &points, &text, NULL), TH_OK);
    assert_holds(reader, 5);
    close_journal(reader);
    assert_int_equal(open_elsewhere(), TH_EIO);
    append(journal, 6);
    close_journal(journal);
    assert_int_equal(open_elsewhere(), TH_OK);
}

/* The disk is full in the middle of a line: the limit of the file's size lets a part of it in. */
static void test_full_disk(void **state)
{
    th_journal *journal = open_journal(POINTS, false);
    struct rlimit before, tight;
    th_point point = {0};
    th_error err = {0};
    size_t whole;

    (void)state;
    append(journal, 0);
    append(journal, 1);
    whole = file_size();
    make_point(2, &point);
    (void)snprintf(point.message, sizeof point.message, "%s", "longer than the disk has room for");
    (void)signal(SIGXFSZ, SIG_IGN);
    assert_int_equal(getrlimit(RLIMIT_FSIZE, &before), 0);
    tight = before;
    for (rlim_t room = 0; room < 40; room++) { /* a line is longer */
        tight.rlim_cur = whole + room;
        assert_int_equal(setrlimit(RLIMIT_FSIZE, &tight), 0);
        assert_int_equal(th_journal_append(journal, &point, &err), TH_EIO);
        assert_int_equal(file_size(), whole);
    }
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &before), 0);
    assert_says(&err, "cannot write to the journal: ");
    assert_says(&err, strerror(EFBIG));
    assert_false(th_journal_has(journal, 2));
    assert_int_equal(th_journal_count(journal), 2);
    for (long i = 0; i < 2; i++)
        assert_holds(journal, i);
    append(journal, 2); /* and it goes on when there is room */
    assert_holds(journal, 2);
    close_journal(journal);
    (void)unlink(path);

    /* no room for the head: no half of it is left, and the same command works later */
    tight.rlim_cur = 50;
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &tight), 0);
    assert_refused(POINTS, false, TH_EIO, &err);
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &before), 0);
    assert_int_equal(file_size(), 0);
    close_journal(open_journal(POINTS, true));
    (void)signal(SIGXFSZ, SIG_DFL);
    th_point_clear(&point);
}

static void test_disturbed_writes(void **state)
{
    th_journal *journal;

    (void)state;
    disturbed = true;
    journal = open_journal(POINTS, false);
    for (long i = 0; i < POINTS; i++)
        append(journal, i);
    disturbed = false;
    for (long i = 0; i < POINTS; i++)
        assert_holds(journal, i);
    close_journal(journal);
    journal = open_journal(POINTS, true);
    assert_int_equal(th_journal_count(journal), POINTS);
    close_journal(journal);
}

static double now(void)
{
    struct timespec t;

    assert_int_equal(clock_gettime(CLOCK_MONOTONIC, &t), 0);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

/* Seconds until fsync was called more than `before` times; 10 when it is not. */
static double until_fsync(int before)
{
    const double start = now();

    while (fsyncs <= before && now() - start < 10.0)
        (void)nanosleep(&(struct timespec){.tv_nsec = 2000000}, NULL);
    return now() - start;
}

/* An append reaches the disk within a second, many share one fsync, and closing brings the rest. */
static void test_fsync(void **state)
{
    th_journal *journal = open_journal(POINTS, false);
    int before;

    (void)state;
    (void)until_fsync(fsyncs); /* head and folder */
    (void)nanosleep(&(struct timespec){.tv_nsec = 400000000}, NULL);
    before = fsyncs;
    (void)nanosleep(&(struct timespec){.tv_nsec = 400000000}, NULL);
    assert_int_equal(fsyncs, before); /* nothing to do, nothing done */
    for (long i = 0; i < 20; i++)
        append(journal, i);
    assert_true(until_fsync(before) < 1.0);
    assert_in_range(fsyncs, before + 1, before + 3); /* 1 unless the machine is very busy */
    append(journal, 20);
    before = fsyncs;
    close_journal(journal);
    assert_true(fsyncs > before);
    for (int k = 0; k < 50; k++) { /* even before the thread has begun: folder and file */
        before = fsyncs;
        close_journal(open_journal(POINTS, true));
        assert_true(fsyncs >= before + 2);
    }
}

/* When the disk takes nothing any more, the caller hears of it, and what was read stays readable.
 */
static void test_fsync_fails(void **state)
{
    th_journal *journal = open_journal(POINTS, false);
    th_point point = {0};
    th_error err = {0};
    double start;
    th_status st = TH_OK;
    long i = 0;

    (void)state;
    append(journal, i++);
    fsync_error = EIO;
    append(journal, i++);
    start = now();
    while (st == TH_OK && now() - start < 5.0 && i < POINTS) { /* the next but one at the latest */
        (void)until_fsync(fsyncs);
        make_point(i, &point);
        st = th_journal_append(journal, &point, &err);
        i += st == TH_OK;
    }
    fsync_error = 0;
    assert_int_equal(st, TH_EIO);
    assert_says(&err, "cannot bring the journal to the disk: ");
    assert_says(&err, strerror(EIO));
    assert_false(th_journal_has(journal, i));
    for (long k = 0; k < i; k++)
        assert_holds(journal, k);
    err = (th_error){0};
    assert_int_equal(th_journal_close(journal, &err), TH_EIO);
    assert_says(&err, "cannot bring the journal to the disk: ");
    th_point_clear(&point);
}

/* kill -9 while points are appended: what the process had reported is there, and at most one more.
 */
static void test_kill(void **state)
{
    enum { KILLS = 20, MANY = 1000000 };
    uint64_t seed = 20240608;
    long finished = 0;

    (void)state;
    for (int k = 0; k < KILLS; k++) {
        const struct timespec delay = {.tv_nsec = (long)(draw(&seed) % 15000000)};
        long reported = finished, number;
        th_journal *journal;
        int ends[2], result;
        pid_t child;

        assert_int_equal(pipe(ends), 0);
        child = fork();
        assert_true(child >= 0);
        if (child == 0) {
            th_point point = {0};

            (void)close(ends[0]);
            if (th_journal_open(path, the_case, MANY, k > 0, &journal, NULL) != TH_OK)
                _exit(1);
            for (number = finished; number < MANY; number++) {
                make_point(number, &point);
                if (th_journal_append(journal, &point, NULL) != TH_OK ||
                    write(ends[1], &number, sizeof number) != sizeof number)
                    _exit(2);
            }
            _exit(3);
        }
        (void)close(ends[1]);
        /* wait for the first, then a random while; the pipe holds 64 KiB, and then the child waits
         */
        assert_int_equal(read(ends[0], &number, sizeof number), sizeof number);
        (void)nanosleep(&delay, NULL);
        assert_int_equal(kill(child, SIGKILL), 0);
        do {
            assert_int_equal(number, reported);
            reported++;
        } while (read(ends[0], &number, sizeof number) == sizeof number);
        (void)close(ends[0]);
        assert_int_equal(waitpid(child, &result, 0), child);
        assert_true(WIFSIGNALED(result) && WTERMSIG(result) == SIGKILL);

        journal = open_journal(MANY, true);
        assert_in_range(th_journal_count(journal), reported, reported + 1);
        for (number = finished; number < reported; number++)
            assert_holds(journal, number);
        finished = th_journal_count(journal);
        close_journal(journal);
    }
}

static void test_refused_allocations(void **state)
{
    th_journal *journal = NULL, *reader = NULL;
    th_point point = {0}, copy = {0};
    const char *text;
    long points, k;
    th_status st;

    (void)state;
    for (k = 0;; k++) { /* a new journal; each failure leaves one that can be taken up */
        refuse_from(k);
        st = th_journal_open(path, the_case, POINTS, true, &journal, NULL);
        if (refuse_stop())
            break;
        assert_int_equal(st, TH_ENOMEM);
        assert_null(journal);
    }
    assert_true(k >= 3);
    assert_int_equal(st, TH_OK);
    close_journal(journal);
    for (k = 0;; k++) { /* and one that exists */
        refuse_from(k);
        st = th_journal_open(path, the_case, POINTS, true, &journal, NULL);
        if (refuse_stop())
            break;
        assert_int_equal(st, TH_ENOMEM);
    }
    assert_int_equal(st, TH_OK);
    for (k = 0;; k++) {
        refuse_from(k);
        st = th_journal_read_only(path, &reader, &points, &text, NULL);
        if (refuse_stop())
            break;
        assert_int_equal(st, TH_ENOMEM);
        assert_null(reader);
    }
    assert_int_equal(st, TH_OK);
    close_journal(reader);

    make_point(0, &point); /* a line longer than the head, so that the buffer must grow */
    assert_int_equal(th_point_resize(&point, 100, NULL), TH_OK);
    for (k = 0;; k++) {
        refuse_from(k);
        st = th_journal_append(journal, &point, NULL);
        if (refuse_stop())
            break;
        assert_int_equal(st, TH_ENOMEM);
        assert_false(th_journal_has(journal, 0));
    }
    assert_true(k >= 1);
    assert_int_equal(st, TH_OK);
    for (k = 0;; k++) {
        refuse_from(k);
        st = th_journal_get(journal, 0, &copy, NULL);
        if (refuse_stop())
            break;
        assert_int_equal(st, TH_ENOMEM);
    }
    assert_true(k >= 1);
    assert_int_equal(st, TH_OK);
    assert_same_point(&point, &copy);
    close_journal(journal);
    th_point_clear(&point);
    th_point_clear(&copy);
}

/* Bytes of address space of this process. */
static long long address_space(void)
{
    FILE *file = fopen("/proc/self/statm", "r");
    long long pages = 0;

    assert_non_null(file);
    assert_int_equal(fscanf(file, "%lld", &pages), 1);
    (void)fclose(file);
    return pages * sysconf(_SC_PAGESIZE);
}

/* 8 bytes for each point of the grid, and nothing for one that is appended or read. So many points
 * that their memory comes from the system and goes back to it; beside the 80 MB an allocator may
 * take pages for itself, up to half as much. */
static void test_memory(void **state)
{
    enum { MANY = 10000000 };
    th_journal *journal = open_journal(MANY, false);
    th_point point = {0};
    const char *text;
    long long before, taken;
    long points;

    (void)state;
    for (long i = 0; i < 40; i++) {
        append(journal, i);
        assert_holds(journal, i);
    }
    assert_int_equal(th_point_resize(&point, 20, NULL), TH_OK);
    for (long i = 40; i < 80; i++) {
        make_point(i % 40, &point); /* no line is longer than one that was there before */
        point.number = i;
        refuse_from(0);
        assert_int_equal(th_journal_append(journal, &point, NULL), TH_OK);
        assert_int_equal(th_journal_get(journal, i, &point, NULL), TH_OK);
        assert_int_equal(th_journal_get(journal, i - 40, &point, NULL), TH_OK);
        assert_true(refuse_stop());
    }
    close_journal(journal);
    th_point_clear(&point);

    before = address_space();
    assert_int_equal(th_journal_read_only(path, &journal, &points, &text, NULL), TH_OK);
    taken = address_space() - before;
    close_journal(journal);
    assert_in_range(taken, 8LL * MANY, 12LL * MANY);
}

/* Points by themselves. */
static void test_point(void **state)
{
    th_point a = {0}, b = {0};
    th_point_mode *kept;

    (void)state;
    assert_string_equal(th_point_state_text(TH_POINT_OK), "ok");
    assert_string_equal(th_point_state_text(TH_POINT_UNDECIDED), "undecided");
    assert_string_equal(th_point_state_text(TH_POINT_FAILED), "failed");
    for (long i = 0; i < 50; i++) {
        make_point(i, &a);
        assert_int_equal(th_point_copy(&a, &b, NULL), TH_OK);
        assert_same_point(&a, &b);
        assert_true(a.count == 0 || a.mode != b.mode);
    }
    make_point(1, &a);
    assert_int_equal(th_point_copy(&a, &a, NULL), TH_OK); /* onto itself */
    assert_int_equal(th_point_copy(&a, &b, NULL), TH_OK);
    assert_same_point(&a, &b);
    assert_int_equal(th_point_resize(&a, -1, NULL), TH_EINVAL);

    /* what was there stays, what is new is zero, and shrinking gives no memory back */
    assert_int_equal(th_point_resize(&a, 1, NULL), TH_OK);
    a.mode[0].omega_re = 2.385;
    assert_int_equal(th_point_resize(&a, 50, NULL), TH_OK);
    assert_true(same_bits(a.mode[0].omega_re, 2.385));
    for (int i = 1; i < 50; i++)
        assert_true(same_bits(a.mode[i].omega_re, 0.0) && a.mode[i].confirmed == 0);
    kept = a.mode;
    refuse_from(0);
    assert_int_equal(th_point_resize(&a, 0, NULL), TH_OK);
    assert_int_equal(th_point_resize(&a, 50, NULL), TH_OK);
    assert_int_equal(th_point_resize(&a, 51, NULL), TH_ENOMEM);
    assert_false(refuse_stop());
    assert_ptr_equal(a.mode, kept);
    assert_int_equal(a.count, 50); /* as it was */
    th_point_clear(&a);
    th_point_clear(&b);
    th_point_clear(NULL);
    assert_null(a.mode);
    assert_int_equal(a.room, 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_checksum),
        cmocka_unit_test(test_point),
        cmocka_unit_test_teardown(test_round_trip, remove_file),
        cmocka_unit_test_teardown(test_locale, remove_file),
        cmocka_unit_test_teardown(test_every_prefix, remove_file),
        cmocka_unit_test_teardown(test_every_byte, remove_file),
        cmocka_unit_test_teardown(test_foreign_prefix, remove_file),
        cmocka_unit_test_teardown(test_other_case, remove_file),
        cmocka_unit_test_teardown(test_places, remove_file),
        cmocka_unit_test_teardown(test_arguments, remove_file),
        cmocka_unit_test_teardown(test_changed_beneath, remove_file),
        cmocka_unit_test_teardown(test_second_writer, remove_file),
        cmocka_unit_test_teardown(test_full_disk, remove_file),
        cmocka_unit_test_teardown(test_disturbed_writes, remove_file),
        cmocka_unit_test_teardown(test_fsync, remove_file),
        cmocka_unit_test_teardown(test_fsync_fails, remove_file),
        cmocka_unit_test_teardown(test_kill, remove_file),
        cmocka_unit_test_teardown(test_refused_allocations, remove_file),
        cmocka_unit_test_teardown(test_memory, remove_file),
    };

    return cmocka_run_group_tests(tests, make_folder, remove_folder);
}
