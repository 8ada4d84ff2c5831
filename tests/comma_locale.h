/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * For tests: a locale that writes 0,5. Used as installed, or made with localedef for this process
 * alone. Include after cmocka.h, with _XOPEN_SOURCE 700 defined. */
#ifndef TH_TESTS_COMMA_LOCALE_H
#define TH_TESTS_COMMA_LOCALE_H

#include <locale.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>

/* Switch the process to a decimal comma; false when the machine has no such locale. The caller
 * goes back with setlocale(LC_ALL, "C"). */
static bool use_comma_locale(void)
{
    static char folder[] = "/tmp/twinhorizon-locale-XXXXXX";
    char command[256];
    bool found = setlocale(LC_ALL, "de_DE.UTF-8") != NULL;

    (void)uselocale(LC_GLOBAL_LOCALE); /* even if the thread was left with one of its own */
    if (!found && mkdtemp(folder) != NULL) {
        (void)snprintf(command, sizeof command,
                       "localedef -i de_DE -f UTF-8 %s/de_DE.UTF-8 >/dev/null 2>&1", folder);
        if (system(command) == 0 && setenv("LOCPATH", folder, 1) == 0)
            found = setlocale(LC_ALL, "de_DE.UTF-8") != NULL;
        (void)snprintf(command, sizeof command, "rm -rf %s", folder);
        if (system(command) != 0)
            print_message("%s was not removed\n", folder);
    }
    if (found)
        (void)snprintf(command, sizeof command, "%.1f", 0.5);
    return found && command[1] == ',';
}

#endif
