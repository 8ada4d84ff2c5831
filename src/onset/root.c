/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Secants inside a bracket, halving where they are slow or leave it. In: values of a function that
 * costs much more than this. Out: the next place. Calls nobody. Starting from a slope that is
 * known, as on a line of a map, two values are enough.
 * Proved by tests/test_onset.c. */
#include "onset/root.h"

#include <math.h>

/* A secant is drawn over a difference of at least this many times the noise: five digits. */
#define SECANT_SPAN 1e5
/* Rounds of secants alone: a smooth function takes less from a poor start. Every second round after
 * them halves the bracket, so that a hundred more leave 2^-50 of it whatever the function does. */
enum { SECANTS = 12 };

double th_root_next(th_root *root, double x, double f)
{
    const bool halve = ++root->rounds > SECANTS && root->rounds % 2 == 0;
    double next;

    if (f > 0)
        root->high = x;
    else
        root->low = x;
    if (root->seen && fabs(f - root->f) > SECANT_SPAN * root->noise &&
        (f - root->f) / (x - root->x) > 0)
        root->slope = (f - root->f) / (x - root->x);
    root->seen = true;
    root->x = x;
    root->f = f;
    root->step = f / root->slope;
    next = x - root->step;
    if (halve || !(next > root->low && next < root->high))
        next = root->low / 2 + root->high / 2;
    return next;
}
