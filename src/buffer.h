/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A text that grows, private to the library. The first failure sticks: after it nothing is added
 * and `failed` stays set, so that a caller adds many pieces and looks once. Depends on nothing. */
#ifndef TH_BUFFER_H
#define TH_BUFFER_H

#include <stdbool.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

/* Start from {0}; release data with free. data ends in a NUL that length does not count; it is
 * NULL as long as nothing was added. */
typedef struct {
    char *data;
    size_t length;
    size_t capacity; /* bytes of data, the NUL included */
    bool failed;     /* memory was short */
} th_buffer;

enum { TH_BUFFER_FIRST = 256 }; /* bytes; a table row seldom needs more, growth doubles */

static inline void th_buffer_add(th_buffer *buffer, const char *bytes, size_t count)
{
    if (buffer->failed)
        return;
    if (count >= buffer->capacity - buffer->length) {
        size_t capacity = buffer->capacity > 0 ? buffer->capacity : TH_BUFFER_FIRST;
        char *data = NULL;

        while (capacity - buffer->length <= count && capacity <= SIZE_MAX / 2)
            capacity *= 2;
        if (capacity - buffer->length > count)
            data = realloc(buffer->data, capacity);
        if (data == NULL) {
            buffer->failed = true;
            return;
        }
        buffer->data = data;
        buffer->capacity = capacity;
    }
    if (count > 0)
        memcpy(buffer->data + buffer->length, bytes, count);
    buffer->length += count;
    buffer->data[buffer->length] = '\0';
}

static inline void th_buffer_text(th_buffer *buffer, const char *text)
{
    th_buffer_add(buffer, text, strlen(text));
}

#endif
