/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The version of the library that runs. What goes in: nothing. What comes out: a text. Calls
 * nobody. Tests: tests/test_status.c. */
#include <twinhorizon/version.h>

const char *th_version(void)
{
    return TH_VERSION;
}
