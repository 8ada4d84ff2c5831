/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Sweeps: every point of the axes of a case, on several threads, into a journal; and the branches
 * that modes of neighbouring points form. What goes in: a case with a [sweep] section. What comes
 * out: finished points in the journal, in any order; branches and events along the last axis.
 * Depends on case, journal, point, status. */
#ifndef TWINHORIZON_SWEEP_H
#define TWINHORIZON_SWEEP_H

#include <stdatomic.h>
#include <twinhorizon/case.h>
#include <twinhorizon/journal.h>
#include <twinhorizon/point.h>
#include <twinhorizon/status.h>
#include <twinhorizon/workspace.h>

#ifdef __cplusplus
extern "C" {
#endif

/* Points are dealt out in blocks of neighbours along the last axis; inside a block each point
 * starts from the ones before it. Blocks, and with them all results, do not depend on the number
 * of threads. Long enough that the first point's search does not count, short enough to share. */
enum { TH_SWEEP_BLOCK = 32 };

typedef struct {
    int threads;            /* >= 1 */
    int part, parts;        /* this run does blocks part - 1, part - 1 + parts, ...;
                               1 <= part <= parts */
    const atomic_int *stop; /* nonzero: finish the points in flight and return; may be NULL */
    void (*done)(void *ctx, const th_point *point); /* after each point is in the journal; called
                                by one thread at a time; may be NULL */
    void *ctx;
} th_sweep_options;

/** Number of points: the product of the axes' counts.
 * @retval TH_EINVAL  the case has no axes, or the product exceeds 2^31 - 1 */
TH_MUST_USE th_status th_sweep_size(const th_case *c, long *points, th_error *err);

/** Number of blocks of a sweep of so many points (th_sweep_size). */
long th_sweep_blocks(const th_case *c);

/** Points of a block: first <= number < first + count. */
void th_sweep_block(const th_case *c, long block, long *first, int *count);

/** Values of a point along the axes, value[axes], reduced units. */
void th_sweep_values(const th_case *c, long number, double *value);

/** Configuration of a point. */
th_flow_setup th_sweep_setup(const th_case *c, long number);

/**
 * Run what the journal lacks of a sweep, or of a part of it.
 *
 * A point that cannot be built or solved is recorded as failed and the sweep goes on. Each thread
 * has a workspace: once it has seen the largest points, one that is followed and settled allocates
 * nothing.
 * @retval TH_OK      done, or stopped: th_journal_count tells
 * @retval TH_EINVAL  an option breaks its rule, or as th_sweep_size
 * @retval TH_EIO     the journal cannot be written
 * @retval TH_ENOMEM, TH_EBUG
 */
TH_MUST_USE th_status th_sweep_run(const th_case *c, const th_sweep_options *options,
                                   th_journal *journal, th_error *err);

/** Run one block without a journal: known[0..knowns-1] are its first points, finished before;
 * the others are computed and handed to sink in order. For those who deal out blocks themselves: a
 * workspace (NULL: plain memory) may go from block to block, and serves one at a time.
 * Anything but TH_OK from sink ends the block with that status. Errors as th_sweep_run. */
TH_MUST_USE th_status th_sweep_run_block(const th_case *c, long block, const th_point *known,
                                         int knowns, th_workspace *workspace,
                                         th_status (*sink)(void *ctx, const th_point *point,
                                                           th_error *err),
                                         void *ctx, const atomic_int *stop, th_error *err);

/* ---- branches ------------------------------------------------------------------------------- */

/* Identity of modes along the last axis. Start from {0} or {.workspace = ...}; th_branches_clear
 * begins a new line and releases memory, not the workspace. */
typedef struct {
    th_workspace *workspace; /* of the arrays; NULL: plain memory */
    int count;               /* modes at the previous point */
    int *branch;             /* [count] */
    double *re, *im;         /* [count] where they were */
    double *dre, *dim;       /* [count] their last steps, 0 for a new mode */
    int last;                /* highest number given so far in this line */
} th_branches;

/**
 * Give the modes of the next point their branches: each continues the mode of the previous point
 * whose linear continuation lies nearest, nearest pairs first, those of a purely
 * growing and an oscillating mode last; a pair farther apart than `reach`
 * (four times that for slow modes and for purely growing ones that turn into pairs) is
 * none, and modes without one start new branches in the order of the list, from 1.
 *
 * @param[out] branch  [point->count]
 * @retval TH_ENOMEM   the line's memory is unchanged
 */
TH_MUST_USE th_status th_branches_next(th_branches *line, const th_point *point, double reach,
                                       int *branch, th_error *err);

void th_branches_clear(th_branches *line);

/* ---- events --------------------------------------------------------------------------------- */

/* birth, death: a growing mode comes or goes. merger: a purely growing mode becomes an oscillating
 * pair; split: the reverse. */
typedef enum { TH_EVENT_BIRTH, TH_EVENT_MERGER, TH_EVENT_SPLIT, TH_EVENT_DEATH } th_event_kind;

/** The kind as written in tables: "birth", "merger", "split", "death". */
const char *th_event_kind_text(th_event_kind kind);

typedef struct {
    th_event_kind kind;
    int branch; /* of the mode; of a merger and a split the oscillating one */
    int change; /* of the number of growing modes, both signs of Re omega counted. Birth 1, death
                   -1; 2 and -2 for a pair. Merger 0 where two purely growing modes meet, 1 where
                   one meets at zero a mode that did not grow; split 0 and -1 */
} th_event;

/**
 * What becomes of the growing modes between two neighbouring points: the fewest events that turn
 * the numbers of purely growing modes and of oscillating pairs at one point into those at the next.
 * With open ends growing modes come and go at zero frequency only, one by one, so a new pair is a
 * birth and a merger; else a pair can be born of two neutral modes.
 *
 * @param[in]  before, now      points, both TH_POINT_OK
 * @param[in]  branch_before, branch_now  the branches of their modes
 * @param[in]  open             open ends
 * @param[out] event            [2 (before->count + now->count)] at most
 * @return how many: births, mergers, splits, deaths; their changes add up to that of `unstable`
 * What it does not tell: a death and a birth between the same points. Which branch is meant rests
 * on their numbers, and where several events fall between two points on guesses.
 */
int th_events_find(const th_point *before, const int *branch_before, const th_point *now,
                   const int *branch_now, bool open, th_event *event);

#ifdef __cplusplus
}
#endif
#endif
