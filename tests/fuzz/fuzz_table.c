/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Any bytes as a table (RFC 4180): rows as long as the header, or one sentence. */
#include <string.h>

#include "memory_file.h"
#include "twinhorizon/table.h"

typedef struct {
    long row;
    int count;
} seen;

static bool take(void *ctx, long row, int count, const char *const *cell)
{
    seen *s = ctx;

    if (row != s->row || (row > 0 && count != s->count))
        abort();
    s->row++;
    s->count = count;
    for (int i = 0; i < count; i++)
        (void)strlen(cell[i]);
    return true;
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    seen s = {0};
    th_error err = {0};

    if (th_table_read(memory_file(data, size), take, &s, &err) != TH_OK &&
        (err.text[0] == '\0' || strchr(err.text, '\n') != NULL))
        abort();
    return 0;
}
