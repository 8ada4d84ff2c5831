/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A point as a line of a journal, private to sweep:
 *   number,state,horizon_distance,index_known,index,census_known,census,unstable,count,
 *   and for each mode omega_re,omega_im,omega_error,label,confirmed,  then message and checksum.
 * Depends on line, point. */
#ifndef TH_SWEEP_RECORD_H
#define TH_SWEEP_RECORD_H

#include "line.h"

#include <twinhorizon/point.h>

/**
 * Replace what is in line by the point.
 * @retval TH_EINVAL  a number of the point is not finite, or its modes are missing
 */
TH_MUST_USE th_status th_record_write(const th_point *point, th_buffer *line, th_error *err);

/** The point's number, from the beginning of a whole line; -1 when there is none. */
long th_record_number(const char *line);

/**
 * Read a point back from an unsealed line, which is taken apart.
 * @retval TH_EINVAL  it is no point; TH_ENOMEM; the point can then only be cleared or read again
 */
TH_MUST_USE th_status th_record_read(char *line, th_point *point, th_error *err);

#endif
