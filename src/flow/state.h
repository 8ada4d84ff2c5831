/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The equation of state mu(n) of a flow whose density varies, private to src/flow.
 * contact: mu = g n. transverse: mu = omega_perp sqrt(1 + 4 a n), the ground state of a cigar whose
 * transverse size follows the density ("Effective mean-field equations for cigar-shaped and
 * disk-shaped Bose-Einstein condensates", Phys. Rev. A 77, 013617 (2008)). Both have two
 * parameters, fixed by the upstream sound speed and by a: c^2 = n dmu/dn is c_u^2 at n = n_u.
 *
 * Symbols: n density, c sound speed, a scattering length (0: contact), r = sqrt(1 + 4 a n), h
 * chemical potential counted from n = 0. Proved by tests/test_edges.c. */
#ifndef TH_FLOW_STATE_H
#define TH_FLOW_STATE_H

#include "twinhorizon/flow.h"

typedef struct {
    double n_u, c_u; /* upstream, > 0 */
    double a;        /* >= 0; 0 is contact */
} th_state_eq;

/* The keys that choose it, for th_shape.key. */
#define TH_STATE_KEY                                                                               \
    {                                                                                              \
        .key = "state", .word = th_state_word, .optional = true, .dimension = TH_DIM_NUMBER,       \
        .doc = "equation of state: contact (mu = g n, default) or transverse (mu = hbar "          \
               "omega_perp sqrt(1 + 4 a n))"                                                       \
    }
#define TH_SCATTERING_KEY                                                                          \
    {                                                                                              \
        .key = "scattering_length", .dimension = TH_DIM_LENGTH, .below = HUGE_VAL,                 \
        .optional = true, .absolute = true, .doc = "scattering length a of state = transverse"     \
    }

/* The words of `state`, in the order of the enum. */
enum { TH_STATE_CONTACT, TH_STATE_TRANSVERSE };
extern const char *const th_state_word[];

/** transverse needs a > 0, contact has none: TH_EINVAL, key scattering_length. */
TH_MUST_USE th_status th_state_check(int word, double a, th_error *err);

/** c(n), n > 0. */
double th_state_sound(const th_state_eq *state, double n);
/** dc/dn. */
double th_state_sound_slope(const th_state_eq *state, double n);
/** h(n); dh/dn = c^2/n. */
double th_state_mu(const th_state_eq *state, double n);

#endif
