/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The keys of a case as they were written, private to src/case.
 * What goes in: INI text and overrides. What comes out: one entry a key, each knowing its line, and
 * messages that put the blame on an entry. Proved by tests/test_case.c and tests/broken. */
#ifndef TH_CASE_SOURCE_H
#define TH_CASE_SOURCE_H

#include "keys.h"

/* Longest text of a case: a sweep over a list of thousands of values is far smaller. */
enum { TH_CASE_BYTES_MAX = 1 << 20 };

/* A key with its value as written, runs of blanks made one blank. */
typedef struct {
    char *section, *key, *value;
    int line;             /* in the file; 0 when an override gave it */
    const char *override; /* the override as given; NULL when the file gave it */
} th_case_entry;

typedef struct {
    const char *name; /* stands for the file in messages */
    th_case_entry *entry;
    int entries;
    int section_line[TH_SECTIONS]; /* line of the [section] header; 0 when the file has none */
} th_case_source;

/**
 * Split text into entries and apply the overrides.
 * @retval TH_ECASE  not INI, a section unknown or repeated, a key repeated, a malformed override;
 *                   the sentence is complete, with file and line
 * On failure as on success the caller calls th_case_source_clear.
 */
TH_MUST_USE th_status th_case_source_read(const char *name, const char *text,
                                          const char *const *override, int overrides,
                                          th_case_source *out, th_error *err);
void th_case_source_clear(th_case_source *source);

/** The entry of a key; NULL when it was not given. */
const th_case_entry *th_case_source_find(const th_case_source *source, const char *section,
                                         const char *key);

/** As th_case_source_find, for a key of the table. */
const th_case_entry *th_case_source_key(const th_case_source *source, th_case_key_id id);

/** TH_ECASE with "FILE:LINE: [section] key = value: " (or "--set ...: ") before the sentence. */
th_status th_case_blame(th_error *err, const th_case_source *source, const th_case_entry *entry,
                        const char *format, ...) TH_PRINTF(4, 5);

/** TH_ECASE with "FILE: [section] key is missing: " before the sentence. */
th_status th_case_blame_missing(th_error *err, const th_case_source *source, const char *section,
                                const char *key, const char *format, ...) TH_PRINTF(5, 6);

/** TH_ECASE with "FILE:LINE: " before the sentence; line 0: "FILE: ". */
th_status th_case_blame_line(th_error *err, const char *name, int line, const char *format, ...)
    TH_PRINTF(4, 5);

#endif
