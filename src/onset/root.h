/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A bracketed secant search, one value at a time. Private to onset. Depends on nothing. */
#ifndef TH_ONSET_ROOT_H
#define TH_ONSET_ROOT_H

#include <stdbool.h>

/* The root of f lies in [low, high], f(low) <= 0 < f(high). Set the first four and zero the rest.
 */
typedef struct {
    double low, high;
    double slope; /* of f near the root as far as known, > 0 */
    double noise; /* rounding error of f: secants are drawn over much larger differences only */
    double x, f;  /* the value before, once `seen` */
    bool seen;
    int rounds;
    double step; /* from x to the root by the slope */
} th_root;

/**
 * Take in f at x, low <= x <= high, and say where to look next. root->step then is how far the root
 * should be from x, and x - root->step the best guess.
 */
double th_root_next(th_root *root, double x, double f);

#endif
