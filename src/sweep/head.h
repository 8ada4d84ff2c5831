/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The first line of a journal, private to sweep: what the points below it belong to.
 *   twinhorizon journal FORMAT,version,points of the grid,text of the case,checksum
 * Depends on line, version. */
#ifndef TH_SWEEP_HEAD_H
#define TH_SWEEP_HEAD_H

#include "line.h"

/** Replace what is in line by the head of a journal; the buffer's flag tells of short memory. */
void th_head_write(long points, const char *case_text, th_buffer *line);

/**
 * Take the head of a journal apart in place.
 *
 * @param[in]  path       for messages
 * @param[in]  line       [length] first line of the file, or what there is of it; a NUL follows
 * @param[out] case_text  inside line
 * @retval TH_EINVAL  no journal, a damaged head, another format or another version
 */
TH_MUST_USE th_status th_head_read(const char *path, char *line, size_t length, long *points,
                                   char **case_text, th_error *err);

/** TH_OK for the same grid of the same case, else TH_EINVAL and the first line that differs. */
TH_MUST_USE th_status th_head_compare(const char *path, long old_points, const char *old_text,
                                      long points, const char *text, th_error *err);

#endif
