/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Norm, share of the pockets and node count of a mode. In: an eigenvector on a mesh. Out:
 * th_mode_shape. Calls mesh, operator, dispersion, flow.
 * Symbols: eta, phi density and phase fluctuation; energy 1/2 n (|phi'|^2 + c^2 |eta|^2 +
 *   |eta'|^2/4) per length; norm 2 n Im(eta phi*) per length.
 * Outside an open end the field is the sum of the two outgoing waves of the uniform flow, taken
 * along the real axis (the mesh only knows it along the rotated ray). Proof: tests/test_modes.c. */
#include "modes/shape.h"

#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "alloc.h"
#include "dispersion.h"

typedef struct {
    double energy, norm, size; /* size: 2 Int n |eta phi|, the largest |norm| possible */
} sums;

typedef struct {
    const th_flow *flow;
    const th_mesh *mesh;
    double complex omega;
    double complex *eta, *phi;             /* [elements][order + 1] */
    double complex *eta_slope, *phi_slope; /* [elements][order + 1] */
    double from, to;                       /* window of integration */
} field;

/* The fields at one point. */
typedef struct {
    double complex eta, phi, eta_slope, phi_slope;
} sample;

static double complex interpolate(const th_gll *rule, const double complex *value, double z)
{
    double re[TH_GLL_ORDER_MAX + 1], im[TH_GLL_ORDER_MAX + 1];

    for (int j = 0; j <= rule->order; j++) {
        re[j] = creal(value[j]);
        im[j] = cimag(value[j]);
    }
    return th_gll_interpolate(rule, re, z) + I * th_gll_interpolate(rule, im, z);
}

static sample at_point(const field *f, int e, double x)
{
    const th_element *el = &f->mesh->element[e];
    const th_gll *rule = &f->mesh->rule;
    const size_t at = (size_t)e * (size_t)(rule->order + 1);
    const double z = fmax(-1.0, fmin(1.0, 2.0 * (x - el->left) / el->length - 1.0));
    sample s = {interpolate(rule, f->eta + at, z), interpolate(rule, f->phi + at, z),
                interpolate(rule, f->eta_slope + at, z), interpolate(rule, f->phi_slope + at, z)};

    return s;
}

static void accumulate(sums *total, const sample *s, double n, double c, double weight)
{
    const double eta = cabs(s->eta), phi = cabs(s->phi);
    const double energy = cabs(s->phi_slope) * cabs(s->phi_slope) + c * c * eta * eta +
                          0.25 * cabs(s->eta_slope) * cabs(s->eta_slope);

    total->energy += 0.5 * weight * n * energy;
    total->norm += 2.0 * weight * n * cimag(s->eta * conj(s->phi));
    total->size += 2.0 * weight * n * eta * phi;
}

/* Integrals over [from, to] within one inside element. */
static void add_part(const field *f, int e, double from, double to, sums *total)
{
    const th_gll *rule = &f->mesh->rule;

    for (int q = 0; q <= rule->order; q++) {
        const double x = from + 0.5 * (to - from) * (rule->node[q] + 1.0);
        const sample s = at_point(f, e, x);
        th_flow_point point;

        th_flow_eval(f->flow, f->mesh->element[e].piece, x, &point);
        accumulate(total, &s, point.n, point.c, 0.5 * (to - from) * rule->weight[q]);
    }
}

static void add_stretch(const field *f, double from, double to, sums *total)
{
    for (int e = f->mesh->first_inside; e <= f->mesh->last_inside; e++) {
        const th_element *el = &f->mesh->element[e];
        const double low = fmax(from, el->left), high = fmin(to, el->left + el->length);

        if (high > low)
            add_part(f, e, low, high, total);
    }
}

/* The mode beyond an open end, side -1 or +1, over a length: two outgoing waves matched to eta and
 * phi at the edge. A wave of wave number k has (eta, phi) = (k^2, -i (omega - v k)). */
static th_status add_outside(const field *f, int side, double edge, double length, sums *total,
                             th_error *err)
{
    const th_mesh *m = f->mesh;
    const int e = side < 0 ? m->first_inside : m->last_inside;
    const int piece = side < 0 ? -1 : th_flow_pieces(f->flow);
    const sample s = at_point(f, e, edge);
    const double complex turn = cexp(I * m->angle);
    double complex k[4], out[2] = {0}, amplitude[2], p[2], determinant;
    th_flow_point point;
    int found = 0, parts;
    th_status st;

    th_flow_eval(f->flow, piece, edge, &point);
    if (length <= 0.0 || point.v >= point.c) /* behind a supersonic end there is no pocket's tail */
        return TH_OK;
    st = th_dispersion_roots(f->omega, point.v, point.c, k, err);
    if (st != TH_OK)
        return st;
    for (int i = 0; i < 4; i++)
        if (side * cimag(k[i] * turn) > 0.0 && found < 2)
            out[found++] = k[i];
    if (found != 2)
        return TH_OK; /* beyond the sector that the rotation uncovers: leave the tail out */
    p[0] = -I * (f->omega - point.v * out[0]);
    p[1] = -I * (f->omega - point.v * out[1]);
    determinant = out[0] * out[0] * p[1] - out[1] * out[1] * p[0];
    amplitude[0] = (s.eta * p[1] - out[1] * out[1] * s.phi) / determinant;
    amplitude[1] = (out[0] * out[0] * s.phi - s.eta * p[0]) / determinant;
    parts = 1 + (int)(fmin(fmax(cabs(out[0]), cabs(out[1])) * length / 8.0, 1e4));
    for (int i = 0; i < parts; i++)
        for (int q = 0; q <= m->rule.order; q++) {
            const double away = length / parts * (i + 0.5 * (m->rule.node[q] + 1.0));
            sample t = {0};

            for (int w = 0; w < 2; w++) {
                double complex wave = amplitude[w] * cexp(I * out[w] * side * away);

                t.eta += out[w] * out[w] * wave;
                t.phi += p[w] * wave;
                t.eta_slope += I * out[w] * out[w] * out[w] * wave;
                t.phi_slope += I * out[w] * p[w] * wave;
            }
            accumulate(total, &t, point.n, point.c, 0.5 * length / parts * m->rule.weight[q]);
        }
    return TH_OK;
}

static th_status fill(field *f, const th_operator *op, const double complex *vector, th_error *err)
{
    const th_mesh *m = f->mesh;
    const int nodes = m->rule.order + 1;
    const size_t total = (size_t)m->elements * (size_t)nodes;

    f->eta = th_alloc(total, sizeof *f->eta);
    f->phi = th_alloc(total, sizeof *f->phi);
    f->eta_slope = th_alloc(total, sizeof *f->eta_slope);
    f->phi_slope = th_alloc(total, sizeof *f->phi_slope);
    if (f->eta == NULL || f->phi == NULL || f->eta_slope == NULL || f->phi_slope == NULL)
        return th_fail(err, TH_ENOMEM, "mode shape: %zu nodes", total);
    for (size_t at = 0; at < total; at++) {
        const int slot = op->slot[at];

        if (slot < 0)
            continue;
        f->eta[at] = vector[2 * slot] / csqrt(op->mass[slot]);
        f->phi[at] = vector[2 * slot + 1] / csqrt(op->mass[slot]);
    }
    for (int e = 0; e < m->elements; e++) {
        const size_t first = (size_t)e * (size_t)nodes;
        const double complex scale = 2.0 / (m->element[e].length * m->element[e].stretch);

        for (int i = 0; i < nodes; i++)
            for (int j = 0; j < nodes; j++) {
                f->eta_slope[first + (size_t)i] +=
                    scale * m->rule.slope[i][j] * f->eta[first + (size_t)j];
                f->phi_slope[first + (size_t)i] +=
                    scale * m->rule.slope[i][j] * f->phi[first + (size_t)j];
            }
    }
    return TH_OK;
}

/* Zeros of Re(eta e^{-i alpha}) on [from, to], alpha the phase that makes Int eta^2 real. */
static int count_nodes(const field *f, double from, double to)
{
    const int per_element = 4 * f->mesh->rule.order; /* the field has fewer than order zeros */
    double complex square = 0.0, phase;
    int zeros = 0, last = 0;

    for (int pass = 0; pass < 2; pass++) {
        phase = pass == 1 && cabs(square) > 0.0 ? csqrt(conj(square) / cabs(square)) : 1.0;
        for (int e = f->mesh->first_inside; e <= f->mesh->last_inside; e++) {
            const th_element *el = &f->mesh->element[e];

            for (int q = 0; q < per_element; q++) {
                const double x = el->left + el->length * (q + 0.5) / per_element;
                double complex eta;
                int sign;

                if (x < from || x > to)
                    continue;
                eta = at_point(f, e, x).eta;
                if (pass == 0) {
                    square += eta * eta * el->length;
                    continue;
                }
                sign = creal(eta * phase) > 0.0 ? 1 : -1;
                zeros += last != 0 && sign != last;
                last = sign;
            }
        }
    }
    return zeros;
}

/* A pocket that wraps through the seam of a ring is two stretches. */
static int stretches(const th_flow *flow, const th_pocket *pocket, double from[2], double to[2])
{
    const double half = 0.5 * th_flow_ends(flow).circumference;

    from[0] = pocket->left;
    to[0] = pocket->right;
    if (th_flow_ends(flow).kind != TH_ENDS_RING || pocket->right <= half)
        return 1;
    to[0] = half;
    from[1] = -half;
    to[1] = pocket->right - 2.0 * half;
    return 2;
}

th_status th_mode_shape_find(const th_flow *flow, const th_mesh *mesh, const th_operator *op,
                             double complex omega, const double complex *vector, th_mode_shape *out,
                             th_error *err)
{
    /* |norm| below this share of its largest possible value counts as zero; refined vectors are
     * good to far better than this (tests/test_modes.c prints growing modes' norms). */
    const double no_norm = 1e-6;
    th_status st = TH_EBUG;
    field f = {.flow = flow, .mesh = mesh, .omega = omega};
    sums all = {0}, inside = {0};
    const th_pocket *pocket;
    const double *edge;
    double from[2], to[2];
    int pockets, edges;

    *out = (th_mode_shape){0};
    st = fill(&f, op, vector, err);
    if (st != TH_OK)
        goto done;
    pocket = th_flow_pockets(flow, &pockets);
    edge = th_flow_edges(flow, &edges);
    f.from = edge[0];
    f.to = edge[edges - 1];
    if (mesh->ends == TH_ENDS_OPEN && pockets > 0) {
        const double extent = pocket[pockets - 1].right - pocket[0].left;

        f.from = pocket[0].left - extent;
        f.to = pocket[pockets - 1].right + extent;
        st = add_outside(&f, -1, edge[0], edge[0] - f.from, &all, err);
        if (st == TH_OK)
            st = add_outside(&f, +1, edge[edges - 1], f.to - edge[edges - 1], &all, err);
        if (st != TH_OK)
            goto done;
    }
    add_stretch(&f, f.from, f.to, &all);
    for (int i = 0; i < pockets; i++) {
        const int parts = stretches(flow, &pocket[i], from, to);

        for (int s = 0; s < parts; s++) {
            add_stretch(&f, from[s], to[s], &inside);
            out->nodes += count_nodes(&f, from[s], to[s]);
        }
    }
    if (all.energy > 0.0)
        out->pocket_share = fmin(1.0, inside.energy / all.energy);
    if (fabs(all.norm) > no_norm * all.size)
        out->norm = all.norm > 0.0 ? 1 : -1;
done:
    free(f.eta);
    free(f.phi);
    free(f.eta_slope);
    free(f.phi_slope);
    return st;
}
