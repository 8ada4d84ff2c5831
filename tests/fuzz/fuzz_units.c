/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Any bytes as a quantity: a finite number, or one sentence; what is written reads back. */
#include <math.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "twinhorizon/units.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    char *text = malloc(size + 1), written[64];
    double value, again;
    th_error err;

    if (text == NULL)
        return 0;
    memcpy(text, data, size);
    text[size] = '\0';
    for (int d = TH_DIM_NUMBER; d <= TH_DIM_TEMPERATURE; d++) {
        err = (th_error){0};
        if (th_quantity_read(text, (th_dimension)d, &value, &err) == TH_OK) {
            if (!isfinite(value))
                abort();
        } else if (err.text[0] == '\0' || strchr(err.text, '\n') != NULL) {
            abort();
        }
    }
    if (th_number_read(text, &value, &err) == TH_OK) {
        th_number_write_exact(value, written, sizeof written);
        if (!isfinite(value) || th_number_read(written, &again, &err) != TH_OK || again != value)
            abort();
    }
    (void)!th_species_mass(text, &value, &err);
    free(text);
    return 0;
}
