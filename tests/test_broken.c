/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Every broken case in tests/broken is refused with exactly the expected sentence.
 * NAME.expect holds the sentence, NAME.ini the case (absent where a missing file is the point),
 * NAME.set overrides, one a line. To add one: these files, nothing else. The sentences were
 * written from the rules of the reader, before it ran. tests/test_broken.sh asks the same of the
 * program. Argument: the directory, default tests/broken. */
#define _POSIX_C_SOURCE 200809L

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include <dirent.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>
#include <twinhorizon/case.h>

enum {
    LEAST_CASES = 100, /* fewer means that the directory was not found whole */
    SETS_MAX = 4,
    LINE = 1024
};

/* First lines of a file, newlines cut; how many, 0 when there is no such file. */
static int read_lines(const char *path, char line[][LINE], int most)
{
    FILE *file = fopen(path, "r");
    int count = 0;

    if (file == NULL)
        return 0;
    while (count < most && fgets(line[count], LINE, file) != NULL) {
        line[count][strcspn(line[count], "\n")] = '\0';
        ++count;
    }
    (void)fclose(file);
    return count;
}

/* Whether one case is refused as expected; says so when not. */
static bool check_one(const char *stem)
{
    char path[300], expect[1][LINE] = {""}, set[SETS_MAX][LINE];
    const char *override[SETS_MAX];
    th_case *c = NULL;
    th_error err = {.status = TH_OK};
    th_status st;
    int sets;

    (void)snprintf(path, sizeof path, "%s.expect", stem);
    assert_int_equal(read_lines(path, expect, 1), 1);
    (void)snprintf(path, sizeof path, "%s.set", stem);
    sets = read_lines(path, set, SETS_MAX);
    for (int i = 0; i < sets; ++i)
        override[i] = set[i];
    (void)snprintf(path, sizeof path, "%s.ini", stem);
    st = th_case_read(path, override, sets, &c, &err);
    if (c == NULL && strcmp(err.text, expect[0]) == 0 && err.status == st &&
        st == (strstr(expect[0], ": cannot be read: ") != NULL ? TH_EIO : TH_ECASE))
        return true;
    print_message("%s:\n  want %s\n  have %s (%s)\n", stem, expect[0], err.text,
                  th_status_text(st));
    th_case_destroy(c);
    return false;
}

static void test_all(void **state)
{
    DIR *directory = opendir(".");
    const struct dirent *entry;
    int cases = 0, wrong = 0;

    (void)state;
    assert_non_null(directory);
    while ((entry = readdir(directory)) != NULL) {
        char stem[256];
        char *dot;

        (void)snprintf(stem, sizeof stem, "%s", entry->d_name);
        dot = strrchr(stem, '.');
        if (dot == NULL || strcmp(dot, ".expect") != 0)
            continue;
        *dot = '\0';
        wrong += !check_one(stem);
        ++cases;
    }
    (void)closedir(directory);
    print_message("%d broken cases\n", cases);
    assert_int_equal(wrong, 0);
    assert_true(cases >= LEAST_CASES);
}

int main(int argc, char **argv)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_all)};

    if (chdir(argc > 1 ? argv[1] : "tests/broken") != 0) {
        perror("tests/broken");
        return 1;
    }
    return cmocka_run_group_tests(tests, NULL, NULL);
}
