/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Who is to blame: puts file, line, key and value, or the override, before a sentence.
 * In: a sentence about an entry, a missing key or a line. Out: status TH_ECASE and one line of
 * text without raw control characters. Calls units (quoting) and status.
 * Symbols: none. To blame something new: one more function here, declared in source.h.
 * Proved by tests/broken (every message is compared exactly). */
#include "source.h"

#include "../units/text.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

/* Room in a message for a path, an override, a name, so that the sentence always fits too. */
enum { PATH_MAX_SHOWN = 120, OVERRIDE_MAX_SHOWN = 100, NAME_MAX_SHOWN = 40, PREFIX_MAX = 288 };

/* A sentence may come from another module: it is escaped as well, and cut where room ends. */
static th_status finish(th_error *err, const char *key, const char *prefix, const char *format,
                        va_list args)
{
    th_error raw = {.status = TH_ECASE};
    char sentence[sizeof raw.text];

    if (vsnprintf(raw.text, sizeof raw.text, format, args) < 0)
        raw.text[0] = '\0'; /* what it holds after a failure is not defined */
    th_quote(raw.text, sentence, sizeof sentence - strlen(prefix));
    return th_fail_key(err, TH_ECASE, key, "%s%s", prefix, sentence);
}

th_status th_case_blame(th_error *err, const th_case_source *source, const th_case_entry *entry,
                        const char *format, ...)
{
    char prefix[PREFIX_MAX], path[PATH_MAX_SHOWN], override[OVERRIDE_MAX_SHOWN];
    char section[NAME_MAX_SHOWN], key[NAME_MAX_SHOWN], value[TH_QUOTE_MAX];
    va_list args;
    th_status st;

    if (entry->override != NULL) {
        th_quote(entry->override, override, sizeof override);
        (void)snprintf(prefix, sizeof prefix, "--set %s: ", override);
    } else {
        th_quote_path(source->name, path, sizeof path);
        th_quote(entry->section, section, sizeof section);
        th_quote(entry->key, key, sizeof key);
        th_quote(entry->value, value, sizeof value);
        (void)snprintf(prefix, sizeof prefix, "%s:%d: [%s] %s =%s%s: ", path, entry->line, section,
                       key, value[0] != '\0' ? " " : "", value);
    }
    va_start(args, format);
    st = finish(err, entry->key, prefix, format, args);
    va_end(args);
    return st;
}

th_status th_case_blame_missing(th_error *err, const th_case_source *source, const char *section,
                                const char *key, const char *format, ...)
{
    char prefix[PREFIX_MAX], path[PATH_MAX_SHOWN];
    va_list args;
    th_status st;

    th_quote_path(source->name, path, sizeof path);
    (void)snprintf(prefix, sizeof prefix, "%s: [%s] %s is missing: ", path, section, key);
    va_start(args, format);
    st = finish(err, key, prefix, format, args);
    va_end(args);
    return st;
}

th_status th_case_blame_line(th_error *err, const char *name, int line, const char *format, ...)
{
    char prefix[PREFIX_MAX], path[PATH_MAX_SHOWN];
    va_list args;
    th_status st;

    th_quote_path(name, path, sizeof path);
    if (line > 0)
        (void)snprintf(prefix, sizeof prefix, "%s:%d: ", path, line);
    else
        (void)snprintf(prefix, sizeof prefix, "%s: ", path);
    va_start(args, format);
    st = finish(err, "", prefix, format, args);
    va_end(args);
    return st;
}
