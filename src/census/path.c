/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Phase of the matching function along a path. In: way points. Out: samples with a continuous
 * phase. Calls matching. Proof: tests/test_census.c. */
#include "census/path.h"

#include <gsl/gsl_math.h>

/* A phase step is believed below this size, and when the mean of F'/F at its ends predicts the
 * step of log F this well: a step that hides a full turn fails the second test. */
static const double largest_step = M_PI_4, largest_surprise = 0.3;
/* Near modes: largest |F'/F| times the step. A mode between two samples raises it above two at one
 * of them. */
static const double largest_rate = 1.0;
/* Steps are not made shorter than this times |omega|: rounding. */
static const double shortest = 1e-13;

static th_status evaluate(th_path *p, double complex omega, th_node *node, th_error *err)
{
    th_matching_value f;
    th_status st = th_matching_eval(p->matching, creal(omega), cimag(omega), true, &f, err);

    if (st != TH_OK)
        return st;
    p->evaluations++;
    node->omega = omega;
    node->value = f.re + I * f.im;
    node->exponent = f.exponent;
    node->rate = (f.slope_re + I * f.slope_im) / node->value;
    if (node->value == 0.0 || !isfinite(creal(node->rate)) || !isfinite(cimag(node->rate)))
        return th_fail(err, TH_EUNDECIDED, "census: a mode lies on the contour at omega = %g%+gi",
                       creal(omega), cimag(omega));
    return TH_OK;
}

static th_status push(th_path *p, const th_node *node, th_error *err)
{
    if (p->count == p->room) {
        int room = p->room > 0 ? 2 * p->room : 256;
        th_node *grown = th_stretch(p->workspace, p->node, (size_t)room * sizeof *grown);

        if (grown == NULL)
            return th_fail(err, TH_ENOMEM, "census: %d samples", room);
        p->node = grown;
        p->room = room;
    }
    p->node[p->count++] = *node;
    return TH_OK;
}

th_status th_path_start(th_path *path, const th_matching *matching, bool near_modes,
                        double complex omega, th_error *err)
{
    th_node node = {0};
    th_status st;

    path->matching = matching;
    path->count = 0;
    path->near_modes = near_modes;
    st = evaluate(path, omega, &node, err);
    return st == TH_OK ? push(path, &node, err) : st;
}

/* From the last node to `to`, which is evaluated already. */
static th_status refine(th_path *p, th_node to, th_error *err)
{
    const th_node from = p->node[p->count - 1];
    const double complex leg = to.omega - from.omega;
    const double step = carg(to.value * conj(from.value));
    const double growth =
        log(cabs(to.value) / cabs(from.value)) + (double)(to.exponent - from.exponent) * M_LN2;
    const double complex predicted = 0.5 * (from.rate + to.rate) * leg;
    const double rate = fmax(cabs(from.rate), cabs(to.rate)) * cabs(leg);
    th_node middle = {0};
    th_status st;

    if (fabs(step) < largest_step && cabs(growth + I * step - predicted) < largest_surprise &&
        (!p->near_modes || rate < largest_rate)) {
        to.phase = from.phase + step;
        p->worst = fmax(p->worst, fabs(step));
        return push(p, &to, err);
    }
    if (!(cabs(leg) > shortest * fmax(cabs(from.omega), cabs(to.omega))))
        return th_fail(err, TH_EUNDECIDED, "census: a mode lies on the contour near omega = %g%+gi",
                       creal(from.omega), cimag(from.omega));
    st = evaluate(p, from.omega + 0.5 * leg, &middle, err);
    if (st == TH_OK)
        st = refine(p, middle, err);
    return st == TH_OK ? refine(p, to, err) : st;
}

th_status th_path_go(th_path *path, double complex to, th_error *err)
{
    th_node node = {0};
    th_status st = evaluate(path, to, &node, err);

    return st == TH_OK ? refine(path, node, err) : st;
}

double th_path_phase(const th_path *path)
{
    return path->count > 0 ? path->node[path->count - 1].phase : 0.0;
}

void th_path_clear(th_path *path)
{
    th_give(path->workspace, path->node);
    path->node = NULL;
    path->count = path->room = 0;
}
