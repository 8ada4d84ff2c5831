/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Steps of the matching function. In: a flow. Out: th_steps. Calls flow, dispersion.
 * On each step 1/n, n and n c^2 are interpolated at Chebyshev points, cut where the Chebyshev
 * coefficients have died, and rewritten in powers of t. Steps are so short that the coefficients
 * fall by a factor of four or more a degree; then the rewriting loses nothing.
 * Proof: tests/test_matching.c. */
#include "matching/steps.h"

#include <float.h>
#include <gsl/gsl_math.h>
#include <string.h>

#include "dispersion.h"
#include "flow/workspace.h"

/* Degree of interpolation, degree by which the coefficients must have died, and degree from which
 * on they are noise when they have. */
enum { DEGREE = TH_STEP_TERMS - 1, DEAD_BY = 20, NOISE_FROM = 24 };
/* Coefficients below this share of the largest value have died, or below this many times the
 * noise. Rounding of x is noise too: eps |x| times the slope, more than rounding of the value at
 * steep edges far from x = 0. More noise than `noisiest` is no rounding. A slow series does not
 * pass for noise: where it falls by a factor q < 4 a degree, it is still q^4 noise at DEAD_BY. */
static const double dead = 4.0 * DBL_EPSILON, above_noise = 4.0, noisiest = 1e-12;
/* Largest |k| half: the series of e^{ikx} then loses at most a factor e^3 to cancellation. */
static const double usual_kh = 3.0, fine_kh = 2.0;
/* The same at omega = i c0^2, farther than any mode grows: counts need a few digits there, and
 * e^20 of cancellation leaves seven. */
static const double far_kh = 10.0;

/* Steps of a flow at most, equal ones of uniform pieces counted each. Measured on step pockets: gap
 * 400 (600 upstream healing lengths, 220 growing modes) takes 5 s to certify. */
enum { STEPS_MAX = 500 };

typedef struct {
    const th_flow *flow;
    th_steps *out;
    long total; /* steps so far */
    double omega_top, kh;
    double node[DEGREE + 1];              /* Chebyshev points */
    double wave[DEGREE + 1][DEGREE + 1];  /* wave[j][q] = T_j at node q */
    double power[DEGREE + 1][DEGREE + 1]; /* power[j][i]: coefficient of t^i in T_j */
} cutter;

static void prepare(cutter *c)
{
    const int turn = 4 * (DEGREE + 1); /* angles are whole parts of a turn: reduce them exactly */

    for (int q = 0; q <= DEGREE; q++)
        for (int j = 0; j <= DEGREE; j++)
            c->wave[j][q] = cos(2.0 * M_PI * (j * (2 * q + 1) % turn) / turn);
    for (int q = 0; q <= DEGREE; q++)
        c->node[q] = c->wave[1][q];
    c->power[0][0] = 1.0;
    c->power[1][1] = 1.0;
    for (int j = 2; j <= DEGREE; j++)
        for (int i = 0; i <= j; i++)
            c->power[j][i] = (i > 0 ? 2.0 * c->power[j - 1][i - 1] : 0.0) - c->power[j - 2][i];
}

/* Values at the nodes -> powers of t; number of terms, 0 when the series has not died. */
static int expand(const cutter *c, const double *value, double *power)
{
    double chebyshev[DEGREE + 1], scale = 0.0, noise = 0.0;
    int terms = 0;

    for (int j = 0; j <= DEGREE; j++) {
        chebyshev[j] = 0.0;
        for (int q = 0; q <= DEGREE; q++)
            chebyshev[j] += value[q] * c->wave[j][q];
        chebyshev[j] *= (j > 0 ? 2.0 : 1.0) / (DEGREE + 1);
        scale = fmax(scale, fabs(value[j]));
    }
    for (int j = NOISE_FROM; j <= DEGREE; j++)
        noise = fmax(noise, fabs(chebyshev[j]));
    for (int j = 0; j <= DEGREE; j++)
        if (fabs(chebyshev[j]) > fmax(dead * scale, above_noise * noise))
            terms = j + 1;
    if (terms > DEAD_BY || noise > noisiest * scale)
        return 0;
    memset(power, 0, TH_STEP_TERMS * sizeof *power);
    for (int j = 0; j < terms; j++)
        for (int i = 0; i <= j; i++)
            power[i] += chebyshev[j] * c->power[j][i];
    return terms > 0 ? terms : 1;
}

/* Largest half length of a step at a place, by its wave numbers, inverted. */
static th_status shortness(const cutter *c, const th_flow_point *at, double *shortest,
                           th_error *err)
{
    const double c0 = c->out->speed0;
    const double complex omega[2] = {c->omega_top, I * c0 * c0};
    const double kh[2] = {c->kh, far_kh};

    for (int f = 0; f < 2; f++) {
        double complex k[4];
        th_status st = th_dispersion_roots(omega[f], at->v, at->c, k, err);

        if (st != TH_OK)
            return st;
        for (int i = 0; i < 4; i++)
            *shortest = fmax(*shortest, cabs(k[i]) / kh[f]);
    }
    return TH_OK;
}

/* Try a step; *yes false when it is too long. */
static th_status attempt(const cutter *c, int piece, double left, double length, th_step *step,
                         bool *yes, th_error *err)
{
    double inverse[DEGREE + 1], density[DEGREE + 1], pressure[DEGREE + 1], shortest = 0.0;
    const double n0 = c->out->density0, c0 = c->out->speed0;
    const bool uniform = piece < th_flow_pieces(c->flow) && th_flow_piece_uniform(c->flow, piece);

    for (int q = 0; q <= DEGREE; q++) {
        th_flow_point at;
        th_status st;

        th_flow_eval(c->flow, piece, left + 0.5 * length * (1.0 + c->node[q]), &at);
        inverse[q] = n0 / at.n;
        density[q] = at.n / n0;
        pressure[q] = density[q] * (at.c / c0) * (at.c / c0);
        if (q > 0 && (uniform || q % 5 != 0))
            continue; /* wave numbers vary no faster than the flow: a few places do */
        st = shortness(c, &at, &shortest, err);
        if (st != TH_OK)
            return st;
    }
    *yes = false;
    step->half = 0.5 * length * c0;
    step->repeat = 1;
    if (uniform) { /* any number of equal steps, one transfer matrix */
        step->repeat = 1 + (int)fmin(1e6, 0.5 * length * shortest);
        step->half /= step->repeat;
    } else if (0.5 * length * shortest > 1.0) {
        return TH_OK;
    }
    step->inverse_terms = expand(c, inverse, step->inverse);
    step->density_terms = expand(c, density, step->density);
    step->pressure_terms = expand(c, pressure, step->pressure);
    *yes = step->inverse_terms > 0 && step->density_terms > 0 && step->pressure_terms > 0;
    return TH_OK;
}

static th_status push(th_steps *s, const th_step *step, th_error *err)
{
    if (s->count == s->room) {
        int room = s->room > 0 ? 2 * s->room : 32;
        th_step *grown = th_stretch(s->workspace, s->step, (size_t)room * sizeof *grown);

        if (grown == NULL)
            return th_fail(err, TH_ENOMEM, "matching: %d steps", room);
        s->step = grown;
        s->room = room;
    }
    s->step[s->count++] = *step;
    return TH_OK;
}

/* A narrow feature must not slip between the nodes of a long step. */
static double allowed(const cutter *c, double left, double length)
{
    const th_feature *feature;
    int features;

    feature = th_flow_features(c->flow, &features);
    for (int f = 0; f < features; f++) {
        const double away = fmax(0.0, fmax(left - feature[f].x, feature[f].x - left - length));

        while (length > 3.0 * fmax(feature[f].width, away) && length > 0.0)
            length *= 0.8;
    }
    return length;
}

static th_status cut(cutter *c, int piece, double left, double right, th_error *err)
{
    const double shrink = 0.8;
    double x = left, length = right - left;
    th_step step;

    while (x < right) {
        bool yes = false, last = false;
        th_status st = TH_OK;

        length = fmin(right - x, 2.5 * length);
        if (!th_flow_piece_uniform(c->flow, piece))
            length = allowed(c, x, length);
        while (st == TH_OK && !yes) {
            if (!(length > 64.0 * DBL_EPSILON * fmax(fabs(left), fabs(right))))
                return th_fail(
                    err, TH_ECONVERGE,
                    "matching: the flow at x = %g varies too fast to be expanded; an edge "
                    "so narrow is a jump",
                    x);
            last = right - x - length < 1e-9 * length;
            if (last)
                length = right - x;
            st = attempt(c, piece, x, length, &step, &yes, err);
            if (!yes)
                length *= shrink;
        }
        c->total += step.repeat;
        if (st == TH_OK && c->total > STEPS_MAX)
            return th_fail(
                err, TH_EUNDECIDED,
                "matching: the flow is too long for its shortest waves, which need more "
                "than %d steps; a shorter flow (pocket, edges, padding, circumference) or "
                "lower sound speeds need fewer",
                STEPS_MAX);
        if (st == TH_OK)
            st = push(c->out, &step, err);
        if (st != TH_OK)
            return st;
        x = last ? right : x + length; /* x + (right - x) may round to less than right */
    }
    return TH_OK;
}

th_status th_steps_create(const th_flow *flow, double omega_top, th_matching_grain grain,
                          double match_at, th_steps *out, th_error *err)
{
    cutter c = {.flow = flow,
                .out = out,
                .omega_top = omega_top,
                .kh = grain == TH_MATCHING_FINE ? fine_kh : usual_kh};
    th_status st = TH_OK;
    const double *edge;
    th_flow_point at;
    int edges;

    *out = (th_steps){.workspace = th_flow_workspace(flow)};
    prepare(&c);
    edge = th_flow_edges(flow, &edges);
    th_flow_eval(flow, 0, edge[0], &at);
    out->speed0 = th_flow_sound_max(flow);
    out->density0 = at.n;
    out->flux = th_flow_flux(flow) / (out->speed0 * out->density0);
    out->match = -1;
    for (int i = 0; st == TH_OK && i + 1 < edges; i++) {
        const bool here = match_at > edge[i] && match_at < edge[i + 1];

        if (match_at <= edge[i] && out->match < 0)
            out->match = out->count;
        st = cut(&c, i, edge[i], here ? match_at : edge[i + 1], err);
        if (st != TH_OK || !here)
            continue;
        out->match = out->count;
        st = cut(&c, i, match_at, edge[i + 1], err);
    }
    if (out->match < 0)
        out->match = out->count;
    if (st != TH_OK)
        th_steps_clear(out);
    return st;
}

void th_steps_clear(th_steps *steps)
{
    th_give(steps->workspace, steps->step);
    *steps = (th_steps){0};
}
