/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The record of one point of a sweep. In: how many modes, or another point. Out: a point with room
 * of its own, reused from one point to the next. Calls status. A new member that owns memory needs
 * a line in each of the functions below. Proof: tests/test_journal.c. */
#include "twinhorizon/point.h"

#include <string.h>

#include "workspace.h"

const char *th_point_state_text(th_point_state state)
{
    switch (state) {
    case TH_POINT_OK:
        return "ok";
    case TH_POINT_UNDECIDED:
        return "undecided";
    case TH_POINT_FAILED:
        return "failed";
    }
    return "failed";
}

th_status th_point_resize(th_point *point, int count, th_error *err)
{
    if (point == NULL || count < 0)
        return th_fail(err, TH_EINVAL, "point: want a point and count >= 0, not %d", count);
    if (count > point->room) {
        th_point_mode *mode =
            th_stretch(point->workspace, point->mode, (size_t)count * sizeof *mode);

        if (mode == NULL)
            return th_fail(err, TH_ENOMEM, "point: %d modes", count);
        point->mode = mode;
        point->room = count;
    }
    if (count > point->count)
        memset(point->mode + point->count, 0, (size_t)(count - point->count) * sizeof *point->mode);
    point->count = count;
    return TH_OK;
}

th_status th_point_copy(const th_point *from, th_point *to, th_error *err)
{
    th_workspace *workspace;
    th_point_mode *mode;
    int room;
    th_status st;

    if (from == NULL || to == NULL)
        return th_fail(err, TH_EINVAL, "point: want two points to copy");
    st = th_point_resize(to, from->count, err);
    if (st != TH_OK)
        return st;
    workspace = to->workspace;
    mode = to->mode;
    room = to->room;
    *to = *from;
    to->workspace = workspace;
    to->mode = mode;
    to->room = room;
    if (from->count > 0)
        memmove(to->mode, from->mode, (size_t)from->count * sizeof *to->mode);
    return TH_OK;
}

void th_point_clear(th_point *point)
{
    if (point == NULL)
        return;
    th_give(point->workspace, point->mode);
    *point = (th_point){0};
}
