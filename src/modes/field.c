/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The fluctuations of a mode along the real axis. In: an eigenvector on a mesh. Out: eta, phi and
 * their slopes at any point. Calls mesh, operator, dispersion, matching, flow.
 * Symbols: eta, phi density and phase fluctuation; k wave number.
 * Inside, the field is the interpolant on the elements. Outside an open end it is the sum of the
 * two outgoing waves of the uniform flow, taken along the real axis: the mesh only knows it along
 * the rotated ray, or damped by the absorbing layer. Proof: tests/test_profile.c. */
#include "modes/field.h"

#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "alloc.h"
#include "dispersion.h"
#include "matching/ends.h"

static double complex interpolate(const th_gll *rule, const double complex *value, double z)
{
    double re[TH_GLL_ORDER_MAX + 1], im[TH_GLL_ORDER_MAX + 1];

    for (int j = 0; j <= rule->order; j++) {
        re[j] = creal(value[j]);
        im[j] = cimag(value[j]);
    }
    return th_gll_interpolate(rule, re, z) + I * th_gll_interpolate(rule, im, z);
}

th_field_sample th_field_inside(const th_field *field, int e, double x)
{
    const th_element *el = &field->mesh->element[e];
    const th_gll *rule = &field->mesh->rule;
    const size_t at = (size_t)e * (size_t)(rule->order + 1);
    const double z = fmax(-1.0, fmin(1.0, 2.0 * (x - el->left) / el->length - 1.0));
    th_field_sample s = {
        interpolate(rule, field->eta + at, z), interpolate(rule, field->phi + at, z),
        interpolate(rule, field->eta_slope + at, z), interpolate(rule, field->phi_slope + at, z)};

    return s;
}

/* Outgoing waves of a subsonic end: those that decay along the rotated ray. */
static th_status damped_pair(const th_field *field, const th_flow_point *point, th_field_tail *tail,
                             th_error *err)
{
    const double complex turn = cexp(I * field->mesh->angle);
    double complex k[4];
    int found = 0;
    th_status st = th_dispersion_roots(field->omega, point->v, point->c, k, err);

    if (st != TH_OK)
        return st;
    for (int i = 0; i < 4; i++)
        if (tail->side * cimag(k[i] * turn) > 0.0 && found < 2)
            tail->k[found++] = k[i];
    tail->known = found == 2;
    return TH_OK;
}

/* Outgoing waves of a supersonic end, from the sum s and product p of the matching function's pair:
 * k^2 - s k + p = 0. */
static th_status followed_pair(const th_field *field, const th_flow_point *point,
                               th_field_tail *tail, th_error *err)
{
    const th_end end = {
        .density = point->n, .speed = point->v, .sound = point->c, .side = tail->side};
    th_frame frame;
    th_pair_sum sum;
    double complex p, root;
    th_status st = th_end_frame(&end, field->omega, &frame, &sum, err);

    if (st != TH_OK)
        return st;
    p = frame.y[1][1] / (-I * point->n); /* ends.c: the second solution has n eta' = -i n p */
    root = csqrt(0.25 * sum.value * sum.value - p);
    if (creal(conj(sum.value) * root) < 0.0)
        root = -root;
    tail->k[0] = 0.5 * sum.value + root; /* the larger one, then the other without cancellation */
    tail->k[1] = p / tail->k[0];
    tail->known = true;
    return TH_OK;
}

th_status th_field_tail_find(const th_field *field, int side, th_field_tail *out, th_error *err)
{
    const th_mesh *m = field->mesh;
    const int e = side < 0 ? m->first_inside : m->last_inside;
    const int piece = side < 0 ? -1 : th_flow_pieces(field->flow);
    const double *edge;
    double complex square[2], determinant;
    th_field_sample s;
    th_flow_point point;
    int edges;
    th_status st;

    *out = (th_field_tail){.side = side};
    edge = th_flow_edges(field->flow, &edges);
    s = th_field_inside(field, e, side < 0 ? edge[0] : edge[edges - 1]);
    th_flow_eval(field->flow, piece, side < 0 ? edge[0] : edge[edges - 1], &point);
    st = point.v < point.c ? damped_pair(field, &point, out, err)
                           : followed_pair(field, &point, out, err);
    if (st != TH_OK || !out->known)
        return st;
    for (int w = 0; w < 2; w++) {
        square[w] = out->k[w] * out->k[w];
        out->p[w] = -I * (field->omega - point.v * out->k[w]);
    }
    determinant = square[0] * out->p[1] - square[1] * out->p[0];
    out->amplitude[0] = (s.eta * out->p[1] - square[1] * s.phi) / determinant;
    out->amplitude[1] = (square[0] * s.phi - s.eta * out->p[0]) / determinant;
    return TH_OK;
}

th_field_sample th_field_outside(const th_field_tail *tail, double away)
{
    th_field_sample t = {0};

    for (int w = 0; w < 2; w++) {
        const double complex k = tail->k[w];
        const double complex wave = tail->amplitude[w] * cexp(I * k * tail->side * away);

        t.eta += k * k * wave;
        t.phi += tail->p[w] * wave;
        t.eta_slope += I * k * k * k * wave;
        t.phi_slope += I * k * tail->p[w] * wave;
    }
    return t;
}

static void differentiate(th_field *field)
{
    const th_mesh *m = field->mesh;
    const int nodes = m->rule.order + 1;

    for (int e = 0; e < m->elements; e++) {
        const size_t first = (size_t)e * (size_t)nodes;
        const double complex scale = 2.0 / (m->element[e].length * m->element[e].stretch);

        for (int i = 0; i < nodes; i++)
            for (int j = 0; j < nodes; j++) {
                field->eta_slope[first + (size_t)i] +=
                    scale * m->rule.slope[i][j] * field->eta[first + (size_t)j];
                field->phi_slope[first + (size_t)i] +=
                    scale * m->rule.slope[i][j] * field->phi[first + (size_t)j];
            }
    }
}

th_status th_field_create(const th_flow *flow, const th_mesh *mesh, const th_operator *op,
                          double complex omega, const double complex *vector, th_field *out,
                          th_error *err)
{
    const size_t total = (size_t)mesh->elements * (size_t)(mesh->rule.order + 1);

    *out = (th_field){.flow = flow, .mesh = mesh, .omega = omega};
    out->eta = th_alloc(total, sizeof *out->eta);
    out->phi = th_alloc(total, sizeof *out->phi);
    out->eta_slope = th_alloc(total, sizeof *out->eta_slope);
    out->phi_slope = th_alloc(total, sizeof *out->phi_slope);
    if (out->eta == NULL || out->phi == NULL || out->eta_slope == NULL || out->phi_slope == NULL)
        return th_fail(err, TH_ENOMEM, "mode shape: %zu nodes", total);
    for (size_t at = 0; at < total; at++) {
        const int slot = op->slot[at];

        if (slot < 0)
            continue;
        out->eta[at] = vector[2 * slot] / csqrt(op->mass[slot]);
        out->phi[at] = vector[2 * slot + 1] / csqrt(op->mass[slot]);
    }
    differentiate(out);
    return TH_OK;
}

void th_field_clear(th_field *field)
{
    free(field->eta);
    free(field->phi);
    free(field->eta_slope);
    free(field->phi_slope);
    *field = (th_field){0};
}
