/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The modes of a ring or walls at one length. Private to onset. Depends on flow, modes, status. */
#ifndef TH_ONSET_STATE_H
#define TH_ONSET_STATE_H

#include <stdbool.h>

#include "twinhorizon/flow.h"
#include "twinhorizon/status.h"

typedef struct {
    double re, im;
    int sign; /* of the energy; 0: growing */
} th_mark;

typedef struct {
    double x;
    bool exists, certain;
    int unstable;
    double omega_top;
    int neutral;   /* the first ones, by rising re */
    int row;       /* neutral ones up to the last -: a + beyond has met none yet */
    int all;       /* with the growing ones */
    th_mark *mode; /* [all] */
    char why[256];
} th_state;

/**
 * A state near length x, certain if there is one within a small part of `room`. A flow that breaks
 * a rule does not exist; whatever else fails is uncertain, and out->why says why.
 * @retval TH_ENOMEM, TH_EBUG
 */
TH_MUST_USE th_status th_state_near(const th_flow_setup *setup, int key, double x, double room,
                                    th_state *out, th_error *err);

/** Fail with TH_EUNDECIDED and say why a state is not certain. */
TH_MUST_USE th_status th_state_doubtful(const th_state *s, th_error *err);

/** As many growing modes, and the same row of neutral ones. */
bool th_state_equal(const th_state *a, const th_state *b);

/** Equal, and the growing modes stand at the same places among the neutral ones. Where they do not,
 * they may just have passed them, or one has died and another was born. */
bool th_state_alike(const th_state *a, const th_state *b);

/** Release what a state holds and zero it. */
void th_state_forget(th_state *s);

#endif
