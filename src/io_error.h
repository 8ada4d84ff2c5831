/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The sentence for a file that cannot be read or written, private to the library. Depends on
 * status. */
#ifndef TH_IO_ERROR_H
#define TH_IO_ERROR_H

#include <twinhorizon/status.h>

/**
 * Fill err with "PATH: cannot ACTION: REASON" and return TH_EIO.
 *
 * @param[in] action  such as "open for reading"
 * @param[in] number  the errno of the failed call
 */
th_status th_io_fail(th_error *err, const char *path, const char *action, int number);

#endif
