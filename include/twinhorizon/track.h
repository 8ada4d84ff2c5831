/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The growing modes along a line of pocket lengths, each followed as one branch: what a ramp of the
 * length gains, which length grows fastest, over which lengths a single mode grows. What goes in: a
 * configuration, the ends of the line. What comes out: certified points, branches, integrals and
 * maxima over them. Depends on point, sweep (branches), flow, status. Reduced units. */
#ifndef TWINHORIZON_TRACK_H
#define TWINHORIZON_TRACK_H

#include <stdbool.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/point.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

typedef struct th_track th_track;

/* A growing mode at one length; with Re omega > 0 it stands for both signs. */
typedef struct {
    int branch; /* 0 .. branches - 1, in order of appearance from the short end */
    double omega_re, omega_im, omega_error;
} th_track_mode;

typedef struct {
    double length; /* value of the key */
    th_point_state state;
    int unstable; /* both signs of Re omega counted; 0 where state is failed */
    int count;
    const th_track_mode *mode; /* [count] fastest first; empty unless state is ok */
} th_track_point;

enum { TH_TRACK_POINTS = 257, TH_TRACK_POINTS_CLOSED = 65 };

typedef struct {
    int key;         /* of the shape: its length, th_shape_length */
    double from, to; /* lengths > 0, from < to */
    int points;      /* even samples at first, 3 or more; 0: TH_TRACK_POINTS, on rings and between
                        walls TH_TRACK_POINTS_CLOSED. More are added where the number of modes
                        changes and where a growth rate bends */
    double accuracy; /* as th_solve_options */
    int threads;     /* >= 1; no result depends on it */
} th_track_options;

/**
 * Answer the points of the line (th_point_follow) and join their modes to branches.
 *
 * Where the number of growing modes differs between neighbours the interval is halved until it is
 * below 1e-4 of the line (rings, walls: 1e-3, a point takes a th_solve there); elsewhere until each
 * growth rate lies within 2e-3 (1e-2) of the largest one of the straight line between its
 * neighbours or the interval is below 2e-3 (8e-3) of the line.
 * @retval TH_OK      points without an answer are failed or undecided, the others stand
 * @retval TH_EINVAL  an option breaks its rule
 * @retval TH_ENONE   no point has an answer; the text is the first point's
 * @retval TH_ENOMEM, TH_EBUG
 * Tests: tests/test_track.c.
 */
TH_MUST_USE th_status th_track_create(const th_flow_setup *setup, const th_track_options *options,
                                      th_track **out, th_error *err);

/** Release; NULL is allowed. */
void th_track_destroy(th_track *track);

/** Points by ascending length. */
const th_track_point *th_track_points(const th_track *track, int *count);
int th_track_branches(const th_track *track);

/* What one branch gains during a ramp. */
typedef struct {
    int branch;
    double gain; /* Int Im omega dt over the part of the ramp on which the mode grows: e-foldings */
    double error;    /* of gain: the same with every second point, and error bars */
    double from, to; /* lengths between which it exists, in the sense of the line */
    double dominant; /* length at which it grows fastest */
    double growth;   /* there */
    double doubtful; /* share of gain, 0..1, earned where adiabatic following is doubtful */
} th_track_gain;

typedef struct {
    int count;
    th_track_gain *gain; /* [count] largest gain first; caller's, freed with th_ramp_clear */
    double best;         /* Int max Im omega dt: no single branch can gain more */
    double best_error;   /* sum of the branches' errors */
    double dominant;     /* the length at which the mode with the largest gain grows fastest */
    double unanswered;   /* share of the line between points without an answer, 0..1 */
    double worst;        /* largest |d omega/dt|/distance^2 of the leading branch to another one,
                            the slope taken over the time 1/distance; 0 when it is always alone */
    double worst_length; /* where; 0 when it is always alone */
} th_ramp;

/**
 * Gains of a ramp that runs along the whole line at constant speed in a time.
 *
 * Following a branch is doubtful where modes mix, |d omega/dt| above a tenth of the square of the
 * distance to the nearest other growing mode or mirror image of one, and where the mode changes
 * before it grows, |d omega/dt| above three times |omega|^2. For mixing d omega/dt is the slope
 * over the time 1/distance: at a merger the one at a point has no bound, but passes at once. The
 * gain of a ramp along which a single mode grows is right to a per cent even through a merger
 * (measured); with several modes what one gains leaks into the others, and the contrast may end an
 * e-folding or more away from either gain. What success does not prove: the gain is the exponent
 * only; the shape of the mode changes on the way, which multiplies the contrast by a factor of
 * order one. The flow must be stationary at every length: a ramp that shakes the condensate makes
 * excitations of its own.
 * @retval TH_EINVAL  time is not > 0
 * @retval TH_ENOMEM
 */
TH_MUST_USE th_status th_track_ramp(const th_track *track, double time, th_ramp *out,
                                    th_error *err);
void th_ramp_clear(th_ramp *ramp);

/* A stretch of the line on which a single mode (both signs of Re omega taken as one) grows. */
typedef struct {
    double from, to;
    bool open_below, open_above; /* the stretch reaches the end of the line */
    double fastest, growth;      /* where in it growth is fastest, and how fast */
} th_track_clean;

typedef struct {
    bool grows;           /* some point grows */
    double length, error; /* fastest growth of the line and how far off the length may be */
    double omega_re, omega_im, omega_error;
    bool at_end; /* it is at an end of the line: beyond it may be faster */
    int clean_count;
    th_track_clean *clean; /* [clean_count] ascending; freed with th_track_best_clear */
} th_track_best;

/**
 * The length with the fastest growth, refined by golden sections to 1e-4 of the line, and the
 * stretches on which one mode grows. Ends of stretches inside the line are where the number of
 * modes changes, to 1e-4 of the line (rings, walls: 1e-3).
 * @retval TH_ENOMEM, TH_EBUG
 */
TH_MUST_USE th_status th_track_best_find(const th_track *track, th_track_best *out, th_error *err);
void th_track_best_clear(th_track_best *best);

#ifdef __cplusplus
}
#endif
#endif
