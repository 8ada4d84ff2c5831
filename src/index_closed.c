/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Static index of flows whose ends conserve energy: rings and walls. In: a flow. Out: th_index.
 * Calls mesh, lapack, flow.
 * The energy of a fluctuation, minimised over its phase at fixed eta, is half of
 *     F(eta) = Int [n c^2 eta^2 + n eta'^2/4 - (J^2/n) eta^2] dx + J^2 (Int eta/n)^2 / Int 1/n,
 * the last term because the phase must return to itself (ring) or to zero (walls). On a ring eta
 * keeps the mass, Int n eta dx = 0. The number of negative directions equals
 * k_r + 2 k_c + 2 k_i^- (growing, growing pairs, neutral modes of negative energy): the
 * Hamiltonian-Krein index, Physica D 195, 263 (2004). Symbols as in operator.c.
 * Proof: tests/test_closed_index.c; tests/test_modes.c (index against the modes found). */
#include "twinhorizon/index.h"

#include <float.h>
#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "alloc.h"
#include "lapack.h"
#include "mesh/mesh.h"

static const th_mesh_options resolution = {.order = 14, .accuracy = 1e-12, .layer = 1.0};

typedef struct {
    int nodes;
    double *form;    /* [nodes, nodes] F, then scaled by mass^(-1/2) on both sides */
    double *mass;    /* [nodes] w n */
    double *inverse; /* [nodes] w / n: eta -> Int eta/n */
    double whole;    /* Int 1/n */
} quadratic;

static int node_of(const th_mesh *mesh, int nodes, int e, int i)
{
    const int line = e * mesh->rule.order + i;

    if (mesh->ends == TH_ENDS_RING)
        return line % nodes;
    return line - 1; /* -1 and nodes: held at zero */
}

static void add_element(quadratic *q, const th_mesh *mesh, int e)
{
    const int p = mesh->rule.order;
    const double jacobian = 0.5 * mesh->element[e].length, flux = mesh->flux;
    const double *n = mesh->density + (size_t)e * (size_t)(p + 1);
    const double *c2 = mesh->sound2 + (size_t)e * (size_t)(p + 1);

    for (int i = 0; i <= p; i++) {
        const int row = node_of(mesh, q->nodes, e, i);
        const double weight = mesh->rule.weight[i] * jacobian;

        q->whole += weight / n[i];
        if (row < 0 || row >= q->nodes)
            continue;
        q->mass[row] += weight * n[i];
        q->inverse[row] += weight / n[i];
        q->form[(size_t)row * (size_t)q->nodes + (size_t)row] +=
            weight * (n[i] * c2[i] - flux * flux / n[i]);
        for (int j = 0; j <= p; j++) {
            const int column = node_of(mesh, q->nodes, e, j);
            double stiffness = 0.0;

            if (column < 0 || column >= q->nodes)
                continue;
            for (int l = 0; l <= p; l++)
                stiffness += mesh->rule.weight[l] * n[l] * mesh->rule.slope[l][i] *
                             mesh->rule.slope[l][j] / jacobian;
            q->form[(size_t)row * (size_t)q->nodes + (size_t)column] += 0.25 * stiffness;
        }
    }
}

/* The constraint of the phase, the scaling by the mass, and on a ring the constraint of the mass:
 * the direction e = sqrt(mass) is projected out and given the positive value `lift` instead. */
static double scale_and_constrain(quadratic *q, const th_mesh *mesh, double *image)
{
    const size_t n = (size_t)q->nodes;
    double norm = 0.0, total = 0.0, mean = 0.0;

    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++) {
            q->form[i * n + j] +=
                mesh->flux * mesh->flux * q->inverse[i] * q->inverse[j] / q->whole;
            q->form[i * n + j] /= sqrt(q->mass[i] * q->mass[j]);
        }
    for (size_t i = 0; i < n; i++) {
        double row = 0.0;

        for (size_t j = 0; j < n; j++)
            row += fabs(q->form[i * n + j]);
        norm = fmax(norm, row);
        total += q->mass[i];
    }
    if (mesh->ends != TH_ENDS_RING)
        return norm;
    for (size_t i = 0; i < n; i++) {
        image[i] = 0.0;
        for (size_t j = 0; j < n; j++)
            image[i] += q->form[i * n + j] * sqrt(q->mass[j] / total);
        mean += image[i] * sqrt(q->mass[i] / total);
    }
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++) {
            const double ei = sqrt(q->mass[i] / total), ej = sqrt(q->mass[j] / total);

            q->form[i * n + j] += (mean + norm) * ei * ej - image[i] * ej - ei * image[j];
        }
    return norm;
}

static th_status count(quadratic *q, const th_mesh *mesh, double sound, th_index *out,
                       th_error *err)
{
    th_status st = TH_EBUG;
    double *value = th_alloc((size_t)q->nodes, sizeof *value), norm, nearest = HUGE_VAL;

    if (value == NULL)
        return th_fail(err, TH_ENOMEM, "static index: %d numbers", q->nodes);
    norm = scale_and_constrain(q, mesh, value);
    st = th_lapack_eigen_symmetric(q->nodes, q->form, value, err);
    if (st != TH_OK)
        goto done;
    out->count = 0;
    for (int i = 0; i < q->nodes; i++) {
        out->count += value[i] < 0.0;
        if (fabs(value[i]) < fabs(nearest))
            nearest = value[i];
    }
    out->margin = -nearest / (sound * sound);
    out->error = 10.0 * DBL_EPSILON * norm / (sound * sound) + 10.0 * resolution.accuracy;
    if (fabs(out->margin) <= out->error) {
        out->count -= nearest < 0.0;
        st =
            th_fail(err, TH_EUNDECIDED,
                    "static index: an eigenvalue of the energy form is %.1e, within its error %.1e "
                    "of zero, so the index is %d or %d",
                    -out->margin, out->error, out->count, out->count + 1);
    }
done:
    free(value);
    return st;
}

th_status th_index_closed(const th_flow *flow, th_index *out, th_error *err)
{
    th_status st = TH_EBUG;
    th_mesh_options options = resolution;
    th_mesh *mesh = NULL;
    quadratic q = {0};

    if (flow == NULL || out == NULL || th_flow_ends(flow).kind == TH_ENDS_OPEN)
        return th_fail(err, TH_EINVAL,
                       "static index: want a ring or walls and a place for the "
                       "result");
    options.omega_top = th_flow_band_limit(flow);
    st = th_mesh_create(flow, &options, &mesh, err);
    if (st != TH_OK)
        return st;
    q.nodes = mesh->elements * mesh->rule.order - (mesh->ends == TH_ENDS_RING ? 0 : 1);
    q.form = th_alloc((size_t)q.nodes * (size_t)q.nodes, sizeof *q.form);
    q.mass = th_alloc((size_t)q.nodes, sizeof *q.mass);
    q.inverse = th_alloc((size_t)q.nodes, sizeof *q.inverse);
    if (q.form == NULL || q.mass == NULL || q.inverse == NULL) {
        st = th_fail(err, TH_ENOMEM, "static index: a dense form of %d nodes", q.nodes);
        goto done;
    }
    for (int e = 0; e < mesh->elements; e++)
        add_element(&q, mesh, e);
    st = count(&q, mesh, th_flow_sound_max(flow), out, err);
done:
    free(q.form);
    free(q.mass);
    free(q.inverse);
    th_mesh_destroy(mesh);
    return st;
}

th_status th_index_count(const th_flow *flow, th_index *out, th_error *err)
{
    if (flow == NULL || out == NULL)
        return th_fail(err, TH_EINVAL, "static index: want a flow and a place for the result");
    if (th_flow_ends(flow).kind == TH_ENDS_OPEN)
        return th_index_open(flow, out, err);
    return th_index_closed(flow, out, err);
}
