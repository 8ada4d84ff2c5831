/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Elements on the real axis. In: a flow, frequencies of growing modes. Out: a mesh without complex
 * scaling, long enough for the modes and for the state. Calls mesh, dispersion, flow.
 * Symbols: k wave number, h element length, d distance from the last edge.
 * A mode and its partner decay outwards as e^{-|Im k| d} with roots k of the dispersion relation at
 * omega, all four between the two of them. The state needs no waves resolved but has long range
 * (static phase fluctuations): elements that double take it out at little cost. Proof:
 * tests/test_seed.c (padding, refinement). */
#include <float.h>
#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "alloc.h"
#include "dispersion.h"
#include "seed/inside.h"

/* Lengths of the elements beyond one open end, nearest first. */
typedef struct {
    int count, room;
    double *length;
} row;

static th_status push(row *r, double length, th_error *err)
{
    if (r->count == r->room) {
        const int room = r->room > 0 ? 2 * r->room : 64;
        double *grown = realloc(r->length, (size_t)room * sizeof *grown);

        if (grown == NULL)
            return th_fail(err, TH_ENOMEM, "seed: %d elements", room);
        r->length = grown;
        r->room = room;
    }
    r->length[r->count++] = length;
    return TH_OK;
}

/* All four waves of each mode at a uniform end, root [4 count]. */
static th_status all_waves(const th_flow_point *at, int count, const double complex *omega,
                           double complex *root, th_error *err)
{
    th_status st = TH_OK;

    for (int i = 0; st == TH_OK && i < count; i++)
        st = th_dispersion_roots(omega[i], at->v, at->c, &root[4 * i], err);
    return st;
}

/* Stops, with r->count beyond cap, when there would be more elements than that. */
static th_status lay_out(const th_seed_level *level, int roots, const double complex *root, int cap,
                         row *r, th_error *err)
{
    /* the rule of mesh.c for (wave number x length) of an element */
    const double reach =
        0.9 * (4.0 * level->order / M_E) * pow(level->accuracy, 0.5 / level->order);
    double slowest = HUGE_VAL, reached = 0.0, h = 0.0, end;
    th_status st = TH_OK;

    for (int i = 0; i < roots; i++)
        slowest = fmin(slowest, fabs(cimag(root[i])));
    end = level->efoldings / slowest;
    while (st == TH_OK && reached < level->far * end && r->count <= cap) {
        if (reached < end) {
            /* what e^{-s d/c} of the state leaves at d is as wide as d: no element longer */
            h = reached > 0.0 ? reached : HUGE_VAL;
            for (int i = 0; i < roots; i++)
                if (fabs(cimag(root[i])) * reached < -log(level->accuracy))
                    h = fmin(h, reach / cabs(root[i]));
        } else {
            h *= 2.0;
        }
        st = push(r, h, err);
        reached += h;
    }
    return st;
}

static th_status beyond(const th_flow *flow, int side, const th_seed_level *level, int count,
                        const double complex *omega, int cap, row *r, th_error *err)
{
    double complex *root = th_alloc(4 * (size_t)count, sizeof *root);
    const double *edge;
    th_flow_point at;
    int edges;
    th_status st = TH_EBUG;

    if (root == NULL)
        return th_fail(err, TH_ENOMEM, "seed: waves of %d modes", count);
    edge = th_flow_edges(flow, &edges);
    th_flow_eval(flow, side < 0 ? -1 : th_flow_pieces(flow), edge[side < 0 ? 0 : edges - 1], &at);
    st = all_waves(&at, count, omega, root, err);
    if (st == TH_OK)
        st = lay_out(level, 4 * count, root, cap, r, err);
    free(root);
    return st;
}

/* left + inside elements of `from` + right, without the flow on the nodes. */
static th_status join(const row *left, const th_mesh *from, const row *right, int pieces,
                      th_mesh *m, th_error *err)
{
    const int inside = from->last_inside - from->first_inside + 1;
    double at;

    m->rule = from->rule;
    m->ends = TH_ENDS_WALLS; /* zero at both far ends */
    m->flux = from->flux;
    m->elements = left->count + inside + right->count;
    m->first_inside = left->count;
    m->last_inside = left->count + inside - 1;
    m->element = th_alloc((size_t)m->elements, sizeof *m->element);
    if (m->element == NULL)
        return th_fail(err, TH_ENOMEM, "seed: %d elements", m->elements);
    at = from->element[from->first_inside].left;
    for (int i = 0; i < left->count; i++) {
        at -= left->length[i];
        m->element[left->count - 1 - i] = (th_element){-1, at, left->length[i], 1.0};
    }
    for (int i = 0; i < inside; i++)
        m->element[left->count + i] = from->element[from->first_inside + i];
    at = m->element[m->last_inside].left + m->element[m->last_inside].length;
    for (int i = 0; i < right->count; i++) {
        m->element[left->count + inside + i] = (th_element){pieces, at, right->length[i], 1.0};
        at += right->length[i];
    }
    return TH_OK;
}

static th_status sample(const th_flow *flow, th_mesh *m, th_error *err)
{
    const int nodes = m->rule.order + 1;
    const size_t total = (size_t)m->elements * (size_t)nodes;

    m->x = th_alloc(total, sizeof *m->x);
    m->density = th_alloc(total, sizeof *m->density);
    m->sound2 = th_alloc(total, sizeof *m->sound2);
    m->damping = th_alloc(total, sizeof *m->damping);
    if (m->x == NULL || m->density == NULL || m->sound2 == NULL || m->damping == NULL)
        return th_fail(err, TH_ENOMEM, "seed: %zu nodes", total);
    for (size_t at = 0; at < total; at++) {
        const th_element *el = &m->element[at / (size_t)nodes];
        th_flow_point point;

        m->x[at] = el->left + 0.5 * el->length * (m->rule.node[at % (size_t)nodes] + 1.0);
        th_flow_eval(flow, el->piece, m->x[at], &point);
        m->density[at] = point.n;
        m->sound2[at] = point.c * point.c;
    }
    return TH_OK;
}

th_status th_seed_line(const th_flow *flow, const th_seed_level *level, int count,
                       const double complex *omega, th_mesh **out, th_error *err)
{
    const int cap = TH_SEED_UNKNOWNS_MAX / (2 * level->order);
    th_mesh_options options = {.order = level->order,
                               .accuracy = level->accuracy,
                               .omega_top = th_flow_band_limit(flow),
                               .angle = 0.6, /* of ends that are not used */
                               .layer = 1.0};
    th_mesh *inside = NULL, *line = NULL;
    row left = {0}, right = {0};
    th_status st = TH_EBUG;

    *out = NULL;
    for (int i = 0; i < count; i++)
        options.omega_top = fmax(options.omega_top, fabs(creal(omega[i])));
    options.omega_low = 0.1 * options.omega_top;
    st = th_mesh_create(flow, &options, &inside, err);
    if (st != TH_OK)
        goto done;
    if (inside->ends == TH_ENDS_WALLS) {
        line = inside;
        inside = NULL;
    } else {
        st = beyond(flow, -1, level, count, omega, cap, &left, err);
        if (st == TH_OK)
            st = beyond(flow, +1, level, count, omega, cap, &right, err);
        if (st != TH_OK || left.count + right.count + inside->elements > cap)
            goto done;
        line = th_alloc(1, sizeof *line);
        if (line == NULL) {
            st = th_fail(err, TH_ENOMEM, "seed: one mesh");
            goto done;
        }
        st = join(&left, inside, &right, th_flow_pieces(flow), line, err);
        if (st == TH_OK)
            st = sample(flow, line, err);
    }
done:
    free(left.length);
    free(right.length);
    th_mesh_destroy(inside);
    if (st == TH_OK)
        *out = line;
    else
        th_mesh_destroy(line);
    return st;
}
