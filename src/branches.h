/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Identity of modes along one axis of a sweep. Private to sweep. Depends on modes. */
#ifndef TH_BRANCHES_H
#define TH_BRANCHES_H

#include "twinhorizon/modes.h"

/* The last two points of a line of the sweep. Start from zeros. */
typedef struct {
    int count;         /* modes at the previous point */
    int *branch;       /* [count] */
    double *re, *im;   /* [count] where they were */
    double *dre, *dim; /* [count] their last steps, 0 for a new mode */
    int last;          /* highest number given so far in this line */
} th_branches;

/**
 * Give the modes of the next point their branches: each continues the mode of the previous point
 * whose linear continuation lies nearest, nearest pairs first and no farther than `reach`;
 * the others start new branches in the order of the list.
 *
 * @param[out] branch  [answer->count]
 * @retval TH_ENOMEM   the line's memory is unchanged
 */
TH_MUST_USE th_status th_branches_next(th_branches *line, const th_solution *answer, double reach,
                                       int *branch, th_error *err);

/** A new line begins: forget all, numbers start at 1 again. Also releases memory. */
void th_branches_clear(th_branches *line);

#endif
