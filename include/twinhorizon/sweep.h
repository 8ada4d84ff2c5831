/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Sweeps: one configuration after another over the axes of a case. What goes in: a case with a
 * [sweep] section. What comes out: each point's answer, handed to a callback in a fixed order.
 * Depends on case, modes, flow, status. */
#ifndef TWINHORIZON_SWEEP_H
#define TWINHORIZON_SWEEP_H

#include <twinhorizon/case.h>
#include <twinhorizon/modes.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/* One finished point. Pointers are valid during the callback only. */
typedef struct {
    long number;               /* 0 .. points - 1, last axis fastest */
    const double *value;       /* [axes] reduced units */
    th_status status;          /* TH_OK, or why the point has no answer */
    const char *message;       /* the sentence of that failure; "" when TH_OK */
    double horizon_distance;   /* reduced; 0 without a pair of horizons or after a failure */
    const th_solution *answer; /* NULL after a failure */
    const int *branch;         /* [answer->count] identity of each mode along the last axis: modes
                                  of neighbouring points that continue each other share it;
                                  numbers start at 1 in each line of the last axis */
} th_sweep_point;

/** What a caller does with a point; anything but TH_OK ends the sweep with that status. */
typedef th_status (*th_sweep_sink)(void *ctx, const th_sweep_point *point, th_error *err);

/** Number of points: the product of the axes' counts.
 * @retval TH_EINVAL  the case has no axes, or the product exceeds 2^31 - 1 */
TH_MUST_USE th_status th_sweep_size(const th_case *c, long *points, th_error *err);

/**
 * Run a sweep, point by point, first axis slowest.
 *
 * A point that cannot be built or solved is handed on with its status and the sweep goes on; only
 * TH_ENOMEM and TH_EBUG end it.
 *
 * @retval TH_OK      every point was handed to sink
 * @retval TH_EINVAL  as th_sweep_size
 * Reentrant. Cost: a th_solve for each point.
 */
TH_MUST_USE th_status th_sweep_run(const th_case *c, th_sweep_sink sink, void *ctx, th_error *err);

#ifdef __cplusplus
}
#endif
#endif
