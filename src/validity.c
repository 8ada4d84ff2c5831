/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Limits of the model. In: flow, experiment. Out: the list of checks. Calls flow.
 * Symbols: q = c^2/omega_perp, y = a n. To add a check: an identifier in the header, a row of
 * `rule`, its value in th_validity_check. Proof: tests/test_validity.c. */
#include "twinhorizon/validity.h"

#include <gsl/gsl_math.h>

/* Samples on each piece for extremes of n and c: they are smooth there, and a limit of a model is
 * not known to more than a per cent. */
enum { SAMPLES = 400 };

static const th_check rule[TH_CHECKS] = {
    [TH_CHECK_STATE] = {.name = "state",
                        .title = "error of c^2 proportional to n, sqrt(1 + 4 a n) - 1",
                        .limit = 0.1,
                        .fails = "the sound speed no longer follows the density as assumed; use "
                                 "state = transverse where the shape has it"},
    [TH_CHECK_TRANSVERSE] = {.name = "transverse",
                             .title = "mu/(hbar omega_perp), 1 in one dimension",
                             .limit = 2.0,
                             .fails = "the cloud is no longer one-dimensional: transverse motion "
                                      "takes part and no number here can be trusted"},
    [TH_CHECK_MEAN_FIELD] = {.name = "mean_field",
                             .title = "atoms per healing length, at the fewest",
                             .limit = 10.0,
                             .above = true,
                             .fails = "quantum fluctuations are no small correction to the "
                                      "mean-field flow"},
    [TH_CHECK_KAPPA] = {.name = "kappa",
                        .title = "surface gravity over c^2 (hbar = m = 1), the larger one",
                        .limit = 0.1,
                        .fails = "emission of a single horizon is not thermal and the Hawking "
                                 "temperature is a name only; growth rates do not depend on this"},
    [TH_CHECK_RIPPLE] = {.name = "ripple",
                         .title = "period of the static undulation over the resolution",
                         .limit = 1.0,
                         .above = true,
                         .fails = "the imaging blurs ripples in the pocket: the contrasts are not "
                                  "what the camera sees"},
    [TH_CHECK_HEALING] = {.name = "healing",
                          .title = "healing length at the horizons over the resolution",
                          .limit = 1.0,
                          .above = true,
                          .fails = "a measured profile of the edges is smoothed by the imaging; "
                                   "do not feed it back as it stands"},
    [TH_CHECK_THERMAL] = {.name = "thermal",
                          .title = "k_B T over m c^2 far upstream",
                          .limit = 1.0,
                          .fails = "thermal atoms make up much of the cloud: damping and a "
                                   "normal component are outside the model"},
    [TH_CHECK_COHERENCE] = {.name = "coherence",
                            .title = "thermal coherence length over the horizon distance",
                            .limit = 1.0,
                            .above = true,
                            .fails = "the phase is not coherent along the pocket and the speed "
                                     "fluctuates: the seeds are not those of a condensate"},
    [TH_CHECK_LOSS] = {.name = "loss",
                       .title = "share of the atoms lost during the hold",
                       .limit = 0.1,
                       .fails = "the sound speeds fall while you wait: the flow that was solved "
                                "is not the one at the end"},
    [TH_CHECK_LINEAR] = {.name = "linear",
                         .title = "expected contrast at the end of the hold",
                         .limit = 0.5,
                         .fails =
                             "the ripple is no longer small before the hold ends: what it does "
                             "then, saturation first, is beyond linear theory"},
};

typedef struct {
    double c_upstream, c_most;
    double per_healing; /* least n/c, relative to upstream n = upstream density of the flow */
    double n_upstream, n_least;
    double n_most;
} extremes;

static void take(const th_flow_point *p, extremes *e)
{
    e->c_most = fmax(e->c_most, p->c);
    e->n_least = fmin(e->n_least, p->n);
    e->per_healing = fmin(e->per_healing, p->n / p->c);
    e->n_most = fmax(e->n_most, p->n);
}

static extremes look(const th_flow *flow)
{
    extremes e = {.per_healing = HUGE_VAL, .n_least = HUGE_VAL};
    int edges;
    const double *edge = th_flow_edges(flow, &edges);
    th_flow_point p;

    th_flow_eval(flow, th_flow_ends(flow).kind == TH_ENDS_OPEN ? -1 : 0, edge[0], &p);
    e.n_upstream = p.n;
    e.c_upstream = p.c;
    for (int i = 0; i + 1 < edges; i++)
        for (int s = 0; s <= SAMPLES; s++) {
            th_flow_eval(flow, i, edge[i] + (edge[i + 1] - edge[i]) * s / SAMPLES, &p);
            take(&p, &e);
        }
    if (th_flow_ends(flow).kind == TH_ENDS_OPEN)
        for (int side = 0; side < 2; side++) {
            th_flow_eval(flow, side == 0 ? -1 : edges - 1, edge[side == 0 ? 0 : edges - 1], &p);
            take(&p, &e);
        }
    return e;
}

static void set(th_check *check, bool known, double value)
{
    check->known = known && isfinite(value);
    check->value = check->known ? value : 0.0;
    check->holds = check->known && (check->above ? value >= check->limit : value <= check->limit);
}

/* The largest a n along the flow; 0 when it is not known. */
static double a_n(const th_flow *flow, const th_experiment *x, const extremes *e)
{
    const double q = x->transverse > 0.0 ? e->c_most * e->c_most / x->transverse : 0.0;

    if (th_flow_scattering(flow) > 0.0 && x->density > 0.0)
        return th_flow_scattering(flow) * x->density * e->n_most / e->n_upstream;
    return (q * q + sqrt(q * q * q * q + q * q)) / 2.0;
}

/* The largest kappa/c^2 of smooth horizons, whether one is sharp or there is none, and the largest
 * sound speed at a horizon. */
static double steepness(const th_flow *flow, bool *sharp, double *speed)
{
    int count;
    const th_horizon *horizon = th_flow_horizons(flow, &count);
    double most = 0.0;

    *sharp = count == 0;
    *speed = 0.0;
    for (int i = 0; i < count; i++) {
        *sharp = *sharp || horizon[i].sharp;
        *speed = fmax(*speed, horizon[i].speed);
        most = fmax(most, horizon[i].kappa / (horizon[i].speed * horizon[i].speed));
    }
    return most;
}

th_status th_validity_check(const th_flow *flow, const th_experiment *experiment,
                            th_check check[TH_CHECKS], th_error *err)
{
    const th_experiment *x = experiment;
    double undulation = 0.0, y, distance, scale, speed;
    const th_pocket *pocket;
    bool sharp;
    int pockets;
    extremes e;

    if (flow == NULL || x == NULL || check == NULL)
        return th_fail(err, TH_EINVAL, "validity: want a flow, an experiment and room");
    {
        const double given[] = {x->density,   x->transverse, x->temperature, x->hold,
                                x->loss_rate, x->resolution, x->contrast};

        for (size_t i = 0; i < sizeof given / sizeof *given; i++)
            if (!(given[i] >= 0.0) || !isfinite(given[i]))
                return th_fail(err, TH_EINVAL, "validity: quantity %zu is %g, want >= 0", i,
                               given[i]);
    }
    e = look(flow);
    pocket = th_flow_pockets(flow, &pockets);
    for (int i = 0; i < pockets; i++)
        undulation = fmax(undulation, pocket[i].undulation);
    distance = th_flow_horizon_distance(flow);
    y = a_n(flow, x, &e);
    scale = x->density / e.n_upstream; /* atoms per unit of the flow's density */
    for (int i = 0; i < TH_CHECKS; i++) {
        check[i] = rule[i];
        check[i].id = (th_check_id)i;
    }
    set(&check[TH_CHECK_STATE], y > 0.0 && !(th_flow_scattering(flow) > 0.0),
        sqrt(1.0 + 4.0 * y) - 1.0);
    set(&check[TH_CHECK_TRANSVERSE], y > 0.0, sqrt(1.0 + 4.0 * y));
    set(&check[TH_CHECK_MEAN_FIELD], x->density > 0.0, scale * e.per_healing);
    y = steepness(flow, &sharp, &speed);
    set(&check[TH_CHECK_KAPPA], !sharp, y);
    set(&check[TH_CHECK_RIPPLE], x->resolution > 0.0 && undulation > 0.0,
        2.0 * M_PI / (undulation * x->resolution));
    set(&check[TH_CHECK_HEALING], x->resolution > 0.0 && speed > 0.0,
        1.0 / (speed * x->resolution));
    set(&check[TH_CHECK_THERMAL], x->temperature > 0.0,
        x->temperature / (e.c_upstream * e.c_upstream));
    set(&check[TH_CHECK_COHERENCE], x->temperature > 0.0 && x->density > 0.0 && distance > 0.0,
        2.0 * scale * e.n_least / (x->temperature * distance));
    set(&check[TH_CHECK_LOSS], x->hold > 0.0 && x->loss_rate > 0.0,
        -expm1(-x->loss_rate * x->hold));
    set(&check[TH_CHECK_LINEAR], x->contrast > 0.0, x->contrast);
    return TH_OK;
}
