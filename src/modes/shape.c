/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Norm, share of the pockets and node count of a mode. In: an eigenvector on a mesh. Out:
 * th_mode_shape. Calls field, mesh, operator, flow.
 * Symbols: eta, phi density and phase fluctuation; energy 1/2 n (|phi'|^2 + c^2 |eta|^2 +
 *   |eta'|^2/4) per length; norm 2 n Im(eta phi*) per length. Proof: tests/test_modes.c. */
#include "modes/shape.h"

#include <gsl/gsl_math.h>

#include "modes/field.h"

typedef struct {
    double energy, norm, size; /* size: 2 Int n |eta phi|, the largest |norm| possible */
} sums;

static void accumulate(sums *total, const th_field_sample *s, double n, double c, double weight)
{
    const double eta = cabs(s->eta), phi = cabs(s->phi);
    const double energy = cabs(s->phi_slope) * cabs(s->phi_slope) + c * c * eta * eta +
                          0.25 * cabs(s->eta_slope) * cabs(s->eta_slope);

    total->energy += 0.5 * weight * n * energy;
    total->norm += 2.0 * weight * n * cimag(s->eta * conj(s->phi));
    total->size += 2.0 * weight * n * eta * phi;
}

/* Integrals over [from, to] within one inside element. */
static void add_part(const th_field *f, int e, double from, double to, sums *total)
{
    const th_gll *rule = &f->mesh->rule;

    for (int q = 0; q <= rule->order; q++) {
        const double x = from + 0.5 * (to - from) * (rule->node[q] + 1.0);
        const th_field_sample s = th_field_inside(f, e, x);
        th_flow_point point;

        th_flow_eval(f->flow, f->mesh->element[e].piece, x, &point);
        accumulate(total, &s, point.n, point.c, 0.5 * (to - from) * rule->weight[q]);
    }
}

static void add_stretch(const th_field *f, double from, double to, sums *total)
{
    for (int e = f->mesh->first_inside; e <= f->mesh->last_inside; e++) {
        const th_element *el = &f->mesh->element[e];
        const double low = fmax(from, el->left), high = fmin(to, el->left + el->length);

        if (high > low)
            add_part(f, e, low, high, total);
    }
}

/* The mode beyond an open end, side -1 or +1, over a length. */
static th_status add_outside(const th_field *f, int side, double edge, double length, sums *total,
                             th_error *err)
{
    const th_gll *rule = &f->mesh->rule;
    th_field_tail tail;
    th_flow_point point;
    int parts;
    th_status st;

    th_flow_eval(f->flow, side < 0 ? -1 : th_flow_pieces(f->flow), edge, &point);
    if (length <= 0.0 || point.v >= point.c) /* behind a supersonic end there is no pocket's tail */
        return TH_OK;
    st = th_field_tail_find(f, side, &tail, err);
    if (st != TH_OK || !tail.known) /* leave an unknown tail out */
        return st;
    parts = 1 + (int)(fmin(fmax(cabs(tail.k[0]), cabs(tail.k[1])) * length / 8.0, 1e4));
    for (int i = 0; i < parts; i++)
        for (int q = 0; q <= rule->order; q++) {
            const double away = length / parts * (i + 0.5 * (rule->node[q] + 1.0));
            const th_field_sample t = th_field_outside(&tail, away);

            accumulate(total, &t, point.n, point.c, 0.5 * length / parts * rule->weight[q]);
        }
    return TH_OK;
}

/* Zeros of Re(eta e^{-i alpha}) on [from, to], alpha the phase that makes Int eta^2 real. */
static int count_nodes(const th_field *f, double from, double to)
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
                eta = th_field_inside(f, e, x).eta;
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
    th_field f;
    sums all = {0}, inside = {0};
    const th_pocket *pocket;
    const double *edge;
    double left, right, from[2], to[2]; /* left, right: window of integration */
    int pockets, edges;

    *out = (th_mode_shape){0};
    st = th_field_create(flow, mesh, op, omega, vector, &f, err);
    if (st != TH_OK)
        goto done;
    pocket = th_flow_pockets(flow, &pockets);
    edge = th_flow_edges(flow, &edges);
    left = edge[0];
    right = edge[edges - 1];
    if (mesh->ends == TH_ENDS_OPEN && pockets > 0) {
        const double extent = pocket[pockets - 1].right - pocket[0].left;

        left = pocket[0].left - extent;
        right = pocket[pockets - 1].right + extent;
        st = add_outside(&f, -1, edge[0], edge[0] - left, &all, err);
        if (st == TH_OK)
            st = add_outside(&f, +1, edge[edges - 1], right - edge[edges - 1], &all, err);
        if (st != TH_OK)
            goto done;
    }
    add_stretch(&f, left, right, &all);
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
    th_field_clear(&f);
    return st;
}
