/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What the files of onset share. Private to onset. Depends on onset, flow, status. */
#ifndef TH_ONSET_INSIDE_H
#define TH_ONSET_INSIDE_H

#include "twinhorizon/onset.h"

/* ---- onset.c: the list ----------------------------------------------------------------------- */

/** Room for one more entry, zeroed, at the end of the list; NULL when memory is short. */
th_onset *th_onset_add(th_onset_list *list);

/** The setup with another value of key `key`. */
th_flow_setup th_onset_setup(const th_flow_setup *setup, int key, double length);

/** The rules of th_onset_options and a length key. */
TH_MUST_USE th_status th_onset_check(const th_shape *shape, const th_onset_options *options,
                                     th_error *err);

/* ---- open.c: zeros of the mismatch angle ----------------------------------------------------- */

enum { TH_TRAIL_POINTS = 4 };

/* What is known of the points before this one on its line. Start from {0}. */
typedef struct {
    int count;                    /* points remembered, <= TH_TRAIL_POINTS */
    double at[TH_TRAIL_POINTS];   /* their places on the line, the oldest first */
    int orders;                   /* room in each row of `gap` */
    double *gap[TH_TRAIL_POINTS]; /* [orders] length by order; 0: not known */
    double *slope;                /* [orders] of the angle at the newest point, 0: not known */
} th_trail;

/** As th_onset_find for open ends; trail: foresee from it and add the result to it, may be NULL.
 * `place`: of this point on its line. */
TH_MUST_USE th_status th_onset_open(const th_flow_setup *setup, const th_onset_options *options,
                                    double place, th_trail *trail, th_onset_list *out,
                                    th_error *err);

/** Release what a trail holds and zero it. */
void th_trail_clear(th_trail *trail);

/* ---- closed.c: rings and walls --------------------------------------------------------------- */

/** As th_onset_find for rings and walls. */
TH_MUST_USE th_status th_onset_closed(const th_flow_setup *setup, const th_onset_options *options,
                                      th_onset_list *out, th_error *err);

#endif
