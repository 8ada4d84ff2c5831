/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Any bytes as the journal of a sweep: points that can be read, or one sentence. */
#include <math.h>
#include <string.h>

#include "memory_file.h"
#include "twinhorizon/journal.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    th_journal *journal = NULL;
    const char *text = NULL;
    long points = 0, found = 0;
    th_error err = {0};
    th_point point = {0};

    if (th_journal_read_only(memory_file(data, size), &journal, &points, &text, &err) != TH_OK) {
        if (err.text[0] == '\0' || strchr(err.text, '\n') != NULL)
            abort();
        return 0;
    }
    for (long i = 0; i < points && i < 1000; i++) {
        if (!th_journal_has(journal, i))
            continue;
        found++;
        if (th_journal_get(journal, i, &point, &err) != TH_OK) {
            /* a line whose checksum is right and whose words are not: the fuzzer solves checksums
             */
            if (err.status != TH_EIO || err.text[0] == '\0')
                abort();
            continue;
        }
        for (int k = 0; k < point.count; k++)
            if (!isfinite(point.mode[k].omega_re) || !isfinite(point.mode[k].omega_im))
                abort();
    }
    if (points <= 1000 && found != th_journal_count(journal))
        abort();
    th_point_clear(&point);
    if (th_journal_close(journal, &err) != TH_OK)
        abort();
    return 0;
}
