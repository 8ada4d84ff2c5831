/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Any bytes as a case file: an answer or one sentence; and the canonical text of what is accepted
 * reads back to itself. */
#include <gsl/gsl_errno.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "twinhorizon/case.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    char *text = malloc(size + 1);
    th_case *c = NULL, *again = NULL;
    th_error err = {0};

    gsl_set_error_handler_off();
    if (text == NULL)
        return 0;
    memcpy(text, data, size);
    text[size] = '\0';
    if (th_case_read_text("nowhere/fuzz.ini", text, NULL, 0, &c, &err) == TH_OK) {
        if (th_case_read_text("nowhere/fuzz.ini", c->text, NULL, 0, &again, &err) != TH_OK ||
            strcmp(c->text, again->text) != 0)
            abort();
    } else if (err.text[0] == '\0' || strchr(err.text, '\n') != NULL) {
        abort();
    }
    th_case_destroy(again);
    th_case_destroy(c);
    free(text);
    return 0;
}
