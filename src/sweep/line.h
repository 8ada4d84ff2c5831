/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * One line of a journal, private to sweep: fields that end in commas, then a checksum of all bytes
 * before it in 8 hexadecimal digits, then a line feed:  FIELD,FIELD,...,TEXT,1a2b3c4d
 * The last field is free text, commas and all; a backslash in it stands as \\ and a line feed as
 * \n. Depends on buffer, status. */
#ifndef TH_SWEEP_LINE_H
#define TH_SWEEP_LINE_H

#include "../buffer.h"

#include <stdint.h>

#include <twinhorizon/status.h>

/** CRC-32 of bytes: generator x^32 + x^26 + x^23 + x^22 + x^16 + x^12 + x^11 + x^10 + x^8 + x^7 +
 * x^5 + x^4 + x^2 + x + 1, low bit first, ones before and after (ISO 3309; ITU-T V.42, 8.1.1.6.2).
 */
uint32_t th_crc32(const char *bytes, size_t count);

/* Adding: the buffer's own flag tells whether memory was short. */
void th_line_put(th_buffer *line, const char *word); /* without commas */
void th_line_put_integer(th_buffer *line, long value);
void th_line_put_number(th_buffer *line, double value); /* finite; reads back to the same bits */
void th_line_put_text(th_buffer *line, const char *text);
void th_line_seal(th_buffer *line); /* checksum and line feed */

/** Is line [length] complete, its checksum right? */
bool th_line_whole(const char *line, size_t length);

/** Take checksum and line feed off a whole line: what is left ends in a NUL. */
void th_line_unseal(char *line, size_t length);

/* Taking fields off an unsealed line in place, each from where *rest points to, which then moves
 * on; false when the field is none of the kind, and what was stored is of no use. */
bool th_line_take(char **rest, char **word);
bool th_line_take_integer(char **rest, long least, long most, long *value);
/** @retval TH_EINVAL no number there; TH_ENOMEM as th_number_read */
TH_MUST_USE th_status th_line_take_number(char **rest, double *value);
bool th_line_take_text(char **rest, char **text); /* everything that is left */

#endif
