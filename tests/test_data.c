/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tables of measured profiles: what is read, in which units, and the one sentence for each way in
 * which a file can be wrong. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>
#include <cmocka.h>

#include "refuse.h"
#include "twinhorizon/data.h"

static const char *const path = "test_data.csv.tmp";

static void write_bytes(const char *text, size_t length)
{
    FILE *file = fopen(path, "wb");

    assert_non_null(file);
    assert_int_equal(fwrite(text, 1, length, file), length);
    assert_int_equal(fclose(file), 0);
}

/* A header, optional text after it, then `rows` rows "x,1.5,0.5" that fall in x. */
static void write_rows(const char *head, int rows, const char *last)
{
    FILE *file = fopen(path, "wb");

    assert_non_null(file);
    fputs(head, file);
    for (int i = 0; i < rows; i++)
        fprintf(file, "%d.25,1.5,0.5\n", rows - i);
    fputs(last, file);
    assert_int_equal(fclose(file), 0);
}

static void refused(th_system system, const char *words)
{
    th_data *data = NULL;
    th_error err = {0};

    assert_int_equal(th_data_read(path, system, &data, &err), TH_EINVAL);
    assert_null(data);
    if (strstr(err.text, words) == NULL || strncmp(err.text, path, strlen(path)) != 0)
        fail_msg("\"%s\" does not begin with the file or say \"%s\"", err.text, words);
}

static void test_reads(void **state)
{
    th_data *data = NULL, *other = NULL;
    th_error err = {0};
    const double *x;

    (void)state;
    write_rows("# a comment, with a \"quote\nx,speed,sound\n", 60, "\n  # another\n-3,2,4\r\n");
    if (th_data_read(path, TH_SYSTEM_REDUCED, &data, &err) != TH_OK)
        fail_msg("%s", err.text);
    assert_int_equal(th_data_rows(data), 61);
    x = th_data_values(data, TH_DATA_X);
    assert_true(x[0] == -3 && x[1] == 1.25 && x[60] == 60.25);
    assert_true(th_data_values(data, TH_DATA_SPEED)[0] == 2);
    assert_true(th_data_values(data, TH_DATA_SOUND)[0] == 4);
    assert_null(th_data_values(data, TH_DATA_DENSITY));
    assert_string_equal(th_data_path(data), path);
    assert_string_equal(th_data_name(TH_DATA_SPEED + TH_DATA_ERROR), "speed_error");
    /* the hash tells one changed digit, and nothing else */
    assert_int_equal(th_data_read(path, TH_SYSTEM_REDUCED, &other, &err), TH_OK);
    assert_true(th_data_hash(data) == th_data_hash(other));
    th_data_destroy(other);
    write_rows("# a comment, with a \"quote\nx,speed,sound\n", 60, "\n  # another\n-3,2,5\r\n");
    assert_int_equal(th_data_read(path, TH_SYSTEM_REDUCED, &other, &err), TH_OK);
    assert_true(th_data_hash(data) != th_data_hash(other));
    th_data_destroy(other);
    th_data_destroy(data);
    /* FNV-1a, 64 bits: the published value of no bytes is the offset basis, of "a"
     * af63dc4c8601ec8c ("The FNV Non-Cryptographic Hash Algorithm", internet draft, appendix C);
     * here through a longer text by the definition */
    {
        const char *head = "x,speed,sound\n";
        uint64_t hash = UINT64_C(14695981039346656037);
        char text[2000];
        size_t length = 0;

        length += (size_t)sprintf(text, "%s", head);
        for (int i = 0; i < 50; i++)
            length += (size_t)sprintf(text + length, "%d,1,2\n", i);
        write_bytes(text, length);
        for (size_t i = 0; i < length; i++)
            hash = (hash ^ (unsigned char)text[i]) * UINT64_C(1099511628211);
        assert_int_equal(th_data_read(path, TH_SYSTEM_REDUCED, &data, &err), TH_OK);
        assert_true(th_data_hash(data) == hash);
        th_data_destroy(data);
    }
    th_data_destroy(NULL);
}

static void test_units(void **state)
{
    th_data *data = NULL;
    th_error err = {0};
    th_scale scale;

    (void)state;
    write_rows("\xEF\xBB\xBFx [um], \"speed [mm/s]\" ,density[um/s]\n", 55, "");
    (void)err;
    refused(TH_SYSTEM_SI, "column density: ");
    write_rows("\xEF\xBB\xBFx [um], \"speed [mm/s]\" ,density [/um]\n", 55, "");
    if (th_data_read(path, TH_SYSTEM_SI, &data, &err) != TH_OK)
        fail_msg("%s", err.text);
    assert_true(th_data_values(data, TH_DATA_X)[0] == 1.25 * 1e-6);
    assert_true(th_data_values(data, TH_DATA_SPEED)[3] == 1.5 * 1e-3);
    assert_true(th_data_values(data, TH_DATA_DENSITY)[3] == 0.5 * 1e6);
    assert_int_equal(th_scale_si(6.5e-26, 1e-3, &scale, &err), TH_OK);
    th_data_scale(data, &scale);
    assert_true(th_data_values(data, TH_DATA_SPEED)[3] == 1.5 * 1e-3 / scale.speed);
    assert_true(th_data_values(data, TH_DATA_X)[0] == 1.25 * 1e-6 / scale.length);
    th_data_destroy(data);
}

static void test_refused(void **state)
{
    const char *names = "x,speed,sound\n";
    th_data *data = NULL;
    th_error err = {0};
    char *many;

    (void)state;
    write_bytes("", 0);
    refused(TH_SYSTEM_REDUCED, "empty");
    write_bytes("# only\n\n", 8);
    refused(TH_SYSTEM_REDUCED, "empty");
    write_rows(names, 49, "");
    refused(TH_SYSTEM_REDUCED, "49 rows, want 50 or more");
    write_rows("x,speed,sund\n", 60, "");
    refused(TH_SYSTEM_REDUCED, ":1: column \"sund\" is not known");
    write_rows("x,speed,speed\n", 60, "");
    refused(TH_SYSTEM_REDUCED, ":1: column speed stands twice");
    write_rows("density,speed,sound\n", 60, "");
    refused(TH_SYSTEM_REDUCED, ":1: want a column x");
    write_rows("x,speed,sound_error\n", 60, "");
    refused(TH_SYSTEM_REDUCED, ":1: column sound_error without sound");
    write_rows("x [um],speed,sound\n", 60, "");
    refused(TH_SYSTEM_REDUCED, ":1: column x has a unit");
    write_rows(names, 60, "");
    refused(TH_SYSTEM_SI, ":1: column x: ");
    write_rows("x [um],speed [um],sound [mm/s]\n", 60, "");
    refused(TH_SYSTEM_SI, ":1: column speed: ");
    write_rows("x [um,speed [mm/s],sound [mm/s]\n", 60, "");
    refused(TH_SYSTEM_SI, ":1: \"x [um\" has no closing bracket");
    write_rows(names, 60, "100,1.5\n");
    refused(TH_SYSTEM_REDUCED, ":62: 2 cells, the header has 3");
    write_rows(names, 60, "100,1.5,1,1,1,1,1,1,1,1,1,1\n");
    refused(TH_SYSTEM_REDUCED, ":62: 12 cells, the header has 3");
    write_rows(names, 60, "100,5,1,5,0,5\n");
    refused(TH_SYSTEM_REDUCED, ":62: 6 cells, the header has 3; numbers take a decimal point");
    write_rows("x;speed;sound\n", 60, "");
    refused(TH_SYSTEM_REDUCED, ":1: \"x;speed;sound\": want commas between columns");
    write_rows(names, 60, "100,nan,1\n");
    refused(TH_SYSTEM_REDUCED, ":62: column speed holds \"nan\"");
    write_rows(names, 60, "100,,1\n");
    refused(TH_SYSTEM_REDUCED, ":62: column speed holds \"\"");
    write_rows(names, 60, "100,1.5,0\n");
    refused(TH_SYSTEM_REDUCED, ":62: column sound holds 0, want a finite number > 0");
    write_rows(names, 60, "100,1e999,1\n");
    refused(TH_SYSTEM_REDUCED, ":62: column speed");
    write_rows(names, 60, "100,0,1\n");
    refused(TH_SYSTEM_REDUCED, "row 61 has speed 0");
    /* a small speed is not zero, nor is the product of two */
    write_rows("x,sound,speed\n0,1,1e-300\n", 60, "101,1,1e-300\n");
    assert_int_equal(th_data_read(path, TH_SYSTEM_REDUCED, &data, &err), TH_OK);
    th_data_destroy(data);
    write_rows(names, 60, "100,-1,1\n");
    refused(TH_SYSTEM_REDUCED, "row 61 has speed -1");
    write_rows(names, 60, "7.25,1,1\n");
    refused(TH_SYSTEM_REDUCED, "have the same x = 7.25");
    write_bytes("x,speed\n1,\0,2\n", 14);
    refused(TH_SYSTEM_REDUCED, ":2: a zero byte");
    many = malloc(6000);
    assert_non_null(many);
    memset(many, '1', 6000);
    write_bytes(many, 6000);
    refused(TH_SYSTEM_REDUCED, ":1: a line of more than 4096 bytes");
    free(many);
    write_rows(names, TH_DATA_ROWS_MAX + 1, "");
    refused(TH_SYSTEM_REDUCED, "more than 100000 rows");
}

static void test_files(void **state)
{
    th_data *data = NULL;
    th_error err = {0};

    (void)state;
    assert_int_equal(th_data_read("no/such.csv", TH_SYSTEM_SI, &data, &err), TH_EIO);
    assert_non_null(strstr(err.text, "no/such.csv: cannot read: No such file"));
    assert_int_equal(th_data_read(".", TH_SYSTEM_SI, &data, &err), TH_EINVAL);
    assert_string_equal(err.text, ".: no file");
    assert_int_equal(th_data_read("/dev/zero", TH_SYSTEM_SI, &data, &err), TH_EINVAL);
    assert_int_equal(th_data_read(NULL, TH_SYSTEM_SI, &data, &err), TH_EINVAL);
    assert_null(data);
}

static void test_memory(void **state)
{
    long k = 0;

    (void)state;
    write_rows("x,speed,sound\n", 1500, "");
    for (;; k++) {
        th_data *data = NULL;
        th_error err = {0};
        th_status st;

        refuse_from(k);
        st = th_data_read(path, TH_SYSTEM_REDUCED, &data, &err);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            th_data_destroy(data);
            break;
        }
        /* the C library's buffer of a stream is an allocation of its own, and no failure */
        assert_true(st == TH_ENOMEM || st == TH_EIO);
        assert_null(data);
    }
    assert_true(k > 5);
    (void)unlink(path);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_reads), cmocka_unit_test(test_units),  cmocka_unit_test(test_refused),
        cmocka_unit_test(test_files), cmocka_unit_test(test_memory),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
