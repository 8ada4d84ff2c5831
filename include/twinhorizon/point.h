/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The answer at one point of a sweep, and how it is found fast: modes are followed from the
 * previous points by predicted and polished roots of the matching function, and index and census
 * say whether one is missing. Depends on modes, census, index, flow, status. Reduced units. */
#ifndef TWINHORIZON_POINT_H
#define TWINHORIZON_POINT_H

#include <stdbool.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/modes.h>
#include <twinhorizon/status.h>
#include <twinhorizon/workspace.h>

#ifdef __cplusplus
extern "C" {
#endif

typedef enum { TH_POINT_OK, TH_POINT_UNDECIDED, TH_POINT_FAILED } th_point_state;

/** The state as written in tables: "ok", "undecided", "failed". */
const char *th_point_state_text(th_point_state state);

/* One mode at a point. */
typedef struct {
    double omega_re, omega_im, omega_error;
    th_label label;
    unsigned confirmed; /* TH_BY_... */
} th_point_mode;

/* One finished point. Start from {0} or {.workspace = ...}; th_point_clear releases. */
typedef struct {
    long number; /* 0 .. points - 1 in the grid, last axis fastest */
    th_point_state state;
    double horizon_distance; /* 0 without a pair of horizons or after a failure */
    bool index_known, census_known;
    int index, census;
    int unstable;            /* growing modes, both signs of Re omega */
    th_workspace *workspace; /* of `mode`; NULL: plain memory */
    int count, room;         /* modes listed: growing ones where the counts settle the answer,
                                all of th_solve else */
    th_point_mode *mode;     /* [count] by falling Im omega, then rising Re omega */
    char message[256];       /* why undecided or failed; "" otherwise; no control characters */
} th_point;

/** Make room for so many modes, >= 0 (count is set to it): those that were there stay, new ones are
 * zero. TH_EINVAL; TH_ENOMEM, and then the point is as it was. */
TH_MUST_USE th_status th_point_resize(th_point *point, int count, th_error *err);

/** Copy a point into one with a workspace of its own, or none; TH_ENOMEM. */
TH_MUST_USE th_status th_point_copy(const th_point *from, th_point *to, th_error *err);

/** Release the modes and zero the point, its workspace too. */
void th_point_clear(th_point *point);

/**
 * Answer one point.
 *
 * @param[in]  setup     configuration of this point, with the workspace to use
 * @param[in]  accuracy  as th_solve_options
 * @param[in]  previous  [2] the last point and the one before on the same line of the sweep, or
 *                       NULL where there is none; the values of the axis may be
 *                       spaced as they like: a bad prediction costs time only
 * @param[out] point     everything but number is set
 *
 * Open ends: predicted roots are polished; when they do not add up to index and census the global
 * finder is called, and when that does not settle it, th_solve. Rings and walls: th_solve.
 * The result depends on the arguments only, not on who computed `previous`.
 * @retval TH_OK  point->state tells more; a flow that cannot be built or solved is
 *                TH_POINT_FAILED
 * @retval TH_ENOMEM, TH_EBUG
 */
TH_MUST_USE th_status th_point_answer(const th_flow_setup *setup, double accuracy,
                                      const th_point *const previous[2], th_point *point,
                                      th_error *err);

/**
 * The same without the census where it can be spared: no more modes can grow than the static index
 * says (index.h), so when as many growing roots are found as it says, none is missing. 3.6 times
 * as fast for the flow of cases/guide.ini when its modes are followed; `census_known` is then false
 * and `confirmed` lacks TH_BY_CENSUS. For flows by the thousand of which only modes are wanted.
 */
TH_MUST_USE th_status th_point_follow(const th_flow_setup *setup, double accuracy,
                                      const th_point *const previous[2], th_point *point,
                                      th_error *err);

#ifdef __cplusplus
}
#endif
#endif
