/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Equations of state, see state.h for what goes in and out. May call: status.
 * To add one: a word, a member of th_state_eq and a branch here; th_flow_potential needs it too.
 * Proved by tests/test_edges.c. */
#include "state.h"

#include <math.h>

const char *const th_state_word[] = {"contact", "transverse", NULL};

th_status th_state_check(int word, double a, th_error *err)
{
    if (word == TH_STATE_TRANSVERSE && !(a > 0))
        return th_fail_key(err, TH_EINVAL, "scattering_length",
                           "scattering_length is missing, state = transverse needs it");
    if (word == TH_STATE_CONTACT && a > 0)
        return th_fail_key(err, TH_EINVAL, "scattering_length",
                           "scattering_length = %.15g, only state = transverse takes one", a);
    return TH_OK;
}

/* r = sqrt(1 + 4 a n) */
static double root(const th_state_eq *s, double n)
{
    return sqrt(1 + 4 * s->a * n);
}

double th_state_sound(const th_state_eq *s, double n)
{
    /* mu = omega_perp r: c^2 = n dmu/dn = omega_perp 2 a n/r */
    return s->c_u * sqrt(n / s->n_u * (root(s, s->n_u) / root(s, n)));
}

double th_state_sound_slope(const th_state_eq *s, double n)
{
    /* (c^2)' = c^2 (1/n - r'/r), r' = 2 a/r */
    return th_state_sound(s, n) / 2 * (1 / n - 2 * s->a / (1 + 4 * s->a * n));
}

double th_state_mu(const th_state_eq *s, double n)
{
    /* omega_perp (r - 1) = c^2 2 r/(1 + r) */
    return s->c_u * s->c_u * (n / s->n_u) * 2 * root(s, s->n_u) / (1 + root(s, n));
}
