/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A point as a line of a journal. In: a point, or a line. Out: the other one, to the last bit.
 * Calls line, point, modes (words for labels). A new member of th_point is one put and one take,
 * and a step of the format in head.c. Proof: tests/test_journal.c. */
#include "record.h"

#include <limits.h>
#include <math.h>

static bool finite_modes(const th_point *point)
{
    for (int i = 0; i < point->count; i++) {
        const th_point_mode *m = &point->mode[i];

        if (!isfinite(m->omega_re) || !isfinite(m->omega_im) || !isfinite(m->omega_error))
            return false;
    }
    return true;
}

th_status th_record_write(const th_point *point, th_buffer *line, th_error *err)
{
    if (point->count < 0 || (point->count > 0 && point->mode == NULL))
        return th_fail(err, TH_EINVAL, "point %ld: %d modes, want >= 0 and a list of them",
                       point->number, point->count);
    if (!isfinite(point->horizon_distance) || !finite_modes(point))
        return th_fail(err, TH_EINVAL, "point %ld: a number in it is not finite", point->number);
    line->length = 0;
    line->failed = false;
    th_line_put_integer(line, point->number);
    th_line_put(line, th_point_state_text(point->state));
    th_line_put_number(line, point->horizon_distance);
    th_line_put_integer(line, point->index_known);
    th_line_put_integer(line, point->index);
    th_line_put_integer(line, point->census_known);
    th_line_put_integer(line, point->census);
    th_line_put_integer(line, point->unstable);
    th_line_put_integer(line, point->count);
    for (int i = 0; i < point->count; i++) {
        const th_point_mode *m = &point->mode[i];

        th_line_put_number(line, m->omega_re);
        th_line_put_number(line, m->omega_im);
        th_line_put_number(line, m->omega_error);
        th_line_put(line, th_label_text(m->label));
        th_line_put_integer(line, (long)m->confirmed);
    }
    th_line_put_text(line, point->message);
    th_line_seal(line);
    if (line->failed)
        return th_fail(err, TH_ENOMEM, "point %ld: its line in the journal", point->number);
    return TH_OK;
}

long th_record_number(const char *line)
{
    char *end;
    const long number = strtol(line, &end, 10);

    return end != line && *end == ',' && number >= 0 ? number : -1;
}

static bool take_int(char **rest, int least, int *value)
{
    long number;

    if (!th_line_take_integer(rest, least, INT_MAX, &number))
        return false;
    *value = (int)number;
    return true;
}

static bool take_known(char **rest, bool *known, int *value)
{
    long flag;

    if (!th_line_take_integer(rest, 0, 1, &flag))
        return false;
    *known = flag == 1;
    return take_int(rest, INT_MIN, value);
}

static bool take_state(char **rest, th_point_state *state)
{
    static const th_point_state all[] = {TH_POINT_OK, TH_POINT_UNDECIDED, TH_POINT_FAILED};
    char *word;

    if (!th_line_take(rest, &word))
        return false;
    for (size_t i = 0; i < sizeof all / sizeof all[0]; i++)
        if (strcmp(word, th_point_state_text(all[i])) == 0) {
            *state = all[i];
            return true;
        }
    return false;
}

static bool take_label(char **rest, th_label *label)
{
    static const th_label all[] = {TH_LABEL_UNSTABLE, TH_LABEL_TRAPPED, TH_LABEL_STABLE,
                                   TH_LABEL_UNDECIDED};
    char *word;

    if (!th_line_take(rest, &word))
        return false;
    for (size_t i = 0; i < sizeof all / sizeof all[0]; i++)
        if (strcmp(word, th_label_text(all[i])) == 0) {
            *label = all[i];
            return true;
        }
    return false;
}

static th_status take_mode(char **rest, th_point_mode *mode)
{
    long confirmed;
    th_status st = th_line_take_number(rest, &mode->omega_re);

    if (st == TH_OK)
        st = th_line_take_number(rest, &mode->omega_im);
    if (st == TH_OK)
        st = th_line_take_number(rest, &mode->omega_error);
    if (st != TH_OK)
        return st;
    if (!take_label(rest, &mode->label) || !th_line_take_integer(rest, 0, INT_MAX, &confirmed))
        return TH_EINVAL;
    mode->confirmed = (unsigned)confirmed;
    return TH_OK;
}

/* Everything before the modes; *count is how many there are. */
static th_status take_front(char **rest, th_point *point, int *count)
{
    th_status st;

    if (!th_line_take_integer(rest, 0, LONG_MAX, &point->number) ||
        !take_state(rest, &point->state))
        return TH_EINVAL;
    st = th_line_take_number(rest, &point->horizon_distance);
    if (st != TH_OK)
        return st;
    return take_known(rest, &point->index_known, &point->index) &&
                   take_known(rest, &point->census_known, &point->census) &&
                   take_int(rest, INT_MIN, &point->unstable) && take_int(rest, 0, count)
               ? TH_OK
               : TH_EINVAL;
}

th_status th_record_read(char *line, th_point *point, th_error *err)
{
    char *rest = line, *message;
    int count = 0;
    th_status st = take_front(&rest, point, &count);

    if (st == TH_OK && (size_t)count > strlen(rest)) /* a mode takes more than a byte */
        st = TH_EINVAL;
    if (st == TH_OK)
        st = th_point_resize(point, count, err);
    for (int i = 0; st == TH_OK && i < count; i++)
        st = take_mode(&rest, &point->mode[i]);
    if (st == TH_OK &&
        (!th_line_take_text(&rest, &message) || strlen(message) >= sizeof point->message))
        st = TH_EINVAL;
    if (st != TH_OK)
        return th_fail(err, st, "no point of %d modes: %s", count, th_status_text(st));
    memset(point->message, 0, sizeof point->message);
    memcpy(point->message, message, strlen(message));
    return TH_OK;
}
