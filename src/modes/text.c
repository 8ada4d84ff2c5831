/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Words for labels and confirmations. In: codes. Out: text for tables and views. Calls nobody.
 * A new confirming computation is one line of the table below. Proof: tests/test_modes.c. */
#include <string.h>

#include "twinhorizon/modes.h"

const char *th_label_text(th_label label)
{
    switch (label) {
    case TH_LABEL_UNSTABLE:
        return "unstable";
    case TH_LABEL_TRAPPED:
        return "trapped";
    case TH_LABEL_STABLE:
        return "stable";
    case TH_LABEL_UNDECIDED:
        return "undecided";
    }
    return "undecided";
}

static const struct {
    unsigned bit;
    const char *name;
} confirmer[] = {{TH_BY_MATRIX, "matrix"},
                 {TH_BY_MATCHING, "matching"},
                 {TH_BY_CENSUS, "census"},
                 {TH_BY_INDEX, "index"}};

void th_confirmed_text(unsigned confirmed, char *buffer)
{
    buffer[0] = '\0';
    for (size_t i = 0; i < sizeof confirmer / sizeof confirmer[0]; i++) {
        if ((confirmed & confirmer[i].bit) == 0)
            continue;
        if (buffer[0] != '\0')
            strcat(buffer, "+");
        strcat(buffer, confirmer[i].name);
    }
}
