/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What the parts of th_semiclassics_find share. Private to semiclassics. Depends on flow, status.
 */
#ifndef TH_SEMICLASSICS_INSIDE_H
#define TH_SEMICLASSICS_INSIDE_H

#include "twinhorizon/semiclassics.h"

/* ---- waves.c: wave numbers at a place -------------------------------------------------------- */

/* The two waves of negative energy; equal where omega is at or above the top of the band. */
typedef struct {
    double k_s, k_l;
    double speed_s, speed_l; /* group velocities, >= 0 and <= 0 */
} th_trapped;

/** v > c, omega > 0. */
void th_trapped_waves(double omega, const th_flow_point *p, th_trapped *out);

/** |k_p| of the short wave of positive energy; any v and c > 0, omega >= 0. */
double th_partner_wave(double omega, const th_flow_point *p);

/** d omega/dx at constant k > 0 of a wave of negative energy. */
double th_trapped_force(double k, const th_flow_point *p);

/* ---- valley.c: the pocket -------------------------------------------------------------------- */

/* A pocket. The top of the band is 0 at `left` and `right` and `top` at `peak`; on the way it dips
 * no lower than `single`, so that each frequency below that has two turning points. */
typedef struct {
    const th_flow *flow;
    double left, peak, right;
    double top, single; /* equal without dips */
    th_horizon black, white;
    double impedance; /* as th_semiclassics */
} th_valley;

/** Look at a pocket. Errors as th_semiclassics_find; TH_ECONVERGE is none of them. */
TH_MUST_USE th_status th_valley_look(const th_flow *flow, int pocket, th_valley *out,
                                     th_error *err);

/** Where the top of the band is omega, 0 < omega < single. */
void th_valley_turns(const th_valley *valley, double omega, double *left, double *right);

/* ---- orbit.c: integrals over an orbit -------------------------------------------------------- */

typedef struct {
    double left, right; /* turning points */
    double action;      /* S */
    double round_trip;  /* T */
    double sum;         /* Int (k_s + k_l) dx between the turning points */
} th_orbit;

/** 0 < omega < valley->single. @retval TH_ECONVERGE */
TH_MUST_USE th_status th_orbit_follow(const th_valley *valley, double omega, th_orbit *out,
                                      th_error *err);

/** S at omega = 0. @retval TH_ECONVERGE */
TH_MUST_USE th_status th_orbit_static(const th_valley *valley, double *action, th_error *err);

/** Int |k_p| dx from horizon to horizon. @retval TH_ECONVERGE */
TH_MUST_USE th_status th_orbit_partner(const th_valley *valley, double omega, double *integral,
                                       th_error *err);

#endif
