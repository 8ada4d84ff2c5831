/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The sentence for a file that cannot be read or written. What goes in: file, action, errno. What
 * comes out: TH_EIO and one sentence. May call: status. Tests: tests/test_table.c. */
#include "io_error.h"

#include <stdio.h>
#include <string.h>

enum { REASON_MAX = 128 }; /* bytes of the system's reason in a message; the usual ones take 40 */

th_status th_io_fail(th_error *err, const char *path, const char *action, int number)
{
    char reason[REASON_MAX];

    if (strerror_r(number, reason, sizeof reason) != 0)
        (void)snprintf(reason, sizeof reason, "error %d", number);
    return th_fail(err, TH_EIO, "%s: cannot %s: %s", path, action, reason);
}
