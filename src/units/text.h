/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Text helpers of units that the case-file reader shares; private to the library.
 * What goes in: text that a user wrote. What comes out: numbers, and words fit for a message.
 * Depends on units.h and status.h. Proved by tests/test_units.c. */
#ifndef TH_UNITS_TEXT_H
#define TH_UNITS_TEXT_H

#include "twinhorizon/units.h"

/* Room for one quoted word or value in a message, the "..." of a cut one included. */
enum { TH_QUOTE_MAX = 64 };

/** Bytes (1 to 4) of the UTF-8 character at text, which is not "": 0 when it is not valid UTF-8. */
size_t th_utf8_length(const char *text);

/** Copy text into buffer [size >= 8] so that a message may show it: control characters and bytes
 * that are not UTF-8 become \xHH, and what does not fit is cut and ends in "...". */
void th_quote(const char *text, char *buffer, size_t size);

/** As th_quote, keeping the end of a long text instead of its beginning: for paths. */
void th_quote_path(const char *text, char *buffer, size_t size);

/**
 * Read the decimal number at the start of text; *end is set to what follows it.
 * @retval TH_EINVAL  no number there, or one too large or too small for a double
 */
TH_MUST_USE th_status th_number_scan(const char *text, const char **end, double *value,
                                     th_error *err);

/** Plain word for a dimension: "length", "speed", ... */
const char *th_dimension_word(th_dimension dimension);

/** Write the units that fit a dimension, such as "m, mm, um, nm, a0", into buffer. */
void th_dimension_list(th_dimension dimension, char *buffer, size_t size);

#endif
