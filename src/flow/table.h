/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A flow from rows of numbers, private to src/flow. What goes in: a table, how to smooth it, where
 * its ends become uniform. What comes out: n, v, c on pieces, and how they may be wrong.
 *
 * Two curves: f = log n where the table has a density, else log v; and h = log c where it has a
 * sound speed. The other of n and v follows from n v = J, c without a column from the equation of
 * state. Over the length `taper` at each end a curve is led to its mean e there, f = e + S (f - e),
 * S a smooth step, so that the flow is uniform at its edges. Proved by tests/test_table_flow.c. */
#ifndef TH_FLOW_TABLE_H
#define TH_FLOW_TABLE_H

#include "smooth.h"
#include "spline.h"
#include "state.h"

typedef enum { TH_TABLE_MAIN, TH_TABLE_SOUND, TH_TABLE_CURVES } th_table_curve;

/* n v of the rows, where the table has both. */
typedef struct {
    double flux;        /* J, in the units of the table */
    double uncertainty; /* standard deviation of log J */
    double rms, worst;  /* of n v/J - 1 over the rows */
    double worst_at;    /* x */
} th_table_flux;

typedef struct {
    const th_data *data;
    double smoothing;  /* strength, see smooth.h; < 0: cross-validation */
    double taper;      /* > 0 */
    double stretch;    /* x of the flow is this times x of the table */
    double flux;       /* J of a table with a density and no speed; 0 otherwise */
    th_state_eq state; /* n_u is the density upstream; c_u used where there is no sound column */
    th_workspace *workspace;
} th_table_plan;

typedef struct {
    th_workspace *workspace;
    bool density;                   /* f is log n, else log v */
    bool mirrored;                  /* all speeds were < 0 */
    th_smooth fit[TH_TABLE_CURVES]; /* in the coordinates of the table */
    int curves;                     /* 1: c from the equation of state */
    th_table_flux flux;             /* rms 0 where only one of n, v is in the table */
    th_state_eq state;
    double stretch, taper, first, last;
    int pieces;
    double *left;  /* [pieces + 1] edges, in the coordinates of the table */
    double *power; /* [TH_TABLE_CURVES][pieces][TH_SPLINE_LOCAL] about the left edge of a piece */
    double end[TH_TABLE_CURVES][2]; /* e at both ends */
} th_table;

/* Of a flow at most; the curves share them. */
enum { TH_TABLE_DIRECTIONS = 200 };

/** Taper of a setup in force, 0 when its shape is not `table`. */
double th_table_taper(const th_flow_setup *setup);
/** Give a setup of shape `table` another one. */
void th_table_set_taper(th_flow_setup *setup, double taper);

/**
 * Fit the curves of a plan.
 * @retval TH_EINVAL  err->key says which key is to blame
 * On failure nothing is held.
 */
TH_MUST_USE th_status th_table_make(const th_table_plan *plan, th_table *out, th_error *err);

/** Pieces between the knots of the curves and the tapers, for th_table_make. */
TH_MUST_USE th_status th_table_cut(th_table *table, th_error *err);

void th_table_clear(th_table *table);

/** Callback of th_flow_spec, ctx a th_table. */
void th_table_eval(const void *table, int piece, double x, th_flow_point *point);

/** In how many ways the curves may be wrong. */
int th_table_directions(const th_table *table);

/** A table moved by `sigmas` standard deviations in one direction; it has no fits. */
TH_MUST_USE th_status th_table_move(const th_table *table, int direction, double sigmas,
                                    th_table *out, th_error *err);

/** What a user should know of how the flow was found. */
void th_table_note(const th_table *table, int rows, char *note, size_t size);

#endif
