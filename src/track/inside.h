/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A line of lengths as it is kept, private to src/track. */
#ifndef TH_TRACK_INSIDE_H
#define TH_TRACK_INSIDE_H

#include "twinhorizon/track.h"

/* One length. */
typedef struct {
    double length;
    th_point point;      /* plain memory */
    th_track_mode *mode; /* [point.count]; NULL before the branches are known */
} th_track_node;

struct th_track {
    th_flow_setup setup; /* without workspace; its table is borrowed from the caller */
    th_track_options options;
    double omega_top; /* largest band of the line: the scale of frequencies */
    double spacing;   /* of the first samples */
    int count, room;
    th_track_node *node;   /* [count] by ascending length */
    th_track_point *shown; /* [count] */
    int branches;
};

/** Whether a node has a certified answer. */
bool th_track_answered(const th_track_node *node);

/** The next node from `at` on, in steps of `by`, that is answered; -1 when there is none. */
int th_track_next(const th_track *track, int at, int by);

/** Whether two neighbouring answered nodes are so close that what lies between them is known. */
bool th_track_joined(const th_track *track, int left, int right);

/** Answer one length; of the modes only growing ones stay. */
TH_MUST_USE th_status th_track_answer(const th_track *track, double length,
                                      const th_point *previous, th_workspace *workspace,
                                      th_point *point, th_error *err);

#endif
