/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Statuses, error texts and the version. Expected values are written by hand from status.h. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include <ctype.h>
#include <string.h>
#include <twinhorizon/status.h>
#include <twinhorizon/version.h>

static void every_status_has_its_own_text(void **state)
{
    static const th_status all[] = {
#define LIST(name, text) name,
        TH_STATUS_LIST(LIST)
#undef LIST
    };
    const size_t count = sizeof all / sizeof *all;

    (void)state;
    assert_int_equal(TH_OK, 0); /* callers write if (status) */
    assert_int_equal(count, 9);
    for (size_t i = 0; i < count; i++) {
        assert_int_equal(all[i], i);
        assert_true(strlen(th_status_text(all[i])) > 0);
        assert_string_not_equal(th_status_text(all[i]), th_status_text((th_status)99));
        for (size_t k = 0; k < i; k++)
            assert_string_not_equal(th_status_text(all[i]), th_status_text(all[k]));
    }
    assert_string_equal(th_status_text(TH_ENOMEM), "out of memory");
    assert_string_equal(th_status_text((th_status)99), "unknown status");
}

static void failing_fills_the_error(void **state)
{
    th_error err;

    (void)state;
    memset(&err, 'x', sizeof err);
    assert_int_equal(th_fail(&err, TH_EINVAL, "gap = %g, want gap > %d", 2.385, 3), TH_EINVAL);
    assert_int_equal(err.status, TH_EINVAL);
    assert_string_equal(err.text, "gap = 2.385, want gap > 3");
    assert_string_equal(err.key, "");
    assert_int_equal(th_fail_key(&err, TH_ECASE, "gap", "too %s", "short"), TH_ECASE);
    assert_int_equal(err.status, TH_ECASE);
    assert_string_equal(err.text, "too short");
    assert_string_equal(err.key, "gap");
}

static void an_error_is_optional(void **state)
{
    (void)state;
    assert_int_equal(th_fail(NULL, TH_EIO, "%s", "x"), TH_EIO);
    assert_int_equal(th_fail_key(NULL, TH_ENONE, "key", "%s", "x"), TH_ENONE);
}

static void long_texts_are_cut(void **state)
{
    char text[1000];
    struct {
        th_error err;
        char guard[4];
    } box = {.guard = "abc"};

    (void)state;
    memset(text, 'y', sizeof text - 1);
    text[sizeof text - 1] = '\0';
    (void)th_fail_key(&box.err, TH_EIO, text, "%s", text);
    assert_int_equal(strlen(box.err.text), sizeof box.err.text - 1);
    assert_int_equal(strlen(box.err.key), sizeof box.err.key - 1);
    assert_string_equal(box.guard, "abc");
}

static void the_version_has_three_numbers(void **state)
{
    int dots = 0;

    (void)state;
    assert_string_equal(th_version(), TH_VERSION);
    for (const char *c = th_version(); *c != '\0'; c++) {
        assert_true(isdigit((unsigned char)*c) || *c == '.');
        dots += *c == '.';
    }
    assert_int_equal(dots, 2);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_status_has_its_own_text), cmocka_unit_test(failing_fills_the_error),
        cmocka_unit_test(an_error_is_optional),          cmocka_unit_test(long_texts_are_cut),
        cmocka_unit_test(the_version_has_three_numbers),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
