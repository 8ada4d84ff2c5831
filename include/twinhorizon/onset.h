/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Switch-on lengths: at which lengths of a pocket the number of growing modes changes. What goes
 * in: a shape with its values, or a case with axes. What comes out: the lengths in ascending order,
 * each with an error bar and what happens there. Depends on case, flow, index, modes, matching,
 * status. Reduced units. */
#ifndef TWINHORIZON_ONSET_H
#define TWINHORIZON_ONSET_H

#include <stdbool.h>
#include <twinhorizon/case.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/* growing: a purely growing mode (Re omega = 0) comes or goes. pair: an oscillating one does; with
 * open ends it is what the slowest growing mode turns into. */
typedef enum { TH_ONSET_GROWING, TH_ONSET_PAIR } th_onset_kind;

/** The kind as written in tables: "growing", "pair". */
const char *th_onset_kind_text(th_onset_kind kind);

typedef struct {
    int order;          /* open ends: growing modes just below; else a running number from 0 */
    double gap;         /* value of the shape's length key */
    double gap_error;   /* bound on its error */
    th_onset_kind kind; /* of what appears (change > 0) or disappears (change < 0) */
    int change;         /* of the number of growing modes, both signs of Re omega counted: 1 with
                           open ends; else 1, -1 (growing), 2 or -2 (pair) */
    double omega_re;    /* frequency at the change: where two modes collide; 0 for open ends and
                           for growing */
} th_onset;

typedef struct {
    double from, to; /* what was searched */
    int before;      /* growing modes at `from`, both signs of Re omega counted */
    int count;
    th_onset *onset; /* [count] by ascending gap */
    bool complete;   /* false: ended after th_onset_options.orders */
} th_onset_list;

enum { TH_ONSET_SAMPLES = 100 };

typedef struct {
    double upto; /* > 0; 0: th_onset_upto */
    int orders;  /* end after so many changes; 0: all of them */
    int samples; /* rings, walls: lengths looked at first, 2 or more; 0: TH_ONSET_SAMPLES */
    int threads; /* >= 1; no result depends on it */
} th_onset_options;

/** How far a case is searched unless told: to the largest value of its axis over the length key,
 * else to four times the base value. 0 when the shape has no length key. */
double th_onset_upto(const th_case *c);

/**
 * Lengths up to `upto` at which the number of growing modes changes, all else as in the setup.
 *
 * Open ends: the static operator K has a zero eigenvalue there. The mismatch angle of its two
 * decaying solutions (see index.h) reaches order x pi, is bracketed there and refined by secants;
 * even orders add a purely growing mode, odd ones make a pair of the slowest. Searched from
 * 1e-9 of the shortest healing length on (of upto if that is less), up to 1e6 healing lengths and
 * 100000 changes. Where the shape makes no flow so short: from the shortest that it makes
 * (out->from). Rings and walls: two neutral modes of opposite energy collide on the real axis, or a
 * mode and its mirror image at omega = 0. Neighbouring samples whose certified modes differ in
 * their counts or in the order of their energies are bisected until a circle isolates the two
 * modes; the square of their difference, from the argument principle on the matching function, is
 * analytic in the length and zero at the collision. Searched between the first and the last sample
 * for which the flow exists.
 *
 * @param[in]  setup    the value of the length key does not matter
 * @param[in]  options  upto must be given
 * @param[out] out      zero before the call; th_onset_clear releases, after failures too
 *
 * @retval TH_OK          all changes in (from, to] unless !out->complete
 * @retval TH_EINVAL      no length key, an option or a flow breaks a rule, upto is out of reach
 * @retval TH_ENONE       open ends: one is not subsonic
 * @retval TH_EUNDECIDED  the text says between which lengths
 * @retval TH_ENOMEM, TH_ECONVERGE
 *
 * Notes: (1) Open ends: complete as long as the index never falls with length, which holds when
 * the pocket deepens everywhere. (2) Rings and walls: a mode that grows only between two samples
 * and leaves the order of the others as it was goes unnoticed. (3) gap_error comes from the error
 * of the angle (collisions: from two integrations) over the slope, plus the last step. Reentrant.
 * Cost: two indices and some three to five for each open order; a th_solve for each sample and some
 * twenty for each change on a ring. What success does not prove: that index and number of growing
 * modes agree, which th_solve does. Source: as index.h; collisions of modes of opposite energy:
 * Physica D 195, 263 (2004). Tests: tests/test_onset.c (closed forms of steps, wells, sech pockets,
 * barriers; a ring against th_solve on both sides).
 */
TH_MUST_USE th_status th_onset_find(const th_flow_setup *setup, const th_onset_options *options,
                                    th_onset_list *out, th_error *err);

/** Release what a list holds and zero it. */
void th_onset_clear(th_onset_list *list);

/* One point of a map. Pointers are valid during the callback only. */
typedef struct {
    long number, points;        /* 0 .. points - 1, last axis fastest */
    int axes;                   /* of the map: those of the case but the length key's */
    const th_axis *const *axis; /* [axes] */
    const double *value;        /* [axes] */
    th_status status;           /* TH_OK, or why the point has no answer */
    const char *message;        /* the sentence of that failure; "" when TH_OK */
    const th_onset_list *list;  /* NULL after a failure */
} th_onset_point;

/** What a caller does with a point; anything but TH_OK ends the map with that status. Called by
 * one thread at a time, in order of the points. */
typedef th_status (*th_onset_sink)(void *ctx, const th_onset_point *point, th_error *err);

/** Number of points of the map of a case: the product of the counts of its axes but the length
 * key's, 1 when there is none. TH_EINVAL when it exceeds 2^31 - 1. */
TH_MUST_USE th_status th_onset_points(const th_case *c, long *points, th_error *err);

/**
 * Switch-on map: th_onset_find at every point of the grid of the other axes.
 *
 * With open ends each length is foreseen from the points before it on the same line of the last
 * axis, in blocks of a fixed length that start afresh: no result depends on the number of threads.
 * A point without an answer is handed on with its status and the map goes on; only TH_ENOMEM and
 * TH_EBUG end it.
 *
 * @param[in] options  upto = 0: th_onset_upto
 * @retval TH_OK      every point was handed to sink
 * @retval TH_EINVAL  as th_onset_points, or no length key, or an option breaks a rule
 * Memory: a few blocks, whatever the size of the map.
 */
TH_MUST_USE th_status th_onset_map(const th_case *c, const th_onset_options *options,
                                   th_onset_sink sink, void *ctx, th_error *err);

#ifdef __cplusplus
}
#endif
#endif
