/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Any bytes as a measured profile, in reduced and in SI units: rows that keep the rules, or one
 * sentence. */
#include <math.h>
#include <string.h>

#include "memory_file.h"
#include "twinhorizon/data.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    const char *path = memory_file(data, size);

    for (int i = 0; i < 2; i++) {
        th_data *table = NULL;
        th_error err = {0};

        if (th_data_read(path, i == 0 ? TH_SYSTEM_REDUCED : TH_SYSTEM_SI, &table, &err) == TH_OK) {
            const double *x = th_data_values(table, TH_DATA_X);

            for (int k = 0; k < th_data_rows(table); k++)
                if (!isfinite(x[k]) || (k > 0 && !(x[k] > x[k - 1])))
                    abort();
        } else if (err.text[0] == '\0' || strchr(err.text, '\n') != NULL) {
            abort();
        }
        th_data_destroy(table);
    }
    return 0;
}
