/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What th_solve says of a ring or walls at one length, and whether two neighbours hide a change.
 * In: a setup. Out: a state. May call: modes, flow, status.
 *
 * A state is how many modes grow, and the neutral ones in the order of their frequencies with the
 * signs of their energies, such as "+-+". Modes of equal sign only pass each other; a - that meets
 * a + makes a growing mode, which takes both out of the row; when it dies they are back, as a rule
 * in exchanged places. So neighbours with equal rows and the growing modes at the same places among
 * them hide nothing but a mode that came and went in between and left no trace.
 * Proved by tests/test_onset.c. */
#include "onset/state.h"

#include <stdio.h>
#include <stdlib.h>

#include "alloc.h"
#include "onset/inside.h"
#include "twinhorizon/modes.h"

/* Accuracy of th_solve: its default. */
#define ACCURACY 1e-9
/* Where to try in turn when a length lies too near to a change to be certified: parts of the
 * distance of two samples from where it should be. */
static const double aside[] = {0, -0.05, 0.07};
enum { ASIDES = sizeof aside / sizeof aside[0] };

static int by_frequency(const void *a, const void *b)
{
    const th_mark *p = a, *q = b;

    if ((p->sign == 0) != (q->sign == 0))
        return p->sign == 0 ? 1 : -1;
    if (p->re != q->re)
        return p->re < q->re ? -1 : 1;
    return (p->im > q->im) - (p->im < q->im);
}

static th_status read_state(const th_solution *s, th_state *out, th_error *err)
{
    out->certain = s->verdict != TH_VERDICT_UNDECIDED;
    (void)snprintf(out->why, sizeof out->why, "%s", s->reason);
    out->unstable = s->unstable;
    out->omega_top = s->omega_top;
    out->mode = th_alloc((size_t)s->count, sizeof *out->mode);
    if (out->mode == NULL)
        return th_fail(err, TH_ENOMEM, "onset: %d modes", s->count);
    out->all = s->count;
    for (int i = 0; i < out->all; i++) {
        const th_mode *m = &s->mode[i];

        out->mode[i] = (th_mark){m->omega_re, m->omega_im, m->norm < 0 ? -1 : 1};
        if (m->label == TH_LABEL_UNSTABLE)
            out->mode[i].sign = 0;
        else
            out->neutral++;
    }
    qsort(out->mode, (size_t)out->all, sizeof *out->mode, by_frequency);
    for (int i = 0; i < out->neutral; i++)
        if (out->mode[i].sign < 0)
            out->row = i + 1;
    return TH_OK;
}

void th_state_forget(th_state *s)
{
    free(s->mode);
    *s = (th_state){0};
}

/* The state at x. A flow that breaks a rule does not exist, whatever else fails is uncertain. */
static th_status solve(const th_flow_setup *setup, int key, double x, th_state *out, th_error *err)
{
    const th_solve_options options = {.accuracy = ACCURACY};
    const th_flow_setup at = th_onset_setup(setup, key, x);
    th_solution *answer = NULL;
    th_flow *flow = NULL;
    th_error why = {0};
    th_status st = th_flow_build(&at, &flow, &why);

    *out = (th_state){.x = x, .exists = st == TH_OK};
    if (st == TH_OK)
        st = th_solve(flow, &options, &answer, &why);
    if (st == TH_OK)
        st = read_state(answer, out, &why);
    else
        (void)snprintf(out->why, sizeof out->why, "%.*s", (int)sizeof out->why - 1, why.text);
    th_solution_destroy(answer);
    th_flow_destroy(flow);
    if (st == TH_ENOMEM || st == TH_EBUG) {
        if (err != NULL)
            *err = why;
        return st;
    }
    return TH_OK;
}

/* A state near x, certain if there is one within a small part of `room`. */
th_status th_state_near(const th_flow_setup *setup, int key, double x, double room, th_state *out,
                        th_error *err)
{
    th_status st = TH_EBUG;

    for (int i = 0; i < ASIDES; i++) {
        st = solve(setup, key, x + aside[i] * room, out, err);
        if (st != TH_OK || !out->exists || out->certain || i + 1 == ASIDES)
            break;
        th_state_forget(out);
    }
    return st;
}

th_status th_state_doubtful(const th_state *s, th_error *err)
{
    return th_fail(err, TH_EUNDECIDED, "onset: nothing is certain near %.12g: %s", s->x, s->why);
}

bool th_state_equal(const th_state *a, const th_state *b)
{
    bool same = a->unstable == b->unstable && a->row == b->row;

    for (int i = 0; same && i < a->row; i++)
        same = a->mode[i].sign == b->mode[i].sign;
    return same;
}

/* Neutral modes below mode i. */
static int below(const th_state *s, int i)
{
    int n = 0;

    while (n < s->neutral && s->mode[n].re < s->mode[i].re)
        n++;
    return n;
}

/* Equal, and the growing modes stand at the same places among the neutral ones. Where they do not,
 * they may just have passed them, or one has died and another was born. */
bool th_state_alike(const th_state *a, const th_state *b)
{
    bool same = th_state_equal(a, b) && a->all - a->neutral == b->all - b->neutral;

    for (int i = 0; same && i < a->all - a->neutral; i++)
        same = below(a, a->neutral + i) == below(b, b->neutral + i);
    return same;
}
