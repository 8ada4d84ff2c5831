/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The flow object: checks a callback against the rules of th_flow_spec and th_ends, owns it, and
 * evaluates it anywhere. Goes in: spec and ends. Comes out: an immutable th_flow. May call: the
 * other files of src/flow, status.
 *
 * Symbols: n density, v speed, c sound speed, J = n v, xi = 1/c healing length, mu chemical
 * potential, V external potential.
 * To add a quantity computed once per flow see src/flow/inside.h.
 * Proved by tests/test_flow.c. */
#include "inside.h"

#include <gsl/gsl_math.h>
#include <stdio.h>
#include <string.h>

/* n v may vary by this much, relatively: callbacks that interpolate measured data reach it easily
 * and the growth rates then still carry nine digits. */
#define FLUX_TOLERANCE 1e-9
/* The closed integral of v may miss 2 pi winding by this much, relatively; same reason. */
#define WINDING_TOLERANCE 1e-9
/* The edges must span the circumference to this much, relatively: a few roundings of a decimal. */
#define CIRCUMFERENCE_TOLERANCE 1e-12
/* Padding of walls, in shortest healing lengths: an element so thin would spoil all others. */
#define THINNEST_PADDING 1e-3
/* A state outside counts as uniform when its relative slope per healing length (and curvature per
 * healing length squared) is below this. A tail that decays like exp(-2 x/w) with w a few healing
 * lengths then misses its limit by about 1e-10, below the nine digits promised elsewhere. */
#define UNIFORM_TOLERANCE 1e-10

th_status th_ends_check(const th_ends *ends, th_error *err)
{
    switch (ends->kind) {
    case TH_ENDS_OPEN:
        return TH_OK;
    case TH_ENDS_RING:
        if (!(ends->circumference > 0) || !isfinite(ends->circumference))
            return th_fail_key(err, TH_EINVAL, "circumference",
                               "circumference = %.15g, want a finite length > 0",
                               ends->circumference);
        if (ends->winding < 1)
            return th_fail_key(err, TH_EINVAL, "winding", "winding = %d, want >= 1", ends->winding);
        return TH_OK;
    case TH_ENDS_WALLS:
        if (!(ends->padding >= 0) || !isfinite(ends->padding))
            return th_fail_key(err, TH_EINVAL, "padding",
                               "padding = %.15g, want a finite length >= 0", ends->padding);
        return TH_OK;
    }
    return th_fail_key(err, TH_EINVAL, "kind", "ends: kind %d is not open, ring or walls",
                       (int)ends->kind);
}

static th_status check_spec(const th_flow_spec *spec, th_error *err)
{
    if (spec->eval == NULL || spec->edge == NULL || spec->pieces < 1)
        return th_fail(err, TH_EINVAL,
                       "flow: %d pieces, want >= 1, a callback eval and pieces + 1 edges",
                       spec->pieces);
    for (int i = 0; i <= spec->pieces; i++) {
        if (!isfinite(spec->edge[i]))
            return th_fail(err, TH_EINVAL, "flow: edge %d = %g is not finite", i, spec->edge[i]);
        if (i > 0 && !(spec->edge[i] > spec->edge[i - 1]))
            return th_fail(err, TH_EINVAL,
                           "flow: edge %d = %.15g does not lie beyond edge %d = %.15g", i,
                           spec->edge[i], i - 1, spec->edge[i - 1]);
    }
    if (spec->features < 0 || (spec->features > 0 && spec->feature == NULL))
        return th_fail(err, TH_EINVAL, "flow: %d features, want >= 0 and their array",
                       spec->features);
    if (!(spec->scattering >= 0) || !isfinite(spec->scattering))
        return th_fail(err, TH_EINVAL, "flow: scattering length %g, want >= 0 and finite",
                       spec->scattering);
    if (spec->directions < 0 || (spec->directions > 0 && spec->vary == NULL))
        return th_fail(err, TH_EINVAL, "flow: %d directions, want >= 0 and a callback vary",
                       spec->directions);
    for (int i = 0; i < spec->features; i++)
        if (!isfinite(spec->feature[i].x) || !isfinite(spec->feature[i].width) ||
            !(spec->feature[i].width > 0))
            return th_fail(err, TH_EINVAL,
                           "flow: feature %d at x = %g has width %g, want both finite, width > 0",
                           i, spec->feature[i].x, spec->feature[i].width);
    return TH_OK;
}

/* Copy the spec's arrays, with the uniform padding of walls as pieces of their own. */
static th_status copy_pieces(th_flow *flow, const th_flow_spec *spec, th_error *err)
{
    bool padded = flow->ends.kind == TH_ENDS_WALLS && flow->ends.padding > 0;

    flow->shift = padded ? 1 : 0;
    flow->pieces = spec->pieces + 2 * flow->shift;
    flow->features = spec->features;
    flow->edge = th_take(flow->workspace, (size_t)flow->pieces + 1, sizeof *flow->edge);
    flow->uniform = th_take(flow->workspace, (size_t)flow->pieces, sizeof *flow->uniform);
    flow->feature = th_take(flow->workspace, (size_t)flow->features, sizeof *flow->feature);
    if (flow->edge == NULL || flow->uniform == NULL || flow->feature == NULL)
        return th_fail(err, TH_ENOMEM, "flow: %d pieces and %d features", flow->pieces,
                       flow->features);
    memcpy(flow->edge + flow->shift, spec->edge, ((size_t)spec->pieces + 1) * sizeof *flow->edge);
    for (int i = 0; i < spec->pieces; i++)
        flow->uniform[i + flow->shift] = spec->uniform != NULL && spec->uniform[i];
    if (spec->features > 0)
        memcpy(flow->feature, spec->feature, (size_t)spec->features * sizeof *flow->feature);
    if (padded) {
        flow->edge[0] = spec->edge[0] - flow->ends.padding;
        flow->edge[flow->pieces] = spec->edge[spec->pieces] + flow->ends.padding;
        flow->uniform[0] = flow->uniform[flow->pieces - 1] = true;
        if (!(flow->edge[0] < flow->edge[1]) ||
            !(flow->edge[flow->pieces - 1] < flow->edge[flow->pieces]))
            return th_fail_key(err, TH_EINVAL, "padding",
                               "padding = %.15g vanishes beside the flow's edges %.15g and %.15g",
                               flow->ends.padding, spec->edge[0], spec->edge[spec->pieces]);
    }
    return TH_OK;
}

/* The uniform state outside on one side, with its derivatives set to zero. */
static th_status read_end(th_flow *flow, const th_flow_spec *spec, int side, th_error *err)
{
    th_flow_point *p = &flow->end[side];
    double x = side == 0 ? spec->edge[0] : spec->edge[spec->pieces];
    double xi, slope;

    spec->eval(spec->ctx, side == 0 ? -1 : spec->pieces, x, p);
    xi = 1 / p->c;
    slope = fmax(fmax(fabs(p->dn / p->n), fabs(p->dv / p->v)), fabs(p->dc / p->c)) * xi;
    slope = fmax(slope, fabs(p->ddn / p->n) * xi * xi);
    /* A state that is not positive and finite is left to the check of all samples. */
    if (slope > UNIFORM_TOLERANCE)
        return th_fail(err, TH_EINVAL,
                       "flow: not uniform at its %s end x = %.9g: n, v or c varies by %.3g "
                       "(relative) in a healing length, want < %g",
                       side == 0 ? "left" : "right", x, slope, UNIFORM_TOLERANCE);
    p->dn = p->ddn = p->dv = p->dc = 0;
    return TH_OK;
}

/* Numbers whose squares and products are finite and not zero. */
static bool positive(double x)
{
    return x > 1e-75 && x < 1e75;
}

static th_status check_samples(const th_flow *flow, const th_flow_sample *sample, int count,
                               th_error *err)
{
    for (int i = 0; i < count; i++) {
        const th_flow_point *p = &sample[i].point;

        if (!positive(p->n) || !positive(p->v) || !positive(p->c))
            return th_fail(err, TH_EINVAL,
                           "flow: n = %g, v = %g, c = %g at x = %.9g, want all > 1e-75 and < 1e75",
                           p->n, p->v, p->c, sample[i].x);
        if (!isfinite(p->dn) || !isfinite(p->ddn) || !isfinite(p->dv) || !isfinite(p->dc))
            return th_fail(err, TH_EINVAL, "flow: a derivative at x = %.9g is not finite",
                           sample[i].x);
        if (!(fabs(p->n * p->v - flow->flux) <= FLUX_TOLERANCE * flow->flux))
            return th_fail(err, TH_EINVAL,
                           "flow: n v = %.12g at x = %.9g but %.12g at x = %.9g, want it constant "
                           "to %g",
                           p->n * p->v, sample[i].x, flow->flux, sample[0].x, FLUX_TOLERANCE);
    }
    return TH_OK;
}

static th_status check_ring(const th_flow *flow, const th_flow_sample *sample, int count,
                            th_error *err)
{
    double length = flow->edge[flow->pieces] - flow->edge[0];
    double circumference = flow->ends.circumference;
    double want = 2 * M_PI * flow->ends.winding, closed;

    if (!(fabs(length - circumference) <= CIRCUMFERENCE_TOLERANCE * circumference))
        return th_fail_key(err, TH_EINVAL, "circumference",
                           "circumference = %.15g but the flow's edges span %.15g", circumference,
                           length);
    closed = th_flow_integrate_speed(flow, sample, count);
    if (!(fabs(closed - want) <= WINDING_TOLERANCE * want))
        return th_fail_key(err, TH_EINVAL, "winding",
                           "the closed integral of v is %.12g = 2 pi x %.12g, want 2 pi x "
                           "winding = 2 pi x %d",
                           closed, closed / (2 * M_PI), flow->ends.winding);
    return TH_OK;
}

/* v^2/2 + h - (sqrt n)''/(2 sqrt n), with (sqrt n)''/(2 sqrt n) = n''/(4 n) - (n'/n)^2/8 and the
 * local chemical potential h counted from n = 0. Transverse: h = omega_perp (r - 1) and
 * c^2 = n dh/dn = omega_perp (r^2 - 1)/(2 r), r = sqrt(1 + 4 a n), so h = c^2 2 r/(1 + r). */
static double bernoulli(const th_flow *flow, const th_flow_point *p)
{
    double slope = p->dn / p->n, r = sqrt(1 + 4 * flow->scattering * p->n);

    return p->v * p->v / 2 + p->c * p->c * (2 * r / (1 + r)) -
           (p->ddn / (4 * p->n) - slope * slope / 8);
}

static double sound(const th_flow_point *p)
{
    return p->c;
}

static double largest_sound(const th_flow *flow, const th_flow_sample *sample, int count)
{
    int best = 0;

    for (int i = 1; i < count; i++)
        if (sample[i].point.c > sample[best].point.c)
            best = i;
    return th_flow_refine(flow, sample, count, best, sound);
}

th_status th_flow_create_in(const th_flow_spec *spec, const th_ends *ends, th_workspace *workspace,
                            th_flow **out, th_error *err)
{
    th_status st = TH_EBUG;
    th_flow *flow = NULL;
    th_flow_sample *sample = NULL;
    int count = 0;

    if (out != NULL)
        *out = NULL;
    if (spec == NULL || ends == NULL || out == NULL)
        return th_fail(err, TH_EINVAL, "flow: a spec, ends and a place for the result are needed");
    st = th_ends_check(ends, err);
    if (st != TH_OK)
        return st;
    st = check_spec(spec, err);
    if (st != TH_OK)
        return st;
    flow = th_take(workspace, 1, sizeof *flow);
    if (flow == NULL) {
        st = th_fail(err, TH_ENOMEM, "flow: the object");
        goto done;
    }
    flow->workspace = workspace;
    flow->ends = *ends;
    flow->eval = spec->eval;
    flow->ctx = spec->ctx;
    flow->scattering = spec->scattering;
    flow->directions = spec->directions;
    flow->vary = spec->vary;
    if (spec->note != NULL)
        (void)snprintf(flow->note, sizeof flow->note, "%s", spec->note);
    st = copy_pieces(flow, spec, err);
    if (st != TH_OK)
        goto done;
    for (int side = 0; side < 2 && ends->kind != TH_ENDS_RING; side++) {
        st = read_end(flow, spec, side, err);
        if (st != TH_OK)
            goto done;
    }
    st = th_flow_sample_all(flow, &sample, &count, err);
    if (st != TH_OK)
        goto done;
    flow->flux = sample[0].point.n * sample[0].point.v;
    st = check_samples(flow, sample, count, err);
    if (st != TH_OK)
        goto done;
    if (ends->kind == TH_ENDS_RING) {
        st = check_ring(flow, sample, count, err);
        if (st != TH_OK)
            goto done;
    }
    flow->mu = bernoulli(flow, &sample[0].point);
    flow->sound_max = largest_sound(flow, sample, count);
    if (flow->shift > 0 && ends->padding * flow->sound_max < THINNEST_PADDING) {
        st =
            th_fail_key(err, TH_EINVAL, "padding",
                        "padding = %.15g is less than %g of the shortest healing length, want 0 or "
                        "more than that",
                        ends->padding, THINNEST_PADDING);
        goto done;
    }
    st = th_flow_find_horizons(flow, sample, count, err);
    if (st != TH_OK)
        goto done;
    flow->release = spec->release; /* from here on the flow owns ctx */
    *out = flow;
    flow = NULL;
done:
    th_give(workspace, sample);
    th_flow_destroy(flow);
    return st;
}

th_status th_flow_create(const th_flow_spec *spec, const th_ends *ends, th_flow **out,
                         th_error *err)
{
    return th_flow_create_in(spec, ends, NULL, out, err);
}

void th_flow_destroy(th_flow *flow)
{
    th_workspace *workspace = flow != NULL ? flow->workspace : NULL;

    if (flow == NULL)
        return;
    if (flow->release != NULL)
        flow->release(flow->ctx);
    th_give(workspace, flow->owned);
    th_give(workspace, flow->edge);
    th_give(workspace, flow->uniform);
    th_give(workspace, flow->feature);
    th_give(workspace, flow->horizon);
    th_give(workspace, flow->pocket);
    th_give(workspace, flow);
}

th_workspace *th_flow_workspace(const th_flow *flow)
{
    return flow->workspace;
}

int th_flow_pieces(const th_flow *flow)
{
    return flow->pieces;
}

const double *th_flow_edges(const th_flow *flow, int *count)
{
    if (count != NULL)
        *count = flow->pieces + 1;
    return flow->edge;
}

bool th_flow_piece_uniform(const th_flow *flow, int piece)
{
    return piece < 0 || piece >= flow->pieces || flow->uniform[piece];
}

const th_feature *th_flow_features(const th_flow *flow, int *count)
{
    *count = flow->features;
    return flow->feature;
}

th_ends th_flow_ends(const th_flow *flow)
{
    return flow->ends;
}

double th_flow_flux(const th_flow *flow)
{
    return flow->flux;
}

const th_horizon *th_flow_horizons(const th_flow *flow, int *count)
{
    *count = flow->horizons;
    return flow->horizon;
}

const th_pocket *th_flow_pockets(const th_flow *flow, int *count)
{
    *count = flow->pockets;
    return flow->pocket;
}

const char *th_flow_note(const th_flow *flow)
{
    return flow->note;
}

double th_flow_scattering(const th_flow *flow)
{
    return flow->scattering;
}

double th_flow_sound_max(const th_flow *flow)
{
    return flow->sound_max;
}

int th_flow_directions(const th_flow *flow)
{
    return flow->directions;
}

th_status th_flow_vary(const th_flow *flow, int direction, double sigmas, th_flow **out,
                       th_error *err)
{
    if (out != NULL)
        *out = NULL;
    if (flow == NULL || out == NULL || direction < 0 || direction >= flow->directions)
        return th_fail(err, TH_EINVAL, "flow: direction %d of %d, and a place for the result",
                       direction, flow != NULL ? flow->directions : 0);
    return flow->vary(flow->ctx, direction, sigmas, &flow->ends, out, err);
}

void th_flow_eval(const th_flow *flow, int piece, double x, th_flow_point *point)
{
    if (flow->ends.kind != TH_ENDS_RING && piece < flow->shift)
        *point = flow->end[0];
    else if (flow->ends.kind != TH_ENDS_RING && piece >= flow->pieces - flow->shift)
        *point = flow->end[1];
    else
        flow->eval(flow->ctx, piece - flow->shift, x, point);
}

void th_flow_at(const th_flow *flow, double x, th_flow_point *point)
{
    const double *edge = flow->edge;
    double first = edge[0], last = edge[flow->pieces];
    int low = 0, high = flow->pieces;
    bool open = flow->ends.kind == TH_ENDS_OPEN;

    if (flow->ends.kind == TH_ENDS_RING && (x < first || x >= last)) {
        x -= (last - first) * floor((x - first) / (last - first));
        x = x >= last ? first : fmax(x, first); /* rounding of the wrap */
    }
    if (x < first) {
        th_flow_eval(flow, open ? -1 : 0, first, point);
        return;
    }
    if (x >= last) {
        th_flow_eval(flow, open ? flow->pieces : flow->pieces - 1, last, point);
        return;
    }
    while (high - low > 1) { /* edge[low] <= x < edge[high] */
        int middle = low + (high - low) / 2;

        if (x < edge[middle])
            high = middle;
        else
            low = middle;
    }
    th_flow_eval(flow, low, x, point);
}

double th_flow_potential(const th_flow *flow, const th_flow_point *point)
{
    return flow->mu - bernoulli(flow, point);
}

double th_flow_horizon_distance(const th_flow *flow)
{
    /* Horizons alternate: the first black-hole horizon opens the first pocket and the last
     * white-hole horizon closes the last one, on a ring beyond the seam. */
    if (flow->pockets == 0)
        return 0;
    return flow->pocket[flow->pockets - 1].right - flow->pocket[0].left;
}
