/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Numbers as text, whatever the locale of the process, and quoting of foreign text in messages.
 * In: text that a user wrote, or a double. Out: a double, or text. Calls status only.
 * Symbols: none. To accept another way of writing numbers, change number_length, nothing else.
 * Proved by tests/test_units.c (decimal-comma locale, malformed and extreme numbers). */
#define _POSIX_C_SOURCE 200809L

#include "text.h"

#include <errno.h>
#include <locale.h>
#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static bool is_digit(char c)
{
    return c >= '0' && c <= '9';
}

static bool is_blank(char c)
{
    return c == ' ' || c == '\t';
}

size_t th_utf8_length(const char *text)
{
    const unsigned char *b = (const unsigned char *)text;
    size_t length;

    /* RFC 3629, section 4: no overlong forms, no surrogates, nothing beyond U+10FFFF */
    if (b[0] < 0x80)
        return 1;
    if (b[0] < 0xC2 || b[0] > 0xF4)
        return 0;
    length = b[0] < 0xE0 ? 2 : b[0] < 0xF0 ? 3 : 4;
    for (size_t i = 1; i < length; ++i)
        if ((b[i] & 0xC0) != 0x80)
            return 0;
    if ((b[0] == 0xE0 && b[1] < 0xA0) || (b[0] == 0xED && b[1] > 0x9F) ||
        (b[0] == 0xF0 && b[1] < 0x90) || (b[0] == 0xF4 && b[1] > 0x8F))
        return 0;
    return length;
}

/* How one character appears in a message; returns the bytes of text it stands for. */
static size_t show(const char *text, char shown[8])
{
    const unsigned char *b = (const unsigned char *)text;
    size_t length = th_utf8_length(text);
    /* C0 controls, DEL, and the C1 controls U+0080..U+009F, which terminals obey too */
    bool control = b[0] < 0x20 || b[0] == 0x7F || (length == 2 && b[0] == 0xC2 && b[1] < 0xA0);

    if (length == 0 || control) {
        (void)snprintf(shown, 8, "\\x%02X", (unsigned)b[0]);
        return 1;
    }
    memcpy(shown, text, length);
    shown[length] = '\0';
    return length;
}

void th_quote(const char *text, char *buffer, size_t size)
{
    size_t used = 0, safe = 0; /* safe: the longest prefix that leaves room for "..." */

    while (*text != '\0') {
        char shown[8];
        size_t step = show(text, shown), length = strlen(shown);

        if (used + length + 1 > size) {
            memcpy(buffer + safe, "...", 4);
            return;
        }
        memcpy(buffer + used, shown, length);
        used += length;
        if (used + 4 <= size)
            safe = used;
        text += step;
    }
    buffer[used] = '\0';
}

void th_quote_path(const char *text, char *buffer, size_t size)
{
    size_t full = 0;
    char shown[8];

    for (const char *p = text; *p != '\0';) {
        p += show(p, shown);
        full += strlen(shown);
    }
    if (full + 1 > size) {
        while (full + 4 > size) {
            text += show(text, shown);
            full -= strlen(shown);
        }
        memcpy(buffer, "...", 4);
        buffer += 3;
        size -= 3;
    }
    th_quote(text, buffer, size);
}

/* Length of the decimal number [+-]digits[.digits][e[+-]digits] at text; 0 when there is none. */
static size_t number_length(const char *text)
{
    const char *p = text, *digits;
    int count = 0;

    if (*p == '+' || *p == '-')
        ++p;
    for (; is_digit(*p); ++p)
        ++count;
    if (*p == '.') {
        for (digits = p + 1; is_digit(*digits); ++digits)
            ++count;
        if (count > 0)
            p = digits;
    }
    if (count == 0)
        return 0;
    if (*p == 'e' || *p == 'E') {
        digits = p + 1;
        if (*digits == '+' || *digits == '-')
            ++digits;
        if (is_digit(*digits)) {
            while (is_digit(*digits))
                ++digits;
            p = digits;
        }
    }
    return (size_t)(p - text);
}

th_status th_number_scan(const char *text, const char **end, double *value, th_error *err)
{
    char shown[TH_QUOTE_MAX], *stop = NULL;
    size_t length;
    locale_t plain, before;
    double number;
    int trouble;

    while (is_blank(*text))
        ++text;
    th_quote(text, shown, sizeof shown);
    length = number_length(text);
    if (length == 0)
        return th_fail(err, TH_EINVAL, "\"%s\" is not a number", shown);

    /* the C locale for this thread alone, and only while strtod runs */
    plain = newlocale(LC_ALL_MASK, "C", (locale_t)0);
    if (plain == (locale_t)0)
        return th_fail(err, TH_ENOMEM, "no memory for the C locale to read \"%s\"", shown);
    before = uselocale(plain);
    errno = 0;
    number = strtod(text, &stop);
    trouble = errno;
    (void)uselocale(before);
    freelocale(plain);

    /* strtod also takes hexadecimal numbers: then it stops elsewhere than the decimal form does */
    if (stop != text + length)
        return th_fail(err, TH_EINVAL, "\"%s\" is not a decimal number", shown);
    if (!isfinite(number))
        return th_fail(err, TH_EINVAL, "\"%s\" is too large a number", shown);
    if (trouble == ERANGE && number == 0.0) /* also set for subnormal numbers, which are fine */
        return th_fail(err, TH_EINVAL, "\"%s\" is too small a number", shown);
    *value = number;
    *end = stop;
    return TH_OK;
}

th_status th_number_read(const char *text, double *value, th_error *err)
{
    const char *end = NULL;
    char shown[TH_QUOTE_MAX];
    double number = 0.0;
    th_status st = th_number_scan(text, &end, &number, err);

    if (st != TH_OK)
        return st;
    while (is_blank(*end))
        ++end;
    if (*end != '\0') {
        th_quote(end, shown, sizeof shown);
        return th_fail(err, TH_EINVAL, "\"%s\" follows the number%s", shown,
                       *end == ',' ? ", which takes a decimal point, not a comma" : "");
    }
    *value = number;
    return TH_OK;
}

/* Write with so many significant digits. */
static void write_digits(double value, int digits, char *buffer, size_t size)
{
    char text[64], *out = buffer;

    if (size == 0)
        return;
    (void)snprintf(text, sizeof text, "%.*g", digits, value);
    /* whatever the locale puts for the decimal point, one or more bytes, becomes one '.' */
    for (const char *in = text; *in != '\0' && out + 1 < buffer + size;) {
        if (is_digit(*in) || strchr("+-einfa", *in) != NULL) {
            *out++ = *in++;
        } else {
            *out++ = '.';
            do
                ++in;
            while (*in != '\0' && !is_digit(*in));
        }
    }
    *out = '\0';
}

void th_number_write(double value, char *buffer, size_t size)
{
    write_digits(value, 15, buffer, size);
}

void th_number_write_exact(double value, char *buffer, size_t size)
{
    write_digits(value, 17, buffer, size); /* reads back to the same double */
}
