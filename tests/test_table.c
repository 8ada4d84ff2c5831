/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tables: bytes written, rules for cells and columns, files under their names only when finished,
 * errors of the disk, runs that are killed, memory that runs short.
 * Expected bytes are written by hand from RFC 4180; another reader checks them in
 * check_tables.py. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <twinhorizon/table.h>
#include <unistd.h>

#include "refuse.h"

static const th_column columns[] = {
    {.name = "gap", .title = "pocket length", .unit = "m", .datatype = "number"},
    {.name = "unstable", .datatype = "integer", .description = "growing modes, both signs"},
    {.name = "confirmed", .datatype = "boolean"},
    {.name = "status", .datatype = "string", .format = "ok|undecided|failed"},
};
enum { COLUMNS = sizeof columns / sizeof *columns };

#define HEADER "gap,unstable,confirmed,status\r\n"

static char folder[] = "/tmp/test_table_XXXXXX";
static char path[64], part[64], meta[64], meta_part[64]; /* of a table in the folder */

static int make_folder(void **state)
{
    (void)state;
    if (mkdtemp(folder) == NULL)
        return -1;
    (void)snprintf(path, sizeof path, "%s/points.csv", folder);
    (void)snprintf(part, sizeof part, "%s/points.csv.part", folder);
    (void)snprintf(meta, sizeof meta, "%s/points.csv-metadata.json", folder);
    (void)snprintf(meta_part, sizeof meta_part, "%s/points.csv-metadata.json.part", folder);
    return 0;
}

static int remove_files(void **state)
{
    (void)state;
    (void)unlink(path);
    (void)unlink(part);
    (void)unlink(meta);
    (void)unlink(meta_part);
    return 0;
}

static int remove_folder(void **state)
{
    (void)remove_files(state);
    return rmdir(folder);
}

static bool exists(const char *file)
{
    return access(file, F_OK) == 0;
}

static void spill(const char *file, const char *text, size_t length)
{
    FILE *f = fopen(file, "w");

    assert_non_null(f);
    assert_int_equal(fwrite(text, 1, length, f), length);
    assert_int_equal(fclose(f), 0);
}

static const char *slurp(const char *file)
{
    static char text[8192];
    FILE *f = fopen(file, "r");
    size_t length;

    assert_non_null(f);
    length = fread(text, 1, sizeof text - 1, f);
    text[length] = '\0';
    (void)fclose(f);
    return text;
}

static th_table *start(void)
{
    th_table *table = NULL;
    th_error err;

    assert_int_equal(
        th_table_create(path, NULL, columns, COLUMNS, "a title", "[flow]\n", &table, &err), TH_OK);
    return table;
}

static void put(th_table *table, double gap, const char *status)
{
    th_table_put_number(table, gap);
    th_table_put_integer(table, 2);
    th_table_put_boolean(table, true);
    th_table_put_text(table, status);
    assert_int_equal(th_table_end_row(table, NULL), TH_OK);
}

static void finish(th_table *table)
{
    th_error err = {TH_OK, "", ""};
    th_status st = th_table_finish(table, &err);

    assert_string_equal(err.text, "");
    assert_int_equal(st, TH_OK);
    th_table_destroy(table);
}

static void rows_are_written_as_the_standard_says(void **state)
{
    th_table *table = start();

    (void)state;
    put(table, 2.385, "ok");
    put(table, -1e-5, "a,b");
    put(table, 0.0, "say \"no\"");
    put(table, 1.0 / 3.0, "two\r\nlines\n");
    put(table, 1e300, " before");
    put(table, 1e300, "after ");
    put(table, 1, "");
    th_table_put_nothing(table);
    th_table_put_integer(table, -7);
    th_table_put_boolean(table, false);
    th_table_put_nothing(table);
    assert_int_equal(th_table_end_row(table, NULL), TH_OK);
    finish(table);
    assert_string_equal(slurp(path), HEADER "2.385,2,true,ok\r\n"
                                            "-1e-05,2,true,\"a,b\"\r\n"
                                            "0,2,true,\"say \"\"no\"\"\"\r\n"
                                            "0.333333333333333,2,true,\"two\r\nlines\n\"\r\n"
                                            "1e+300,2,true,\" before\"\r\n"
                                            "1e+300,2,true,\"after \"\r\n"
                                            "1,2,true,\"\"\r\n"
                                            ",-7,false,\r\n");
}

static void a_lone_empty_cell_is_no_blank_line(void **state)
{
    const th_column one = {.name = "x", .datatype = "number"};
    th_table *table;

    (void)state;
    assert_int_equal(th_table_create(path, NULL, &one, 1, "", "", &table, NULL), TH_OK);
    th_table_put_nothing(table);
    assert_int_equal(th_table_end_row(table, NULL), TH_OK);
    finish(table);
    assert_string_equal(slurp(path), "x\r\n\"\"\r\n");
}

/* End a row that breaks a rule, and see that the message holds `words` and a good row follows. */
static void refused(th_table *table, const char *words)
{
    th_error err;

    assert_int_equal(th_table_end_row(table, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, words));
    assert_non_null(strstr(err.text, "points.csv: "));
    put(table, 1, "ok");
}

static void wrong_cells_are_refused(void **state)
{
    th_table *table = start();
    th_error err;

    (void)state;
    th_table_put_integer(table, 1);
    th_table_put_number(table, 1);
    th_table_put_text(table, "x");
    th_table_put_boolean(table, true);
    refused(table, "column gap: got integer, want number");
    th_table_put_number(table, NAN);
    th_table_put_nothing(table);
    th_table_put_nothing(table);
    th_table_put_nothing(table);
    refused(table, "column gap: got nan, want a finite number");
    th_table_put_number(table, -HUGE_VAL);
    refused(table, "got -inf");
    th_table_put_number(table, 1);
    refused(table, "a row of 1 cells, want 4");
    refused(table, "a row of 0 cells, want 4");
    for (int i = 0; i < 5; i++)
        th_table_put_nothing(table);
    refused(table, "a row of more than 4 cells");
    th_table_put_nothing(table);
    assert_int_equal(th_table_finish(table, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "inside a row, after 1 of 4 cells"));
    th_table_put_nothing(table);
    th_table_put_nothing(table);
    th_table_put_nothing(table);
    assert_int_equal(th_table_end_row(table, &err), TH_OK);
    finish(table);
    assert_string_equal(slurp(path), HEADER "1,2,true,ok\r\n1,2,true,ok\r\n1,2,true,ok\r\n"
                                            "1,2,true,ok\r\n1,2,true,ok\r\n1,2,true,ok\r\n"
                                            ",,,\r\n");
}

static void wrong_columns_are_refused(void **state)
{
    char longest[TH_COLUMN_NAME_MAX + 2];
    const struct {
        th_column column[2];
        int count;
        const char *words;
    } cases[] = {
        {{{.name = "", .datatype = "number"}}, 1, "column name ''"},
        {{{.name = "a b", .datatype = "number"}}, 1, "column name 'a b'"},
        {{{.name = "_a", .datatype = "number"}}, 1, "column name '_a'"},
        {{{.name = longest, .datatype = "number"}}, 1, "want 1 to 63 letters"},
        {{{.name = "a", .datatype = "float"}}, 1, "column a: datatype 'float'"},
        {{{.name = "a", .datatype = "number", .format = "1|2"}}, 1, "for strings only"},
        {{{.name = "a", .datatype = "number"}, {.name = "a", .datatype = "string"}},
         2,
         "two columns are called a"},
        {{{.name = "a", .datatype = "number"}}, 0, "0 columns, want at least 1"},
    };

    (void)state;
    memset(longest, 'n', sizeof longest - 1);
    longest[sizeof longest - 1] = '\0';
    for (size_t i = 0; i < sizeof cases / sizeof *cases; i++) {
        th_table *table = (th_table *)&table;
        th_error err;

        assert_int_equal(
            th_table_create(path, NULL, cases[i].column, cases[i].count, "", "", &table, &err),
            TH_EINVAL);
        assert_null(table);
        assert_non_null(strstr(err.text, cases[i].words));
        assert_false(exists(part));
    }
}

static void a_table_gets_its_name_when_it_is_finished(void **state)
{
    th_table *table;

    (void)state;
    spill(path, "old", 3);
    spill(part, HEADER HEADER HEADER, 3 * strlen(HEADER)); /* of a killed run */
    table = start();
    put(table, 1, "ok");
    assert_int_equal(th_table_flush(table, NULL), TH_OK);
    assert_string_equal(slurp(path), "old");
    assert_string_equal(slurp(part), HEADER "1,2,true,ok\r\n");
    assert_true(exists(meta_part));
    assert_false(exists(meta));
    finish(table);
    assert_string_equal(slurp(path), HEADER "1,2,true,ok\r\n");
    assert_false(exists(part));
    assert_false(exists(meta_part));
    assert_true(exists(meta));
}

static void a_table_that_is_given_up_leaves_nothing(void **state)
{
    th_table *table;

    (void)state;
    spill(path, "old", 3);
    table = start();
    put(table, 1, "ok");
    th_table_destroy(table);
    th_table_destroy(NULL);
    assert_string_equal(slurp(path), "old");
    assert_false(exists(part));
    assert_false(exists(meta_part));
    assert_false(exists(meta));
}

static void metadata_escapes_what_json_cannot_hold(void **state)
{
    /* a control character, a quote, a backslash, a tab; U+00B5 and U+1F30A as they stand; then
     * bytes that are no UTF-8, each a U+FFFD: a lone continuation; overlong forms of two, three
     * and four bytes; a surrogate; above U+10FFFF; torn at the end */
    const char *text = "a\x1F\"\\\t\xC2\xB5\xF0\x9F\x8C\x8A|\x80|\xC0\xAF|\xE0\x80\xAF|"
                       "\xF0\x80\x80\xAF|\xED\xA0\x80|\xF4\x90\x80\x80|\xE2\x82";
#define BAD "\\ufffd"
    const char *json =
        "\"dc:source\": \"a\\u001f\\\"\\\\\\u0009\xC2\xB5\xF0\x9F\x8C\x8A|" BAD "|" BAD BAD
        "|" BAD BAD BAD "|" BAD BAD BAD BAD "|" BAD BAD BAD "|" BAD BAD BAD BAD "|" BAD BAD "\",\n";
#undef BAD
    th_table *table;

    (void)state;
    assert_int_equal(th_table_create(path, NULL, columns, COLUMNS, "t", text, &table, NULL), TH_OK);
    finish(table);
    assert_non_null(strstr(slurp(meta), json));
}

static void a_stream_gets_the_table_alone(void **state)
{
    char *text = NULL;
    size_t length;
    FILE *stream = open_memstream(&text, &length);
    th_table *table;

    (void)state;
    assert_non_null(stream);
    assert_int_equal(th_table_create("-", stream, columns, COLUMNS, "", "", &table, NULL), TH_OK);
    put(table, 1, "ok");
    finish(table);
    assert_string_equal(text, HEADER "1,2,true,ok\r\n");
    assert_int_equal(fclose(stream), 0); /* it was left open */
    free(text);
    assert_false(exists("-"));
    assert_false(exists("--metadata.json"));
}

/* Write rows until the table reports an error; the library may hold some back. */
static th_status write_until_it_fails(th_table *table, th_error *err)
{
    th_status st = TH_OK;

    for (int i = 0; i < 1000 && st == TH_OK; i++) {
        for (int k = 0; k < COLUMNS; k++)
            th_table_put_nothing(table);
        st = th_table_end_row(table, err);
    }
    return st == TH_OK ? th_table_finish(table, err) : st;
}

static void a_full_disk_is_reported(void **state)
{
    FILE *full = fopen("/dev/full", "w");
    th_table *table;
    th_error err;

    (void)state;
    assert_non_null(full);
    assert_int_equal(th_table_create("-", full, columns, COLUMNS, "", "", &table, &err), TH_OK);
    assert_int_equal(write_until_it_fails(table, &err), TH_EIO);
    assert_string_equal(err.text, "-: cannot write a row: No space left on device");
    assert_int_equal(th_table_finish(table, &err), TH_EIO); /* it cannot be made good */
    assert_string_equal(err.text, "-: cannot write: No space left on device");
    th_table_destroy(table);
    (void)fclose(full);

    assert_int_equal(th_table_create("/dev/full", NULL, columns, COLUMNS, "", "", &table, &err),
                     TH_OK);
    put(table, 1, "ok");
    assert_int_equal(th_table_flush(table, &err), TH_EIO);
    assert_string_equal(err.text, "/dev/full: cannot write: No space left on device");
    th_table_destroy(table);
    assert_true(exists("/dev/full"));
    assert_false(exists("/dev/full-metadata.json"));
}

static void a_file_that_may_not_grow_is_reported(void **state)
{
    struct rlimit old, low;
    th_table *table;
    th_error err;

    (void)state;
    assert_int_equal(getrlimit(RLIMIT_FSIZE, &old), 0);
    low = old;
    low.rlim_cur = 2000; /* bytes: room for the metadata, not for 1000 rows */
    assert_true(signal(SIGXFSZ, SIG_IGN) != SIG_ERR);
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &low), 0);
    table = start();
    assert_int_equal(write_until_it_fails(table, &err), TH_EIO);
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &old), 0);
    assert_non_null(strstr(err.text, "points.csv.part: cannot write"));
    assert_non_null(strstr(err.text, ": File too large"));
    th_table_destroy(table);
    assert_false(exists(part));
    assert_false(exists(path));

    low.rlim_cur = 10; /* not even for the metadata */
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &low), 0);
    assert_int_equal(th_table_create(path, NULL, columns, COLUMNS, "", "", &table, &err), TH_EIO);
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &old), 0);
    assert_non_null(strstr(err.text, "points.csv-metadata.json.part: cannot write: File too"));
    assert_false(exists(part));
    assert_false(exists(meta_part));
}

static void a_place_that_cannot_be_written_is_reported(void **state)
{
    th_table *table;
    th_error err;

    (void)state;
    assert_int_equal(
        th_table_create("/nowhere/x.csv", NULL, columns, COLUMNS, "", "", &table, &err), TH_EIO);
    assert_string_equal(err.text, "/nowhere/x.csv.part: cannot open for writing: "
                                  "No such file or directory");
    assert_int_equal(th_table_create(folder, NULL, columns, COLUMNS, "", "", &table, &err), TH_EIO);
    assert_non_null(strstr(err.text, "cannot open for writing: Is a directory"));
    assert_int_equal(mkdir(meta_part, 0777), 0);
    assert_int_equal(th_table_create(path, NULL, columns, COLUMNS, "", "", &table, &err), TH_EIO);
    assert_int_equal(rmdir(meta_part), 0);
    assert_false(exists(part));
    table = start();
    assert_int_equal(mkdir(path, 0777), 0); /* in the way of the finished table */
    assert_int_equal(th_table_finish(table, &err), TH_EIO);
    assert_int_equal(rmdir(path), 0);
    assert_non_null(strstr(err.text, "points.csv: cannot give this name to the table: "));
    th_table_destroy(table);
    assert_false(exists(part));
}

/* Rows seen by a reader: the last cells joined, and where to stop. */
typedef struct {
    char seen[256];
    long stop; /* row that is not wanted any more; -1: none */
} watcher;

static bool watch(void *ctx, long row, int count, const char *const *cell)
{
    watcher *w = ctx;
    size_t length = strlen(w->seen);

    if (row == w->stop)
        return false;
    (void)snprintf(w->seen + length, sizeof w->seen - length, "%ld:%d:%s;", row, count,
                   cell[count - 1]);
    return true;
}

static th_status resume(const char *case_text, watcher *w, th_table **table, th_error *err)
{
    return th_table_resume(path, columns, COLUMNS, "a title", case_text, watch, w, table, err);
}

static void a_killed_run_goes_on_where_it_was(void **state)
{
    watcher w = {.stop = -1};
    th_table *table;
    pid_t child = fork();
    int status;
    FILE *f;

    (void)state;
    if (child == 0) {
        table = start();
        put(table, 1, "ok");
        put(table, 2, "a \"b\"\r\nc");
        (void)!th_table_flush(table, NULL);
        put(table, 3, "not flushed");
        (void)raise(SIGKILL);
    }
    assert_int_equal(waitpid(child, &status, 0), child);
    assert_true(WIFSIGNALED(status));
    f = fopen(part, "a");
    assert_non_null(f);
    assert_true(fputs("4,2,true,\"torn\r\n", f) >= 0);
    assert_int_equal(fclose(f), 0);

    assert_int_equal(resume("[flow]\n", &w, &table, NULL), TH_OK);
    assert_string_equal(w.seen, "0:4:status;1:4:ok;2:4:a \"b\"\r\nc;");
    put(table, 3, "ok");
    finish(table);
    assert_string_equal(slurp(path), HEADER "1,2,true,ok\r\n2,2,true,\"a \"\"b\"\"\r\nc\"\r\n"
                                            "3,2,true,ok\r\n");
    assert_true(exists(meta));
    assert_false(exists(part));
}

static void torn_rows_are_dropped(void **state)
{
    static const char *const torn[] = {"2", "2,2,true,ok", "2,2,true,ok\r", "2,2,true,\"o\r\n",
                                       "2,2,true,\"ok\"\""};

    (void)state;
    for (size_t i = 0; i < sizeof torn / sizeof *torn; i++) {
        const char *mark = i % 2 == 0 ? "" : "\xEF\xBB\xBF"; /* as an editor may have left */
        watcher w = {.stop = -1};
        th_table *table = start();
        char text[128];

        th_table_keep(table);
        th_table_destroy(table);
        (void)snprintf(text, sizeof text, "%s" HEADER "1,2,true,ok\r\n%s", mark, torn[i]);
        spill(part, text, strlen(text));
        assert_int_equal(resume("[flow]\n", &w, &table, NULL), TH_OK);
        assert_string_equal(w.seen, "0:4:status;1:4:ok;");
        put(table, 3, "ok");
        finish(table);
        (void)snprintf(text, sizeof text, "%s" HEADER "1,2,true,ok\r\n3,2,true,ok\r\n", mark);
        assert_string_equal(slurp(path), text);
        (void)remove_files(NULL);
    }
}

/* The metadata have their name already, the table not yet. */
static void a_run_killed_while_finishing_goes_on(void **state)
{
    watcher w = {.stop = -1};
    th_table *table = start();
    struct rlimit old, low;
    th_error err;

    (void)state;
    put(table, 1, "ok");
    finish(table);
    assert_int_equal(rename(path, part), 0);

    assert_int_equal(getrlimit(RLIMIT_FSIZE, &old), 0);
    low = old;
    low.rlim_cur = 100; /* bytes: no room for the metadata */
    assert_true(signal(SIGXFSZ, SIG_IGN) != SIG_ERR);
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &low), 0);
    assert_int_equal(resume("[flow]\n", &w, &table, &err), TH_EIO);
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &old), 0);
    assert_true(exists(part));
    assert_false(exists(meta_part)); /* half of them would be in the way of the next try */

    assert_int_equal(resume("[flow]\n", &w, &table, &err), TH_OK);
    finish(table);
    assert_string_equal(slurp(path), HEADER "1,2,true,ok\r\n");
}

static void rows_may_be_dropped_on_resuming(void **state)
{
    watcher w = {.stop = 2};
    th_table *table = start();

    (void)state;
    put(table, 1, "ok");
    put(table, 2, "ok");
    put(table, 3, "ok");
    th_table_keep(table);
    th_table_destroy(table);
    assert_true(exists(part));
    assert_int_equal(resume("[flow]\n", &w, &table, NULL), TH_OK);
    put(table, 9, "ok");
    finish(table);
    assert_string_equal(slurp(path), HEADER "1,2,true,ok\r\n9,2,true,ok\r\n");
}

static void a_finished_table_can_grow(void **state)
{
    watcher w = {.stop = -1};
    th_table *table = start();

    (void)state;
    put(table, 1, "ok");
    finish(table);
    assert_int_equal(resume("[flow]\n", &w, &table, NULL), TH_OK);
    assert_false(exists(path));
    assert_false(exists(meta));
    th_table_destroy(table); /* given up: the rows it had are kept */
    assert_int_equal(resume("[flow]\n", &w, &table, NULL), TH_OK);
    put(table, 2, "ok");
    finish(table);
    assert_string_equal(slurp(path), HEADER "1,2,true,ok\r\n2,2,true,ok\r\n");
    assert_true(exists(meta));
    assert_false(exists(meta_part));
}

static void resuming_nothing_starts(void **state)
{
    watcher w = {.stop = -1};
    th_table *table;

    (void)state;
    assert_int_equal(resume("[flow]\n", &w, &table, NULL), TH_OK);
    assert_string_equal(w.seen, "");
    finish(table);
    assert_string_equal(slurp(path), HEADER);
    (void)unlink(path);
    spill(part, "gap,unst", 8); /* killed inside the header */
    assert_int_equal(resume("[flow]\n", &w, &table, NULL), TH_OK);
    assert_string_equal(w.seen, "");
    finish(table);
    assert_string_equal(slurp(path), HEADER);
}

/* Resuming is refused when the end of the metadata is cut or has one more byte. */
static void keep_metadata_but(watcher *w, int change, char more)
{
    char text[4096];
    size_t length;
    th_table *table;

    (void)snprintf(text, sizeof text, "%s", slurp(meta_part));
    length = strlen(text);
    text[length] = more;
    spill(meta_part, text, change < 0 ? length - 1 : length + 1);
    assert_int_equal(resume("[flow]\n", w, &table, NULL), TH_EINVAL);
    spill(meta_part, text, length);
}

static void resuming_another_case_changes_nothing(void **state)
{
    watcher w = {.stop = -1};
    th_table *table = start();
    th_error err;

    (void)state;
    put(table, 1, "ok");
    th_table_keep(table);
    th_table_destroy(table);
    assert_int_equal(resume("[flow]\ngap = 2\n", &w, &table, &err), TH_EINVAL);
    assert_null(table);
    assert_non_null(strstr(err.text, "metadata.json.part: written for another case"));
    assert_string_equal(slurp(part), HEADER "1,2,true,ok\r\n");
    assert_true(exists(meta_part));

    keep_metadata_but(&w, -1, '\0'); /* cut short */
    keep_metadata_but(&w, 0, '\n');  /* longer */
    assert_int_equal(resume("[flow]\n", &w, &table, &err), TH_OK);
    finish(table);
    assert_int_equal(resume("[flow]", &w, &table, &err), TH_EINVAL); /* now a finished one */
    assert_string_equal(slurp(path), HEADER "1,2,true,ok\r\n");
    assert_int_equal(unlink(meta), 0);
    assert_int_equal(resume("[flow]\n", &w, &table, &err), TH_EIO);
    assert_string_equal(slurp(path), HEADER "1,2,true,ok\r\n");
    assert_int_equal(
        th_table_resume("/dev/null", columns, COLUMNS, "", "", watch, &w, &table, &err), TH_EINVAL);
}

static void resuming_a_spoilt_table_changes_nothing(void **state)
{
    static const char *const spoilt[] = {HEADER "1,2,true\r\n", "gap,unstable,confirmed\r\n",
                                         "gap,unstable,confirmed,state\r\n",
                                         HEADER "1,2,a\"b,\r\n"};

    (void)state;
    for (size_t i = 0; i < sizeof spoilt / sizeof *spoilt; i++) {
        watcher w = {.stop = -1};
        th_table *table = start();
        th_error err;

        th_table_keep(table);
        th_table_destroy(table);
        spill(part, spoilt[i], strlen(spoilt[i]));
        assert_int_equal(resume("[flow]\n", &w, &table, &err), TH_EINVAL);
        assert_non_null(strstr(err.text, i == 1 || i == 2 ? "points.csv.part:1: the cells do not"
                                                          : "points.csv.part:2: "));
        assert_string_equal(slurp(part), spoilt[i]);
    }
}

static void two_processes_do_not_write_one_table(void **state)
{
    int ready[2], go[2], status;
    th_table *table;
    th_error err;
    char byte = 0;
    pid_t child;

    (void)state;
    assert_int_equal(pipe(ready), 0);
    assert_int_equal(pipe(go), 0);
    child = fork();
    if (child == 0) {
        (void)close(go[1]); /* so that it ends when the parent does */
        table = start();
        put(table, 1, "first");
        (void)!write(ready[1], &byte, 1);
        (void)!read(go[0], &byte, 1);
        finish(table);
        _exit(0);
    }
    assert_int_equal(read(ready[0], &byte, 1), 1);
    assert_int_equal(th_table_create(path, NULL, columns, COLUMNS, "", "", &table, &err), TH_EIO);
    assert_non_null(strstr(err.text, "points.csv.part: cannot write: another process"));
    assert_int_equal(write(go[1], &byte, 1), 1);
    assert_int_equal(waitpid(child, &status, 0), child);
    assert_int_equal(status, 0);
    assert_string_equal(slurp(path), HEADER "1,2,true,first\r\n");
    for (int i = 0; i < 2; i++) {
        (void)close(ready[i]);
        (void)close(go[i]);
    }
}

static void tables_of_any_origin_are_read(void **state)
{
    static const char text[] = "\xEF\xBB\xBFx,\"v, or so\"\n1,\"a\"\"b\"\r\n2,\"\"\n,last";
    watcher w = {.stop = -1}, early = {.stop = 2};

    (void)state;
    spill(path, text, sizeof text - 1);
    assert_int_equal(th_table_read(path, watch, &w, NULL), TH_OK);
    assert_string_equal(w.seen, "0:2:v, or so;1:2:a\"b;2:2:;3:2:last;");
    assert_int_equal(th_table_read(path, watch, &early, NULL), TH_OK);
    assert_string_equal(early.seen, "0:2:v, or so;1:2:a\"b;");
    spill(path, "", 0);
    assert_int_equal(th_table_read(path, watch, &early, NULL), TH_OK);
    assert_string_equal(early.seen, "0:2:v, or so;1:2:a\"b;");
}

static void unreadable_tables_are_reported(void **state)
{
    static const struct {
        const char *text;
        size_t length;
        const char *words;
    } cases[] = {
        {"a,b\n1\n", 6, "points.csv:2: 1 cells, the header has 2"},
        {"a,b\n1,2\n\n", 9, "points.csv:3: 1 cells, the header has 2"},
        {"a\nx\"y\n", 6, "points.csv:2: a quote inside a cell"},
        {"a\n\"x\" y\n", 8, "points.csv:2: text after the closing quote"},
        {"a\rb\n", 4, "points.csv:1: a carriage return without"},
        {"a\n\0\n", 4, "points.csv:2: a NUL byte"},
        {"a\n\"x\ny", 6, "points.csv:2: the file ends inside quotes"},
        {"\xEF\xBB!", 3, "points.csv:1: the first bytes are no UTF-8"},
    };
    watcher w = {.stop = -1};
    th_error err;

    (void)state;
    for (size_t i = 0; i < sizeof cases / sizeof *cases; i++) {
        spill(path, cases[i].text, cases[i].length);
        assert_int_equal(th_table_read(path, watch, &w, &err), TH_EINVAL);
        assert_non_null(strstr(err.text, cases[i].words));
    }
    assert_int_equal(th_table_read("/nowhere/x", watch, &w, &err), TH_EIO);
    assert_string_equal(err.text, "/nowhere/x: cannot open for reading: No such file or directory");
    assert_int_equal(th_table_read(folder, watch, &w, &err), TH_EIO);
    assert_non_null(strstr(err.text, ": cannot read: Is a directory"));
}

static void short_memory_is_reported(void **state)
{
    char wide[1000];
    th_table *table = NULL;
    th_error err = {TH_OK, "", ""};
    watcher w = {.stop = -1};

    (void)state;
    memset(wide, 'w', sizeof wide - 1);
    wide[sizeof wide - 1] = '\0';
    for (long k = 0;; k++) {
        th_status st;

        refuse_from(k);
        st = th_table_create(path, NULL, columns, COLUMNS, "", "[flow]\n", &table, &err);
        if (refuse_stop())
            break;
        assert_int_equal(st, TH_ENOMEM);
        assert_null(table);
        assert_false(exists(part));
    }
    refuse_from(0);
    th_table_put_nothing(table);
    th_table_put_nothing(table);
    th_table_put_nothing(table);
    th_table_put_text(table, wide);
    assert_int_equal(th_table_end_row(table, &err), TH_ENOMEM);
    assert_false(refuse_stop());
    put(table, 1, wide);
    finish(table);
    for (long k = 0;; k++) {
        th_status st;

        refuse_from(k);
        st = th_table_read(path, watch, &w, &err);
        if (refuse_stop())
            break;
        assert_int_equal(st, TH_ENOMEM);
    }
    for (long k = 0;; k++) {
        th_status st;

        refuse_from(k);
        st = th_table_resume(path, columns, COLUMNS, "", "[flow]\n", watch, &w, &table, &err);
        if (refuse_stop())
            break;
        assert_int_equal(st, TH_ENOMEM);
        assert_null(table);
    }
    finish(table);
}

int main(void)
{
#define CASE(name) cmocka_unit_test_teardown(name, remove_files)
    const struct CMUnitTest tests[] = {
        CASE(rows_are_written_as_the_standard_says),
        CASE(a_lone_empty_cell_is_no_blank_line),
        CASE(wrong_cells_are_refused),
        CASE(wrong_columns_are_refused),
        CASE(a_table_gets_its_name_when_it_is_finished),
        CASE(a_table_that_is_given_up_leaves_nothing),
        CASE(metadata_escapes_what_json_cannot_hold),
        CASE(a_stream_gets_the_table_alone),
        CASE(a_full_disk_is_reported),
        CASE(a_file_that_may_not_grow_is_reported),
        CASE(a_place_that_cannot_be_written_is_reported),
        CASE(a_killed_run_goes_on_where_it_was),
        CASE(torn_rows_are_dropped),
        CASE(a_run_killed_while_finishing_goes_on),
        CASE(rows_may_be_dropped_on_resuming),
        CASE(a_finished_table_can_grow),
        CASE(resuming_nothing_starts),
        CASE(resuming_another_case_changes_nothing),
        CASE(resuming_a_spoilt_table_changes_nothing),
        CASE(two_processes_do_not_write_one_table),
        CASE(tables_of_any_origin_are_read),
        CASE(unreadable_tables_are_reported),
        CASE(short_memory_is_reported),
    };

    return cmocka_run_group_tests(tests, make_folder, remove_folder);
}
