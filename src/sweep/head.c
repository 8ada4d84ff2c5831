/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The first line of a journal. In: case and grid, or a line. Out: the line, or why a file is not
 * the journal of this sweep. Calls line, units (quoting), version. When a line of the journal
 * changes its form, FORMAT counts up; journals of other formats are refused, not converted.
 * Proof: tests/test_journal.c. */
#include "head.h"

#include "../units/text.h"
#include "twinhorizon/version.h"

#include <limits.h>

#define NAME   "twinhorizon journal "
#define FORMAT "1"

void th_head_write(long points, const char *case_text, th_buffer *line)
{
    line->length = 0;
    line->failed = false;
    th_line_put(line, NAME FORMAT);
    th_line_put(line, th_version());
    th_line_put_integer(line, points);
    th_line_put_text(line, case_text);
    th_line_seal(line);
}

th_status th_head_read(const char *path, char *line, size_t length, long *points, char **case_text,
                       th_error *err)
{
    char shown[TH_QUOTE_MAX], *rest = line, *word;

    if (length < sizeof NAME || strncmp(line, NAME, sizeof NAME - 1) != 0)
        return th_fail(err, TH_EINVAL, "%s: no journal of a sweep", path);
    if (strncmp(line, NAME FORMAT ",", sizeof NAME + sizeof FORMAT - 1) != 0)
        return th_fail(err, TH_EINVAL, "%s: a journal of another format than %s, or a damaged one",
                       path, FORMAT);
    if (!th_line_whole(line, length))
        return th_fail(err, TH_EINVAL,
                       "%s: the head of the journal is damaged; without it nobody knows which case "
                       "its points belong to",
                       path);
    th_line_unseal(line, length);
    if (!th_line_take(&rest, &word) || !th_line_take(&rest, &word))
        return th_fail(err, TH_EINVAL, "%s: the head of the journal is incomplete", path);
    if (strcmp(word, th_version()) != 0) {
        th_quote(word, shown, sizeof shown);
        return th_fail(err, TH_EINVAL,
                       "%s: written by version %s, this is %s, which may differ in the last digits",
                       path, shown, th_version());
    }
    if (!th_line_take_integer(&rest, 1, LONG_MAX, points) || !th_line_take_text(&rest, case_text))
        return th_fail(err, TH_EINVAL, "%s: the head of the journal is incomplete", path);
    return TH_OK;
}

/* The line at text for a message, in quotes; one that is not there has none. */
static void show_line(const char *text, char shown[TH_QUOTE_MAX + 2])
{
    char line[TH_QUOTE_MAX + 1]; /* more than fits in a message, so that th_quote marks the cut */
    const size_t length = strcspn(text, "\n"), kept = length < TH_QUOTE_MAX ? length : TH_QUOTE_MAX;

    if (*text == '\0') {
        memcpy(shown, "missing", sizeof "missing");
        return;
    }
    memcpy(line, text, kept);
    line[kept] = '\0';
    shown[0] = '"';
    th_quote(line, shown + 1, TH_QUOTE_MAX);
    memcpy(shown + strlen(shown), "\"", 2);
}

th_status th_head_compare(const char *path, long old_points, const char *old_text, long points,
                          const char *text, th_error *err)
{
    char was[TH_QUOTE_MAX + 2], now[TH_QUOTE_MAX + 2];
    size_t start = 0;
    int line = 1;

    for (size_t i = 0; old_text[i] == text[i] && text[i] != '\0'; i++)
        if (text[i] == '\n') {
            start = i + 1;
            line++;
        }
    if (strcmp(old_text + start, text + start) != 0) {
        show_line(old_text + start, was);
        show_line(text + start, now);
        return th_fail(err, TH_EINVAL,
                       "%s: a journal of another case: line %d of its text was %s, now it is %s",
                       path, line, was, now);
    }
    if (old_points != points)
        return th_fail(err, TH_EINVAL, "%s: a journal of %ld points, the sweep has %ld", path,
                       old_points, points);
    return TH_OK;
}
