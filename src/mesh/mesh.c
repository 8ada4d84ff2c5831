/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Elements for a flow's fluctuations. In: a flow, an accuracy, a band of frequencies. Out: a
 * row of elements with the flow sampled on their nodes. Calls flow, dispersion, gll.
 * Symbols: p order, h length, k wave number, theta angle of the complex scaling, y distance
 * along the ray. A new kind of end is one more branch in add_end. Proof: tests/test_mesh.c. */
#include "mesh/mesh.h"

#include <float.h>
#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "alloc.h"
#include "dispersion.h"

/* Outside elements grow by this factor: measured on step flows with p = 14, factors 2 and 3 both
 * leave 1e-13, a factor of 4 leaves 1e-11 at theta = 0.8. */
static const double growth_factor = 3.0;
/* An element may be this many times longer than the width of a feature or the distance to it.
 * This only keeps a narrow feature from slipping between nodes; the test of the Legendre
 * series decides. */
static const double feature_ratio = 3.0;
/* Decay wanted at the far end of the outside elements, in e-foldings: e^-36 is rounding. */
static const double efoldings = 36.0;
/* Absorbing layer: its onset spans this many radians of the static undulation, its full rate is
 * this multiple of omega_top, and waves then travel on for this many e-foldings. Measured on
 * single step horizons: an onset half as long leaves spurious growth of 9e-4, this one 1e-6. */
static const double onset_radians = 70.0;
static const double absorbing_rate = 4.0;
static const double absorbed = 10.0;

typedef struct {
    const th_flow *flow;
    const th_mesh_options *options;
    th_mesh *mesh;
    double reach_kh;    /* largest (wave number x length) of an element */
    double k_floor;     /* wave number that every element must resolve, whatever the flow */
    th_feature *source; /* [sources] where evanescent waves start */
    int sources;
    int room; /* capacity of mesh->element */
} builder;

/* Largest wave numbers at omega_top at a place: of all waves, and of those that travel. */
typedef struct {
    double all, travelling;
} wave_numbers;

static th_status push(builder *b, int piece, double left, double length, double complex stretch,
                      th_error *err)
{
    th_mesh *m = b->mesh;

    if (m->elements >= TH_MESH_ELEMENTS_MAX)
        return th_fail(err, TH_EUNDECIDED,
                       "mesh: more than %d elements are needed to resolve frequencies up to %g",
                       TH_MESH_ELEMENTS_MAX, b->options->omega_top);
    if (m->elements == b->room) {
        int room = b->room > 0 ? 2 * b->room : 64;
        th_element *grown = realloc(m->element, (size_t)room * sizeof *grown);

        if (grown == NULL)
            return th_fail(err, TH_ENOMEM, "mesh: %d elements", room);
        m->element = grown;
        b->room = room;
    }
    m->element[m->elements++] = (th_element){piece, left, length, stretch};
    return TH_OK;
}

static th_status waves(const builder *b, const th_flow_point *at, wave_numbers *k, th_error *err)
{
    double complex root[4];
    th_status st = th_dispersion_roots(b->options->omega_top, at->v, at->c, root, err);

    k->all = fmax(k->all, b->k_floor);
    k->travelling = fmax(k->travelling, b->k_floor);
    for (int i = 0; st == TH_OK && i < 4; i++) {
        k->all = fmax(k->all, cabs(root[i]));
        if (fabs(cimag(root[i])) < fabs(creal(root[i])))
            k->travelling = fmax(k->travelling, cabs(root[i]));
    }
    return st;
}

/* Does the flow jump or kink at an edge? An edge where it does neither starts no waves. */
static bool rough(const th_flow *flow, int piece, double edge)
{
    const double smooth = 1e-8; /* relative; a shape's tails end at rounding, far below this */
    const bool ring = th_flow_ends(flow).kind == TH_ENDS_RING;
    const int pieces = th_flow_pieces(flow);
    th_flow_point l, r;
    int edges;

    if (th_flow_ends(flow).kind == TH_ENDS_WALLS && (piece == 0 || piece == pieces))
        return true;
    if (ring && (piece == 0 || piece == pieces)) {
        const double *ends = th_flow_edges(flow, &edges);

        th_flow_eval(flow, pieces - 1, ends[edges - 1], &l);
        th_flow_eval(flow, 0, ends[0], &r);
    } else {
        th_flow_eval(flow, piece - 1, edge, &l);
        th_flow_eval(flow, piece, edge, &r);
    }
    return fabs(l.n - r.n) > smooth * l.n || fabs(l.c - r.c) > smooth * l.c ||
           fabs(l.dn - r.dn) > smooth * l.n * l.c || fabs(l.dc - r.dc) > smooth * l.c * l.c;
}

/* Evanescent waves start at jumps and kinks, at features and at horizons. */
static th_status find_sources(builder *b, th_error *err)
{
    const th_feature *feature;
    const th_horizon *horizon;
    const double *edge;
    int features, horizons, edges;

    feature = th_flow_features(b->flow, &features);
    horizon = th_flow_horizons(b->flow, &horizons);
    edge = th_flow_edges(b->flow, &edges);
    b->source = th_alloc((size_t)(features + horizons + edges), sizeof *b->source);
    if (b->source == NULL)
        return th_fail(err, TH_ENOMEM, "mesh: %d sources", features + horizons + edges);
    for (int i = 0; i < features; i++)
        b->source[b->sources++] = feature[i];
    for (int i = 0; i < horizons; i++)
        b->source[b->sources++] = (th_feature){horizon[i].x, 0.0};
    for (int i = 0; i < edges; i++)
        if (rough(b->flow, i, edge[i]))
            b->source[b->sources++] = (th_feature){edge[i], 0.0};
    return TH_OK;
}

/* Distance of an element to the nearest source, 0 when it holds one. */
static double clearance(const builder *b, double left, double length)
{
    double nearest = HUGE_VAL;

    for (int i = 0; i < b->sources; i++) {
        const double x = b->source[i].x, width = b->source[i].width;

        nearest = fmin(nearest, fmax(left - (x + width), (x - width) - (left + length)));
    }
    return fmax(0.0, nearest);
}

/* Has the Legendre series of the nodal values died out? Two neighbouring coefficients are
 * tested because every other one vanishes on a symmetric element. The error of an eigenvalue
 * goes with the square of the interpolation error of smooth coefficients; the test is on a
 * power in between, as measured on tanh edges. */
static bool series_dead(const th_gll *rule, const double *value, double accuracy)
{
    const int p = rule->order;
    const double wanted = pow(accuracy, 0.75);
    double scale = 0.0, tail = 0.0;

    for (int j = 0; j <= p; j++)
        scale = fmax(scale, fabs(value[j]));
    for (int l = p - 1; l <= p; l++) {
        double c = 0.0;

        for (int j = 0; j <= p; j++)
            c += rule->to_legendre[l][j] * value[j];
        tail = fmax(tail, fabs(c));
    }
    return tail <= wanted * scale;
}

static th_status resolved(const builder *b, int piece, double left, double length, bool *yes,
                          th_error *err)
{
    const th_gll *rule = &b->mesh->rule;
    const th_feature *feature;
    int features;
    double n[TH_GLL_ORDER_MAX + 1], v[TH_GLL_ORDER_MAX + 1], c2[TH_GLL_ORDER_MAX + 1];
    wave_numbers k = {0};
    bool subsonic = true, short_enough;

    *yes = false;
    feature = th_flow_features(b->flow, &features);
    for (int f = 0; f < features; f++) {
        double right = left + length;
        double away = fmax(0.0, fmax(left - feature[f].x, feature[f].x - right));

        if (length > feature_ratio * fmax(feature[f].width, away))
            return TH_OK;
    }
    for (int j = 0; j <= rule->order; j++) {
        th_flow_point at;
        th_status st;

        th_flow_eval(b->flow, piece, left + 0.5 * length * (rule->node[j] + 1.0), &at);
        n[j] = at.n;
        v[j] = at.v;
        c2[j] = at.c * at.c;
        subsonic = subsonic && at.v < at.c;
        st = waves(b, &at, &k, err);
        if (st != TH_OK)
            return st;
    }
    /* v = J/n is tested beside n: its poles are those of the equations. Away from sources an
     * evanescent wave has died by the time elements are long. */
    short_enough =
        k.all * length <= b->reach_kh ||
        (subsonic && length <= clearance(b, left, length) && k.travelling * length <= b->reach_kh);
    *yes = short_enough && series_dead(rule, n, b->options->accuracy) &&
           series_dead(rule, v, b->options->accuracy) &&
           series_dead(rule, c2, b->options->accuracy);
    return TH_OK;
}

/* March from left to right, each element as long as the rules allow to within a few percent. */
static th_status add_piece(builder *b, int piece, double left, double right, th_error *err)
{
    const double shrink = 0.85; /* trial lengths of one element */
    const double even = 1.7;    /* a rest shorter than this many elements is halved: no slivers */
    double x = left, length = right - left;

    while (x < right) {
        bool yes = false;
        th_status st = TH_OK;

        for (length = fmin(right - x, 3.0 * length); st == TH_OK && !yes; length *= shrink) {
            st = resolved(b, piece, x, length, &yes, err);
            if (!(length > 64.0 * DBL_EPSILON * fmax(fabs(left), fabs(right))))
                return th_fail(err, TH_ECONVERGE,
                               "mesh: the flow at x = %g varies too fast to be resolved", x);
            if (yes)
                break;
        }
        if (st == TH_OK && x + length < right && x + even * length > right)
            length = 0.5 * (right - x);
        if (st == TH_OK)
            st = push(b, piece, x, length, 1.0, err);
        if (st != TH_OK)
            return st;
        x += length;
        if (right - x < 1e-9 * length) { /* rounding: the element ends at the edge itself */
            b->mesh->element[b->mesh->elements - 1].length += right - x;
            x = right;
        }
    }
    return TH_OK;
}

static double onset_span(const builder *b, const th_flow_point *at)
{
    const double undulation = 2.0 * sqrt((at->v - at->c) * (at->v + at->c));

    return b->options->layer * onset_radians / fmax(undulation, sqrt(b->options->omega_top));
}

/* Lengths of the outside elements of an open end, nearest first. */
static th_status end_lengths(const builder *b, double edge, const th_flow_point *at, double *length,
                             int cap, int *count, th_error *err)
{
    const th_mesh_options *o = b->options;
    wave_numbers k = {0};
    double h, reached = 0.0, reach;
    th_status st = waves(b, at, &k, err);

    *count = 0;
    if (st != TH_OK)
        return st;
    h = b->reach_kh / k.all;
    if (at->v < at->c) { /* slowest decay: k = omega/(c + v) with arg omega = 0 */
        h = fmax(h, fmin(b->reach_kh / k.travelling, clearance(b, edge, 0.0)));
        reach = efoldings * (at->c + at->v) / (o->omega_low * sin(o->angle));
    } else {
        reach = onset_span(b, at) + absorbed * (at->c + at->v) / (absorbing_rate * o->omega_top);
    }
    while (reached < reach) {
        if (*count == cap)
            return th_fail(err, TH_EUNDECIDED,
                           "mesh: more than %d elements are needed outside the flow to resolve "
                           "frequencies from %g to %g",
                           cap, o->omega_low, o->omega_top);
        length[(*count)++] = h;
        reached += h;
        if (at->v < at->c)
            h *= growth_factor;
    }
    return TH_OK;
}

static th_status add_end(builder *b, int side, double edge, th_error *err)
{
    enum { cap = TH_MESH_ELEMENTS_MAX / 4 };
    const int piece = side < 0 ? -1 : th_flow_pieces(b->flow);
    double length[cap];
    double at_edge = 0.0, total = 0.0;
    th_flow_point at;
    double complex stretch;
    int count;
    th_status st;

    th_flow_eval(b->flow, piece, edge, &at);
    stretch = at.v < at.c ? cexp(I * b->options->angle) : 1.0;
    st = end_lengths(b, edge, &at, length, cap, &count, err);
    if (st != TH_OK)
        return st;
    if (at.v >= at.c)
        b->mesh->absorbing = true;
    for (int i = 0; i < count; i++)
        total += length[i];
    at_edge = side < 0 ? edge - total : edge;
    for (int i = 0; st == TH_OK && i < count; i++) {
        double h = length[side < 0 ? count - 1 - i : i];

        st = push(b, piece, at_edge, h, stretch, err);
        at_edge += h;
    }
    return st;
}

/* Smooth onset from 0 at t = 0 to 1 at t = 1 with three vanishing derivatives at both ends. */
static double onset(double t)
{
    t = fmin(1.0, fmax(0.0, t));
    return t * t * t * t * (35.0 + t * (-84.0 + t * (70.0 - 20.0 * t)));
}

static th_status sample(builder *b, th_error *err)
{
    th_mesh *m = b->mesh;
    const int nodes = m->rule.order + 1;
    const size_t total = (size_t)m->elements * (size_t)nodes;
    const double *edge;
    int edges;

    m->x = th_alloc(total, sizeof *m->x);
    m->density = th_alloc(total, sizeof *m->density);
    m->sound2 = th_alloc(total, sizeof *m->sound2);
    m->damping = th_alloc(total, sizeof *m->damping);
    if (m->x == NULL || m->density == NULL || m->sound2 == NULL || m->damping == NULL)
        return th_fail(err, TH_ENOMEM, "mesh: %zu nodes", total);
    edge = th_flow_edges(b->flow, &edges);
    for (int e = 0; e < m->elements; e++) {
        const th_element *el = &m->element[e];
        const bool outside = el->piece < 0 || el->piece >= edges - 1;

        for (int j = 0; j < nodes; j++) {
            const size_t at = (size_t)e * (size_t)nodes + (size_t)j;
            th_flow_point point;

            m->x[at] = el->left + 0.5 * el->length * (m->rule.node[j] + 1.0);
            th_flow_eval(b->flow, el->piece, m->x[at], &point);
            m->density[at] = point.n;
            m->sound2[at] = point.c * point.c;
            if (outside && point.v >= point.c) {
                double away = el->piece < 0 ? edge[0] - m->x[at] : m->x[at] - edge[edges - 1];

                m->damping[at] =
                    absorbing_rate * b->options->omega_top * onset(away / onset_span(b, &point));
            }
        }
    }
    return TH_OK;
}

static th_status check(const th_flow *flow, const th_mesh_options *o, th_error *err)
{
    if (flow == NULL || o == NULL)
        return th_fail(err, TH_EINVAL, "mesh: want a flow and options");
    if (o->order < 4 || o->order > TH_GLL_ORDER_MAX)
        return th_fail(err, TH_EINVAL, "mesh: order = %d, want 4 to %d", o->order,
                       TH_GLL_ORDER_MAX);
    if (!(o->accuracy >= 1e-15 && o->accuracy <= 1e-2))
        return th_fail(err, TH_EINVAL, "mesh: accuracy = %g, want 1e-15 to 1e-2", o->accuracy);
    if (!(o->omega_top > 0.0 && isfinite(o->omega_top)))
        return th_fail(err, TH_EINVAL, "mesh: omega_top = %g, want > 0", o->omega_top);
    if (th_flow_ends(flow).kind != TH_ENDS_OPEN)
        return TH_OK;
    if (!(o->omega_low > 0.0 && o->omega_low < o->omega_top))
        return th_fail(err, TH_EINVAL, "mesh: omega_low = %g, want > 0 and below omega_top = %g",
                       o->omega_low, o->omega_top);
    if (!(o->layer > 0.0 && o->layer < 100.0))
        return th_fail(err, TH_EINVAL, "mesh: layer = %g, want > 0 and < 100", o->layer);
    if (!(o->angle >= 0.3 && o->angle <= 0.78))
        return th_fail(err, TH_EINVAL, "mesh: angle = %g, want 0.3 to 0.78", o->angle);
    return TH_OK;
}

th_status th_mesh_create(const th_flow *flow, const th_mesh_options *options, th_mesh **out,
                         th_error *err)
{
    th_status st = TH_EBUG;
    builder b = {.flow = flow, .options = options};
    const double *edge;
    int edges;

    if (out == NULL)
        return th_fail(err, TH_EINVAL, "mesh: want a place for the result");
    *out = NULL;
    st = check(flow, options, err);
    if (st != TH_OK)
        return st;
    b.mesh = th_alloc(1, sizeof *b.mesh);
    if (b.mesh == NULL)
        return th_fail(err, TH_ENOMEM, "mesh: one object");
    st = th_gll_make(options->order, &b.mesh->rule, err);
    if (st != TH_OK)
        goto done;
    b.mesh->ends = th_flow_ends(flow).kind;
    b.mesh->flux = th_flow_flux(flow);
    b.mesh->angle = options->angle;
    /* A wave e^{ikx} on an element has Legendre coefficients that fall as (e k h/(4 p))^p; an
     * eigenvalue's error is that squared. Nine tenths keep a margin. */
    b.reach_kh = 0.9 * (4.0 * options->order / M_E) * pow(options->accuracy, 0.5 / options->order);
    st = find_sources(&b, err);
    if (st != TH_OK)
        goto done;
    edge = th_flow_edges(flow, &edges);
    if (b.mesh->ends == TH_ENDS_RING) /* three elements or more, so that no two meet twice */
        b.k_floor = 3.0 * b.reach_kh / (edge[edges - 1] - edge[0]);
    if (b.mesh->ends == TH_ENDS_OPEN) {
        st = add_end(&b, -1, edge[0], err);
        if (st != TH_OK)
            goto done;
    }
    b.mesh->first_inside = b.mesh->elements;
    for (int i = 0; i + 1 < edges; i++) {
        st = add_piece(&b, i, edge[i], edge[i + 1], err);
        if (st != TH_OK)
            goto done;
    }
    b.mesh->last_inside = b.mesh->elements - 1;
    if (b.mesh->ends == TH_ENDS_OPEN) {
        st = add_end(&b, +1, edge[edges - 1], err);
        if (st != TH_OK)
            goto done;
    }
    st = sample(&b, err);
done:
    free(b.source);
    if (st == TH_OK)
        *out = b.mesh;
    else
        th_mesh_destroy(b.mesh);
    return st;
}

void th_mesh_destroy(th_mesh *mesh)
{
    if (mesh == NULL)
        return;
    free(mesh->element);
    free(mesh->x);
    free(mesh->density);
    free(mesh->sound2);
    free(mesh->damping);
    free(mesh);
}
