/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The stationary flow: density n(x), speed v(x) > 0, sound speed c(x), all in reduced units
 * (hbar = m = 1, any scale), with n v = J constant. What goes in: a shape with its parameters or
 * a callback, and the kind of ends. What comes out: an immutable object that gives n, v, c and
 * derivatives anywhere, breakpoints, uniform ends, horizons, pockets. Depends on units, status.
 *
 * A flow is a row of pieces between edges edge[0] < edge[1] < ... < edge[pieces]. n, v, c are
 * smooth inside a piece and may jump or kink at an edge. With open ends the flow is uniform
 * beyond edge[0] and edge[pieces]; on a ring edge[0] and edge[pieces] are the same point; with
 * walls the fluctuations vanish at both. */
#ifndef TWINHORIZON_FLOW_H
#define TWINHORIZON_FLOW_H

#include <stdbool.h>
#include <twinhorizon/data.h>
#include <twinhorizon/status.h>
#include <twinhorizon/units.h>
#include <twinhorizon/workspace.h>

#ifdef __cplusplus
extern "C" {
#endif

/* The flow at one point. d... are derivatives with respect to x. */
typedef struct {
    double n, dn, ddn; /* density, n', n'' */
    double v, dv;      /* speed, v' */
    double c, dc;      /* sound speed, c' */
} th_flow_point;

typedef enum { TH_ENDS_OPEN, TH_ENDS_RING, TH_ENDS_WALLS } th_ends_kind;

typedef struct {
    th_ends_kind kind;
    double circumference; /* ring: > 0; the ring is -circumference/2 <= x <= circumference/2 */
    int winding;          /* ring: >= 1; closed integral of v dx = 2 pi winding */
    double padding;       /* walls: >= 0, uniform length added beyond each end of the flow */
} th_ends;

/* A place where the flow varies fast: at distance d from x it varies on the scale
 * max(width, |d|). Discretisations refine towards it. */
typedef struct {
    double x;
    double width; /* > 0 */
} th_feature;

typedef struct th_flow th_flow;

/**
 * A flow given by a callback.
 *
 * eval must be pure and thread-safe; piece tells from which side an edge is meant. For the uniform
 * state outside, open ends and walls also call it with piece -1 at edge[0] and piece = pieces at
 * edge[pieces]. A piece is probed evenly and more densely around features: whatever varies on less
 * than 1/64 of its piece needs a feature (or an edge), or horizons in it may be missed.
 * After th_flow_create succeeded the flow owns ctx and calls release(ctx) once (release may be
 * NULL); arrays are copied.
 */
typedef struct {
    void (*eval)(const void *ctx, int piece, double x, th_flow_point *point);
    void (*release)(void *ctx);
    void *ctx;
    int pieces;                /* >= 1 */
    const double *edge;        /* [pieces + 1] ascending, finite */
    const bool *uniform;       /* [pieces] n, v, c constant on the piece; NULL: none is */
    int features;              /* >= 0 */
    const th_feature *feature; /* [features] */
    const char *note;          /* NULL, or what a user should know of how the flow was found
                                  (copied); longer than TH_FLOW_NOTE_MAX it is cut */
    double scattering; /* equation of state: 0 contact, c^2 = g n; > 0 transverse ground state
                          of that scattering length, mu = omega_perp sqrt(1 + 4 a n). Only
                          the potential depends on it. */
    int directions;    /* ways in which the flow is uncertain; 0: none is known */
    /* The flow moved by so many standard deviations in one of them, the others at rest. NULL when
     * directions is 0. */
    th_status (*vary)(const void *ctx, int direction, double sigmas, const th_ends *ends,
                      th_flow **out, th_error *err);
} th_flow_spec;

enum { TH_FLOW_NOTE_MAX = 800 };

typedef enum { TH_HORIZON_BLACK, TH_HORIZON_WHITE } th_horizon_kind;

/* A point where v - c changes sign. Black: subsonic to supersonic along the flow. A point that
 * only touches v = c is none; a layer with v = c counts as subsonic. On a ring a horizon at the
 * seam has x = edge[pieces]. */
typedef struct {
    double x;
    th_horizon_kind kind;
    bool sharp;         /* v - c jumps: no surface gravity exists, kappa and temperature are 0 */
    double kappa;       /* surface gravity |d(c - v)/dx|, rate; of the supersonic side at a kink */
    double temperature; /* kappa / (2 pi) in reduced energy (k_B T) */
    double speed;       /* v = c at the horizon; the mean of both sides when sharp */
} th_horizon;

/* A supersonic stretch between a black-hole and a white-hole horizon. */
typedef struct {
    double left, right; /* positions of its horizons; a pocket through the seam of a ring has
                           right = position of the white-hole horizon + circumference */
    double omega_max;   /* top of the negative-energy band: max over x and k of
                           v k - sqrt(c^2 k^2 + k^4/4) */
    double undulation;  /* wave number 2 sqrt(v^2 - c^2) of the static undulation, largest in the
                           pocket */
    double mach;        /* largest v/c in the pocket */
} th_pocket;

/**
 * Top of the negative-energy band of a uniform flow: max over k of v k - sqrt(c^2 k^2 + k^4/4),
 * 0 unless v > c. Closed form: k^2 = 2 (v^2/4 - c^2 + sqrt(v^4/16 + v^2 c^2/2)).
 */
double th_band_top(double v, double c);

/**
 * Make a flow from a callback.
 *
 * @retval TH_EINVAL  a rule above is broken: edges not ascending, n, v, c not positive and
 *                    finite at the probed points, n v not constant to 1e-9, an open end that is
 *                    not uniform, ring ends that do not match or an integral of v that does not
 *                    agree with the winding to 1e-9
 * @retval TH_ENOMEM  memory is short
 * On failure nothing is owned and *out is NULL. err->key names circumference, winding or padding
 * when one of these is to blame. n, v or c that vary by more than 1e-10 (relative) in a healing
 * length 1/c at an open end or a wall are not uniform. Cost: some hundred evaluations.
 * Tests: tests/test_flow.c.
 */
TH_MUST_USE th_status th_flow_create(const th_flow_spec *spec, const th_ends *ends, th_flow **out,
                                     th_error *err);

/** Release a flow; NULL is allowed. */
void th_flow_destroy(th_flow *flow);

/* Read-only access; arrays live as long as the flow. */
int th_flow_pieces(const th_flow *flow);
const double *th_flow_edges(const th_flow *flow, int *count); /* count = pieces + 1 */
bool th_flow_piece_uniform(const th_flow *flow, int piece);
const th_feature *th_flow_features(const th_flow *flow, int *count);
th_ends th_flow_ends(const th_flow *flow);
double th_flow_flux(const th_flow *flow);                            /* J = n v */
const th_horizon *th_flow_horizons(const th_flow *flow, int *count); /* ascending x */
const th_pocket *th_flow_pockets(const th_flow *flow, int *count);   /* ascending x */
const char *th_flow_note(const th_flow *flow);  /* of th_flow_spec; "" when it had none */
double th_flow_scattering(const th_flow *flow); /* of th_flow_spec; 0 contact */
double th_flow_sound_max(const th_flow *flow);  /* largest c, the scale of speeds */

/** In how many independent ways a flow made from measured values is uncertain; else 0. */
int th_flow_directions(const th_flow *flow);

/**
 * The flow moved by `sigmas` standard deviations in one of them. It has plain memory and no
 * directions of its own.
 * @retval TH_EINVAL  direction out of range, out is NULL, or the flow moved so far does not exist
 */
TH_MUST_USE th_status th_flow_vary(const th_flow *flow, int direction, double sigmas, th_flow **out,
                                   th_error *err);

/** Flow inside a piece, edges included (their one-sided value). Open ends: piece -1 is the
 * uniform left end, piece = pieces the uniform right end. */
void th_flow_eval(const th_flow *flow, int piece, double x, th_flow_point *point);

/** Flow at any x; at an edge the side to the right; beyond open ends the uniform value; on a ring
 * x is wrapped; beyond walls the value at the wall. */
void th_flow_at(const th_flow *flow, double x, th_flow_point *point);

/**
 * External potential that makes the flow exactly stationary, zero far upstream (at edge[0]):
 * V = mu - v^2/2 - h + (sqrt n)''/(2 sqrt n), reduced energy, with h the local chemical potential:
 * h = c^2 for contact interaction; h = c^2 2 r/(1 + r), r = sqrt(1 + 4 a n), for the transverse
 * equation of state, counted from its value at n = 0.
 * Source: stationary Gross-Pitaevskii equation in density and phase form; "Effective mean-field
 * equations for cigar-shaped and disk-shaped Bose-Einstein condensates", Phys. Rev. A 77, 013617
 * (2008), for mu = hbar omega_perp sqrt(1 + 4 a n).
 */
double th_flow_potential(const th_flow *flow, const th_flow_point *point);

/** Distance between the first black-hole and the last white-hole horizon along the flow: from the
 * left of the first pocket to the right of the last one; 0 when there is no pocket. */
double th_flow_horizon_distance(const th_flow *flow);

/** Frequencies up to which a flow can hold negative-energy waves: the top of the band over
 * pockets, edges and ends; where there is no supersonic place, the frequency c^2/4 of waves of
 * about the healing length, so that phonons are listed. Reduced rate, > 0. */
double th_flow_band_limit(const th_flow *flow);

/* ---- shapes: flows from a few named parameters ---------------------------------------------- */

enum { TH_SHAPE_KEYS_MAX = 16 };

/* One parameter of a shape = one key of [flow]. */
typedef struct {
    const char *key;
    th_dimension dimension;
    double above;            /* the value must be > above ... */
    double below;            /* ... and < below (HUGE_VAL: no bound) */
    bool zero;               /* above itself is allowed */
    bool optional;           /* may be absent: `fallback` stands in (in the reduced unit) */
    double fallback;         /* of optional and si_only keys */
    bool fixed_by_ring;      /* on a ring the winding fixes it: absent, or it must agree */
    bool si_only;            /* required in SI, not accepted in reduced cases */
    bool absolute;           /* in SI it means something only beside [flow] density */
    const char *const *word; /* the key takes one of these words, NULL ends the list; its value is
                                the place of the word. NULL: a number */
    bool file;       /* the key names a table, which goes to th_flow_setup.data; one a shape */
    const char *doc; /* one line of documentation */
} th_shape_key;

/** Whether a key takes a number: it can be swept, have a tolerance, a sensitivity. */
static inline bool th_shape_key_number(const th_shape_key *key)
{
    return key->word == NULL && !key->file;
}

typedef struct th_flow_setup th_flow_setup;

typedef struct th_shape {
    const char *name;
    const char *doc;
    int keys;
    th_shape_key key[TH_SHAPE_KEYS_MAX];
    bool closes_itself; /* on a ring `build` finds the values of fixed_by_ring keys that are not
                           given; otherwise they are 2 pi winding/circumference */
    /* Every value of the setup is in force and within its bounds; given[] says which came from
     * the user. */
    th_status (*build)(const th_flow_setup *setup, th_flow **out, th_error *err);
} th_shape;

/** The table of shapes; index 0 <= i < th_shape_count(). */
int th_shape_count(void);
const th_shape *th_shape_at(int i);
const th_shape *th_shape_find(const char *name); /* NULL when unknown */

/** Index of the key of a shape that is the length of its pocket: gap if it has one, else width,
 * else stretch. -1 when it has none of them. */
int th_shape_length(const th_shape *shape);

/* A shape with its values: everything needed to build the flow of one configuration. */
struct th_flow_setup {
    const th_shape *shape;
    double value[TH_SHAPE_KEYS_MAX]; /* reduced units, order of shape->key */
    bool given[TH_SHAPE_KEYS_MAX];
    double density;      /* upstream line density, reduced; 1 when not given */
    const th_data *data; /* borrowed, reduced units; of a shape with a key that names a file */
    th_ends ends;
    th_workspace *workspace; /* memory of the flow and of what is made of it: one thread at a time
                                then makes and destroys them, all before it; NULL: plain */
};

/**
 * Build the flow of a setup. Every key of the shape must be given, except optional and si_only ones
 * and, on a ring, fixed_by_ring ones: for all these `value` need not be set.
 * @retval TH_EINVAL  err->key names the offending key: one of the shape's, density, kind,
 *                    circumference, winding or padding
 * @retval TH_ENOMEM  memory is short
 */
TH_MUST_USE th_status th_flow_build(const th_flow_setup *setup, th_flow **out, th_error *err);

#ifdef __cplusplus
}
#endif
#endif
