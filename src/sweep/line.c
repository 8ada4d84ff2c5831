/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * One line of a journal. In: fields, or the bytes of a line. Out: bytes that tell whether they are
 * all there, or the fields. Calls units (numbers), buffer. A new kind of field is a put and a take.
 * Proof: tests/test_journal.c (published check value, round trips, every prefix, changed bytes). */
#include "line.h"

#include "twinhorizon/units.h"

#include <errno.h>
#include <stdio.h>

enum {
    SEAL = 9,         /* bytes: 8 hexadecimal digits and a line feed */
    NUMBER_SIZE = 32, /* bytes, as th_number_write_exact wants; an integer takes 20 */
};

uint32_t th_crc32(const char *bytes, size_t count)
{
    /* remainders of the 16 values of four bits: half a byte a step, a sixteenth of the usual table
     */
    static const uint32_t remainder[16] = {
        0x00000000, 0x1DB71064, 0x3B6E20C8, 0x26D930AC, 0x76DC4190, 0x6B6B51F4,
        0x4DB26158, 0x5005713C, 0xEDB88320, 0xF00F9344, 0xD6D6A3E8, 0xCB61B38C,
        0x9B64C2B0, 0x86D3D2D4, 0xA00AE278, 0xBDBDF21C,
    };
    uint32_t crc = 0xFFFFFFFF;

    for (size_t i = 0; i < count; i++) {
        crc ^= (unsigned char)bytes[i];
        crc = (crc >> 4) ^ remainder[crc & 15];
        crc = (crc >> 4) ^ remainder[crc & 15];
    }
    return crc ^ 0xFFFFFFFF;
}

void th_line_put(th_buffer *line, const char *word)
{
    th_buffer_text(line, word);
    th_buffer_text(line, ",");
}

void th_line_put_integer(th_buffer *line, long value)
{
    char text[NUMBER_SIZE];

    (void)snprintf(text, sizeof text, "%ld", value);
    th_line_put(line, text);
}

void th_line_put_number(th_buffer *line, double value)
{
    char text[NUMBER_SIZE];

    th_number_write_exact(value, text, sizeof text);
    th_line_put(line, text);
}

void th_line_put_text(th_buffer *line, const char *text)
{
    while (*text != '\0') {
        const size_t plain = strcspn(text, "\\\n");

        th_buffer_add(line, text, plain);
        text += plain;
        if (*text != '\0')
            th_buffer_text(line, *text++ == '\n' ? "\\n" : "\\\\");
    }
    th_buffer_text(line, ",");
}

/* The seal of bytes as text. */
static void write_seal(const char *bytes, size_t count, char seal[SEAL + 1])
{
    (void)snprintf(seal, SEAL + 1, "%08lx\n", (unsigned long)th_crc32(bytes, count));
}

void th_line_seal(th_buffer *line)
{
    char seal[SEAL + 1];

    if (line->failed)
        return;
    write_seal(line->data, line->length, seal);
    th_buffer_text(line, seal);
}

bool th_line_whole(const char *line, size_t length)
{
    char seal[SEAL + 1];

    if (length < SEAL + 1 || line[length - SEAL - 1] != ',')
        return false;
    write_seal(line, length - SEAL, seal);
    return memcmp(line + length - SEAL, seal, SEAL) == 0;
}

void th_line_unseal(char *line, size_t length)
{
    line[length - SEAL - 1] = '\0'; /* the comma after the last field */
}

bool th_line_take(char **rest, char **word)
{
    char *comma = strchr(*rest, ',');

    if (comma == NULL)
        return false;
    *comma = '\0';
    *word = *rest;
    *rest = comma + 1;
    return true;
}

bool th_line_take_integer(char **rest, long least, long most, long *value)
{
    char *word, *end;

    if (!th_line_take(rest, &word))
        return false;
    errno = 0;
    *value = strtol(word, &end, 10);
    return end != word && *end == '\0' && errno == 0 && *value >= least && *value <= most;
}

th_status th_line_take_number(char **rest, double *value)
{
    char *word;

    return th_line_take(rest, &word) ? th_number_read(word, value, NULL) : TH_EINVAL;
}

bool th_line_take_text(char **rest, char **text)
{
    char *to = *rest;

    *text = to;
    for (const char *from = *rest; *from != '\0'; from++) {
        if (*from == '\\') {
            from++;
            if (*from != 'n' && *from != '\\')
                return false;
            *to++ = *from == 'n' ? '\n' : '\\';
        } else {
            *to++ = *from;
        }
    }
    *to = '\0';
    *rest = to;
    return true;
}
