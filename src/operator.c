/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Assembly of the Bogoliubov matrix. In: a mesh with the flow on its nodes. Out: A in compressed
 * rows and its dense, band and file forms. Calls mesh.
 * Symbols: l_i Lagrange polynomials, w quadrature weights, n density, J = n v flux,
 *   M = diag(w n), S_ij = Int n l_i' l_j', V_ij = J Int l_i l_j', C = diag(w n c^2).
 * A new term of the equations is one more line in add_element. Proof: tests/test_operator.c. */
#include "operator.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

#include "alloc.h"
#include "buffer.h"
#include "io_error.h"
#include "twinhorizon/units.h"

/* Couplings of each node to its neighbours -p..p along the mesh, before scaling. */
typedef struct {
    int nodes, p;
    double complex *mass;      /* [nodes] */
    double complex *sound;     /* [nodes] */
    double complex *damping;   /* [nodes] */
    double complex *stiffness; /* [nodes][2p + 1] */
    double *advection;         /* [nodes][2p + 1] */
} stencil;

static void stencil_free(stencil *s)
{
    free(s->mass);
    free(s->sound);
    free(s->damping);
    free(s->stiffness);
    free(s->advection);
}

/* Node of the whole line -> unknown node, -1 where held at zero. */
static int unknown_node(const th_mesh *mesh, int element, int local)
{
    const int p = mesh->rule.order, total = mesh->elements * p;
    const int line = element * p + local;

    if (mesh->ends == TH_ENDS_RING)
        return line % total;
    return line == 0 || line == total ? -1 : line - 1;
}

static int folded(int nodes, int i)
{
    return 2 * i < nodes ? 2 * i : 2 * (nodes - 1 - i) + 1;
}

static void add_element(stencil *s, const th_mesh *mesh, int e)
{
    const int p = s->p, width = 2 * p + 1;
    const th_gll *rule = &mesh->rule;
    const double complex jacobian = 0.5 * mesh->element[e].length * mesh->element[e].stretch;
    const double *n = mesh->density + (size_t)e * (size_t)(p + 1);
    const double *c2 = mesh->sound2 + (size_t)e * (size_t)(p + 1);
    const double *damping = mesh->damping + (size_t)e * (size_t)(p + 1);

    for (int i = 0; i <= p; i++) {
        const int row = unknown_node(mesh, e, i);
        const double complex mass = rule->weight[i] * n[i] * jacobian;

        if (row < 0)
            continue;
        s->mass[row] += mass;
        s->sound[row] += mass * c2[i];
        s->damping[row] += mass * damping[i];
        for (int j = 0; j <= p; j++) {
            const size_t at = (size_t)row * (size_t)width + (size_t)(j - i + p);
            double inner = 0.0;

            if (unknown_node(mesh, e, j) < 0)
                continue;
            for (int q = 0; q <= p; q++)
                inner += rule->weight[q] * n[q] * (rule->slope[q][i] * rule->slope[q][j]);
            s->stiffness[at] += inner / jacobian;
            /* w_i l_j'(z_i), antisymmetric but for end terms, which cancel between neighbours */
            if (i != j)
                s->advection[at] +=
                    0.5 * mesh->flux *
                    (rule->weight[i] * rule->slope[i][j] - rule->weight[j] * rule->slope[j][i]);
        }
    }
}

static th_status stencil_fill(stencil *s, const th_mesh *mesh, th_error *err)
{
    const size_t nodes = (size_t)s->nodes, width = 2 * (size_t)s->p + 1;

    s->mass = th_alloc(nodes, sizeof *s->mass);
    s->sound = th_alloc(nodes, sizeof *s->sound);
    s->damping = th_alloc(nodes, sizeof *s->damping);
    s->stiffness = th_alloc(nodes * width, sizeof *s->stiffness);
    s->advection = th_alloc(nodes * width, sizeof *s->advection);
    if (s->mass == NULL || s->sound == NULL || s->damping == NULL || s->stiffness == NULL ||
        s->advection == NULL)
        return th_fail(err, TH_ENOMEM, "operator: %d nodes", s->nodes);
    for (int e = 0; e < mesh->elements; e++)
        add_element(s, mesh, e);
    return TH_OK;
}

/* One column's pair of entries in the rows of eta and phi, kept sorted by column. */
typedef struct {
    int column;
    double complex stiffness;
    double advection;
    double complex scale;
} coupling;

static int by_column(const void *a, const void *b)
{
    const coupling *x = a, *y = b;

    return (x->column > y->column) - (x->column < y->column);
}

/* Rows 2 r and 2 r + 1 of A from node i of the stencil. */
static void write_rows(th_operator *op, const stencil *s, int i, int *used)
{
    const int p = s->p, width = 2 * p + 1;
    const int at_slot = op->ring ? folded(s->nodes, i) : i;
    const double complex sound = s->sound[i] / s->mass[i], damping = s->damping[i] / s->mass[i];
    coupling list[2 * TH_GLL_ORDER_MAX + 1] = {{0}};
    int count = 0;

    for (int d = -p; d <= p; d++) {
        const size_t at = (size_t)i * (size_t)width + (size_t)(d + p);
        int j = i + d;

        if (s->stiffness[at] == 0.0 && s->advection[at] == 0.0)
            continue;
        if (op->ring)
            j = (j + s->nodes) % s->nodes;
        list[count].column = op->ring ? folded(s->nodes, j) : j;
        list[count].stiffness = s->stiffness[at];
        list[count].advection = s->advection[at];
        /* sqrt(M_i) sqrt(M_j), the same to the last bit for (i, j) and (j, i) */
        list[count].scale = csqrt(s->mass[i]) * csqrt(s->mass[j]);
        count++;
    }
    qsort(list, (size_t)count, sizeof *list, by_column);
    op->mass[at_slot] = s->mass[i];
    for (int field = 0; field < 2; field++) {
        op->start[2 * at_slot + field] = *used;
        for (int q = 0; q < count; q++) {
            const double complex stiffness = list[q].stiffness / list[q].scale;
            const double complex advection = list[q].advection / list[q].scale;
            const bool diagonal = list[q].column == at_slot;
            const double complex same = -advection - (diagonal ? damping : 0.0);
            const double complex pressure = -(diagonal ? sound : 0.0) - 0.25 * stiffness;

            op->column[*used] = 2 * list[q].column;
            op->value[(*used)++] = field == 0 ? same : pressure;
            op->column[*used] = 2 * list[q].column + 1;
            op->value[(*used)++] = field == 0 ? stiffness : same;
        }
    }
}

static void find_bands(th_operator *op)
{
    for (int i = 0; i < op->size; i++)
        for (int q = op->start[i]; q < op->start[i + 1]; q++) {
            if (i - op->column[q] > op->lower)
                op->lower = i - op->column[q];
            if (op->column[q] - i > op->upper)
                op->upper = op->column[q] - i;
        }
}

th_status th_operator_create(const th_mesh *mesh, th_operator **out, th_error *err)
{
    th_status st = TH_EBUG;
    th_operator *op = NULL;
    stencil s = {0};
    size_t room;
    int used = 0;

    if (out == NULL || mesh == NULL)
        return th_fail(err, TH_EINVAL, "operator: want a mesh and a place for the result");
    *out = NULL;
    s.p = mesh->rule.order;
    s.nodes = mesh->elements * s.p + (mesh->ends == TH_ENDS_RING ? 0 : -1);
    op = th_alloc(1, sizeof *op);
    if (op == NULL)
        return th_fail(err, TH_ENOMEM, "operator: one object");
    st = stencil_fill(&s, mesh, err);
    if (st != TH_OK)
        goto done;
    op->nodes = s.nodes;
    op->size = 2 * s.nodes;
    op->real = mesh->ends != TH_ENDS_OPEN;
    op->ring = mesh->ends == TH_ENDS_RING;
    room = 4 * (size_t)s.nodes * (2 * (size_t)s.p + 1);
    op->start = th_alloc((size_t)op->size + 1, sizeof *op->start);
    op->column = th_alloc(room, sizeof *op->column);
    op->value = th_alloc(room, sizeof *op->value);
    op->mass = th_alloc((size_t)op->nodes, sizeof *op->mass);
    op->slot = th_alloc((size_t)mesh->elements * (size_t)(s.p + 1), sizeof *op->slot);
    if (op->start == NULL || op->column == NULL || op->value == NULL || op->mass == NULL ||
        op->slot == NULL) {
        st = th_fail(err, TH_ENOMEM, "operator: %d unknowns", op->size);
        goto done;
    }
    for (int e = 0, at = 0; e < mesh->elements; e++)
        for (int i = 0; i <= s.p; i++, at++) {
            int node = unknown_node(mesh, e, i);

            op->slot[at] = node >= 0 && op->ring ? folded(s.nodes, node) : node;
        }
    for (int row = 0; row < s.nodes; row++) { /* rows must be written in the order of slots */
        int node = row;

        if (op->ring)
            node = row % 2 == 0 ? row / 2 : s.nodes - 1 - row / 2;
        write_rows(op, &s, node, &used);
    }
    op->start[op->size] = used;
    find_bands(op);
    st = TH_OK;
done:
    stencil_free(&s);
    if (st == TH_OK)
        *out = op;
    else
        th_operator_destroy(op);
    return st;
}

void th_operator_destroy(th_operator *op)
{
    if (op == NULL)
        return;
    free(op->start);
    free(op->column);
    free(op->value);
    free(op->mass);
    free(op->slot);
    free(op);
}

void th_operator_apply(const th_operator *op, bool transposed, const double complex *x,
                       double complex *y)
{
    for (int i = 0; i < op->size; i++)
        y[i] = 0.0;
    for (int i = 0; i < op->size; i++)
        for (int q = op->start[i]; q < op->start[i + 1]; q++) {
            if (transposed)
                y[op->column[q]] += op->value[q] * x[i];
            else
                y[i] += op->value[q] * x[op->column[q]];
        }
}

double th_operator_bound(const th_operator *op, const double complex *y, const double complex *x)
{
    double sum = 0.0;

    for (int i = 0; i < op->size; i++) {
        double row = 0.0;

        for (int q = op->start[i]; q < op->start[i + 1]; q++)
            row += cabs(op->value[q]) * cabs(x[op->column[q]]);
        sum += cabs(y[i]) * row;
    }
    return sum;
}

double th_operator_norm(const th_operator *op)
{
    double top = 0.0;

    for (int i = 0; i < op->size; i++) {
        double row = 0.0;

        for (int q = op->start[i]; q < op->start[i + 1]; q++)
            row += cabs(op->value[q]);
        top = row > top ? row : top;
    }
    return top;
}

void th_operator_dense(const th_operator *op, double complex *a)
{
    const size_t n = (size_t)op->size;

    memset(a, 0, n * n * sizeof *a);
    for (int i = 0; i < op->size; i++)
        for (int q = op->start[i]; q < op->start[i + 1]; q++)
            a[(size_t)i + n * (size_t)op->column[q]] = op->value[q];
}

void th_operator_dense_real(const th_operator *op, double *a)
{
    const size_t n = (size_t)op->size;

    memset(a, 0, n * n * sizeof *a);
    for (int i = 0; i < op->size; i++)
        for (int q = op->start[i]; q < op->start[i + 1]; q++)
            a[(size_t)i + n * (size_t)op->column[q]] = creal(op->value[q]);
}

void th_operator_band(const th_operator *op, double complex lambda, double complex *band)
{
    const size_t height = 2 * (size_t)op->lower + (size_t)op->upper + 1;
    const int diagonal = op->lower + op->upper; /* row of the diagonal in LAPACK band form */

    memset(band, 0, height * (size_t)op->size * sizeof *band);
    for (int i = 0; i < op->size; i++) {
        for (int q = op->start[i]; q < op->start[i + 1]; q++)
            band[(size_t)(diagonal + i - op->column[q]) + height * (size_t)op->column[q]] =
                op->value[q];
        band[(size_t)diagonal + height * (size_t)i] -= lambda;
    }
}

/* "row column value\n" */
static void write_entry(const th_operator *op, int row, int q, th_buffer *line)
{
    char place[32], number[32];

    (void)snprintf(place, sizeof place, "%d %d ", row + 1, op->column[q] + 1);
    th_buffer_text(line, place);
    th_number_write_exact(creal(op->value[q]), number, sizeof number);
    th_buffer_text(line, number);
    if (!op->real) {
        th_number_write_exact(cimag(op->value[q]), number, sizeof number);
        th_buffer_text(line, " ");
        th_buffer_text(line, number);
    }
    th_buffer_text(line, "\n");
}

static void write_head(const th_operator *op, const char *title, th_buffer *text)
{
    char sizes[64];
    int entries = 0;

    for (int q = 0; q < op->start[op->size]; q++)
        entries += op->value[q] != 0.0;
    th_buffer_text(text, "%%MatrixMarket matrix coordinate ");
    th_buffer_text(text, op->real ? "real" : "complex");
    th_buffer_text(text, " general\n% ");
    th_buffer_text(text, title);
    th_buffer_text(text, "\n% Bogoliubov matrix A of d/dt z = A z; each eigenvalue lambda is a "
                         "frequency omega = i lambda in reduced units\n");
    (void)snprintf(sizes, sizeof sizes, "%d %d %d\n", op->size, op->size, entries);
    th_buffer_text(text, sizes);
}

th_status th_operator_write(const th_operator *op, const char *title, FILE *stream, th_error *err)
{
    th_status st = TH_OK;
    th_buffer text = {0};

    write_head(op, title, &text);
    for (int i = 0; st == TH_OK && i < op->size; i++) {
        for (int q = op->start[i]; q < op->start[i + 1]; q++)
            if (op->value[q] != 0.0)
                write_entry(op, i, q, &text);
        if (text.failed)
            st = th_fail(err, TH_ENOMEM, "matrix: row %d as text", i);
        else if (fwrite(text.data, 1, text.length, stream) != text.length)
            st = th_io_fail(err, "matrix", "write", errno);
        text.length = 0;
    }
    free(text.data);
    return st;
}
