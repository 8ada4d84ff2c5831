/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of the Bogoliubov matrix: its Hamiltonian structure to the last bit, its action on known
 * waves, and its dense, band and file forms. */
#include <complex.h>
#include <float.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "flows.h"
#include "mesh/mesh.h"
#include "operator.h"
#include "refuse.h"

typedef struct {
    th_mesh *mesh;
    th_operator *op;
} pair;

static pair pair_of(const th_flow *flow, int order)
{
    const th_mesh_options o = {.order = order,
                               .accuracy = 1e-12,
                               .omega_top = th_flow_band_limit(flow),
                               .omega_low = 1e-3 * th_flow_band_limit(flow),
                               .angle = 0.6,
                               .layer = 1};
    pair p = {NULL, NULL};
    th_error err = {0};

    if (th_mesh_create(flow, &o, &p.mesh, &err) != TH_OK ||
        th_operator_create(p.mesh, &p.op, &err) != TH_OK)
        fail_msg("%s", err.text);
    return p;
}

static void pair_free(pair *p)
{
    th_operator_destroy(p->op);
    th_mesh_destroy(p->mesh);
}

static double complex *dense(const th_operator *op)
{
    double complex *a = calloc((size_t)op->size * (size_t)op->size, sizeof *a);

    assert_non_null(a);
    th_operator_dense(op, a);
    return a;
}

/* ---- structure ------------------------------------------------------------------------------ */

/* Entry (i, j) of H = J^T A, J = [0 1; -1 0] in each slot's pair (eta, phi): A = J H. */
static double complex hamiltonian(const double complex *a, size_t n, size_t i, size_t j)
{
    return i % 2 == 0 ? -a[i + 1 + n * j] : a[i - 1 + n * j];
}

/* Pairs of entries of H that differ in any bit. */
static int asymmetries(const th_operator *op)
{
    double complex *a = dense(op);
    const size_t n = (size_t)op->size;
    int count = 0;

    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < i; j++)
            count += hamiltonian(a, n, i, j) != hamiltonian(a, n, j, i);
    free(a);
    return count;
}

/* Every kind of ends, every shape, a callback with n, v and c all varying. With open ends H is
 * complex symmetric (not Hermitian), with rings and walls real symmetric. */
static void test_structure(void **state)
{
    static const double smooth[7] = {1, 1.5, 0.5, 1.3, 0.5, 0.7, 8};
    static const double ring_value[7] = {0, 1.4, 0.6, 1.4, 0.5, 0.5, 10};
    static const double well[3] = {1, 0.6, 1.5}, sech[4] = {1, 1.3, 1.4, 3};
    static const double step[5] = {0.75, 1, 0.3, 1.1, 5};
    th_flow *flow[] = {flow_of("step", open_ends(), step),
                       flow_of("tanh", open_ends(), smooth),
                       flow_of("sech", open_ends(), sech),
                       flow_of("well", open_ends(), well),
                       bumpy_flow(open_ends()),
                       flow_of("step", walls(6), step),
                       flow_of("tanh", walls(6), smooth),
                       flow_of("well", walls(4), well),
                       flow_of("sech", walls(4), sech),
                       bumpy_flow(walls(3)),
                       flow_of("tanh", ring(50, 8), ring_value)};

    (void)state;
    for (size_t i = 0; i < sizeof flow / sizeof flow[0]; i++) {
        for (int order = 6; order <= 19; order += 13) {
            pair p = pair_of(flow[i], order);
            const bool open = th_flow_ends(flow[i]).kind == TH_ENDS_OPEN;
            double complex *a = dense(p.op);
            bool real = true;

            assert_int_equal(p.op->size, 2 * p.op->nodes);
            assert_int_equal(p.op->nodes, p.mesh->elements * order - (i == 10 ? 0 : 1));
            for (size_t at = 0; at < (size_t)p.op->size * (size_t)p.op->size; at++)
                real = real && cimag(a[at]) == 0;
            free(a);
            assert_true(p.op->real == !open);
            assert_true(real == !open);
            assert_true(p.op->ring == (i == 10));
            if (asymmetries(p.op) != 0)
                fail_msg("flow %zu, order %d: %d entries break the symmetry", i, order,
                         asymmetries(p.op));
            pair_free(&p);
        }
        th_flow_destroy(flow[i]);
    }
    /* an absorbing layer is dissipation: the structure must be broken, or it does nothing */
    flow[0] = step_flow(1, 1.5, 0.5, 0.5, 4);
    {
        pair p = pair_of(flow[0], 14);

        assert_true(asymmetries(p.op) > 0);
        pair_free(&p);
    }
    th_flow_destroy(flow[0]);
}

/* Ring: a constant phase is an exact right null vector (A times sqrt(mass) in phi), the total mass
 * an exact left one (sqrt(mass) in eta), up to rounding of the sums. */
static void test_null_vectors(void **state)
{
    static const double value[7] = {0, 1.4, 0.6, 1.4, 0.5, 0.5, 10};
    th_flow *flow = flow_of("tanh", ring(50, 8), value);
    pair p = pair_of(flow, 14);
    const size_t n = (size_t)p.op->size;
    double complex *x = calloc(2 * n, sizeof *x), *image = x + n;

    (void)state;
    for (int field = 0; field < 2; field++) {
        double top = 0;

        for (size_t s = 0; s < n / 2; s++) {
            x[2 * s] = field == 0 ? csqrt(p.op->mass[s]) : 0;
            x[2 * s + 1] = field == 1 ? csqrt(p.op->mass[s]) : 0;
        }
        th_operator_apply(p.op, field == 0, x, image);
        for (size_t i = 0; i < n; i++)
            top = fmax(top, cabs(image[i]));
        close_to("null vector", top / th_operator_norm(p.op), 0, 1e-14);
    }
    free(x);
    pair_free(&p);
    th_flow_destroy(flow);
}

/* ---- action --------------------------------------------------------------------------------- */

/* Bogoliubov waves on a uniform ring: (eta, phi) = (k^2, -i (omega - v k)) e^{ikx} with (omega - v
 * k)^2 = c^2 k^2 + k^4/4 satisfies d_t z = -i omega z exactly, so A z = -i omega z at every node up
 * to the error of the elements (order 14, spectral) and rounding times norm of A. */
static void test_waves(void **state)
{
    uniform_state s = {.c = 0.7};
    th_flow *flow = uniform_flow(ring(20, 4), 20, &s);
    pair p = pair_of(flow, 14);
    const size_t n = (size_t)p.op->size;
    double complex *z = calloc(2 * n, sizeof *z), *image = z + n;

    (void)state;
    for (int j = -3; j <= 3; j++)
        for (int sign = -1; sign <= 1; sign += 2) {
            const double k = 2 * pi * j / 20;
            const double omega = s.v * k + sign * fabs(k) * sqrt(s.c * s.c + k * k / 4);
            double off = 0, size = 0;

            if (j == 0)
                continue;
            for (int e = 0; e < p.mesh->elements; e++)
                for (int i = 0; i <= 14; i++) {
                    const size_t at = (size_t)e * 15 + (size_t)i;
                    const size_t slot = (size_t)p.op->slot[at];
                    const double complex wave =
                        csqrt(p.op->mass[slot]) * cexp(I * k * p.mesh->x[at]);

                    z[2 * slot] = k * k * wave;
                    z[2 * slot + 1] = -I * (omega - s.v * k) * wave;
                }
            th_operator_apply(p.op, false, z, image);
            for (size_t i = 0; i < n; i++) {
                off += cabs(image[i] + I * omega * z[i]) * cabs(image[i] + I * omega * z[i]);
                size += cabs(z[i]) * cabs(z[i]);
            }
            close_to("A z + i omega z", sqrt(off / size), 0, 1e-9);
        }
    free(z);
    pair_free(&p);
    th_flow_destroy(flow);
}

/* Rotated ends: the mass is that of the complex length, Int dx = e^{i theta} length outside. */
static void test_mass(void **state)
{
    th_flow *flow = step_flow(1, 1.5, 0.5, 1.3, 6);
    pair p = pair_of(flow, 14);
    double complex total = 0, want = 0;

    (void)state;
    for (int i = 0; i < p.op->nodes; i++)
        total += p.op->mass[i];
    for (int e = 0; e < p.mesh->elements; e++)
        want += 1.7 * p.mesh->element[e].length * p.mesh->element[e].stretch;
    /* the first and the last node are held at zero and carry their own share */
    want -= 1.7 * p.mesh->rule.weight[0] / 2 *
            (p.mesh->element[0].length + p.mesh->element[p.mesh->elements - 1].length) *
            cexp(0.6 * I);
    close_to("mass", cabs(total / want - 1), 0, 1e-13);
    pair_free(&p);
    th_flow_destroy(flow);
}

/* ---- forms ---------------------------------------------------------------------------------- */

static void compare_forms(const th_operator *op)
{
    const size_t n = (size_t)op->size;
    const size_t height = 2 * (size_t)op->lower + (size_t)op->upper + 1;
    const double complex lambda = 0.3 - 0.2 * I;
    double complex *a = dense(op), *x = calloc(4 * n, sizeof *x), *y = x + n, *image = x + 2 * n;
    double complex *band = calloc(height * n, sizeof *band);
    double *real = calloc(n * n, sizeof *real), norm = 0, bound = 0, off = 0;
    uint64_t seed = 21;

    for (size_t i = 0; i < n; i++) {
        x[i] = draw(&seed, -1, 1) + I * draw(&seed, -1, 1);
        y[i] = draw(&seed, -1, 1) + I * draw(&seed, -1, 1);
    }
    for (int transposed = 0; transposed < 2; transposed++) {
        th_operator_apply(op, transposed, x, image);
        for (size_t i = 0; i < n; i++) {
            double complex sum = 0;

            for (size_t j = 0; j < n; j++)
                sum += (transposed ? a[j + n * i] : a[i + n * j]) * x[j];
            off = fmax(off, cabs(sum - image[i]));
        }
    }
    th_operator_band(op, lambda, band);
    for (size_t j = 0; j < n; j++)
        for (size_t i = 0; i < n; i++) {
            const double complex want = a[i + n * j] - (i == j ? lambda : 0);
            const size_t row = (size_t)(op->lower + op->upper) + i - j; /* LAPACK band form */
            const bool in = i <= j + (size_t)op->lower && j <= i + (size_t)op->upper;

            assert_true(want == (in ? band[row + height * j] : 0));
        }
    for (size_t i = 0; i < n; i++) {
        double row = 0;

        for (size_t j = 0; j < n; j++) {
            row += cabs(a[i + n * j]);
            bound += cabs(y[i]) * cabs(a[i + n * j]) * cabs(x[j]);
        }
        norm = fmax(norm, row);
    }
    close_to("norm", th_operator_norm(op) / norm, 1, 1e-14);
    close_to("bound", th_operator_bound(op, y, x) / bound, 1, 1e-13);
    close_to("apply", off / norm, 0, 1e-14);
    if (op->real) {
        th_operator_dense_real(op, real);
        for (size_t at = 0; at < n * n; at++)
            assert_true(real[at] == creal(a[at]));
    }
    free(real);
    free(band);
    free(x);
    free(a);
}

static void test_forms(void **state)
{
    static const double ring_value[7] = {0, 1.4, 0.6, 1.4, 0.5, 0.5, 10};
    th_flow *flow[3] = {step_flow(1, 1.5, 0.5, 1.3, 3), bumpy_flow(walls(1)),
                        flow_of("tanh", ring(50, 8), ring_value)};

    (void)state;
    for (int i = 0; i < 3; i++) {
        pair p = pair_of(flow[i], 8);

        compare_forms(p.op);
        /* a node meets its neighbours up to the order away; folding a ring doubles the band */
        assert_true(p.op->lower <= (i == 2 ? 4 : 2) * 8 + 1);
        assert_true(p.op->upper <= (i == 2 ? 4 : 2) * 8 + 1);
        pair_free(&p);
        th_flow_destroy(flow[i]);
    }
}

/* Matrix Market form, read back with fscanf: every entry to the last bit. */
static void test_file(void **state)
{
    th_flow *flow[2] = {step_flow(1, 1.5, 0.5, 1.3, 3), bumpy_flow(walls(1))};

    (void)state;
    for (int f = 0; f < 2; f++) {
        pair p = pair_of(flow[f], 6);
        const size_t n = (size_t)p.op->size;
        double complex *a = dense(p.op);
        FILE *file = tmpfile();
        char line[256];
        size_t rows, columns, entries, seen = 0, want = 0;

        assert_non_null(file);
        assert_int_equal(th_operator_write(p.op, "a title", file, NULL), TH_OK);
        rewind(file);
        assert_non_null(fgets(line, sizeof line, file));
        assert_string_equal(line, f == 0 ? "%%MatrixMarket matrix coordinate complex general\n"
                                         : "%%MatrixMarket matrix coordinate real general\n");
        assert_non_null(fgets(line, sizeof line, file));
        assert_string_equal(line, "% a title\n");
        do
            assert_non_null(fgets(line, sizeof line, file));
        while (line[0] == '%');
        assert_int_equal(sscanf(line, "%zu %zu %zu", &rows, &columns, &entries), 3);
        assert_int_equal(rows, n);
        assert_int_equal(columns, n);
        for (size_t i, j; fscanf(file, "%zu %zu", &i, &j) == 2; seen++) {
            double re, im = 0;

            assert_int_equal(fscanf(file, "%lf", &re), 1);
            if (f == 0)
                assert_int_equal(fscanf(file, "%lf", &im), 1);
            assert_true(a[i - 1 + n * (j - 1)] == re + I * im);
            a[i - 1 + n * (j - 1)] = 0;
        }
        assert_true(feof(file));
        assert_int_equal(seen, entries);
        for (size_t at = 0; at < n * n; at++)
            want += a[at] != 0;
        assert_int_equal(want, 0); /* nothing was left out */
        fclose(file);
        free(a);
        if (f == 1 && (file = fopen("/dev/full", "w")) != NULL) {
            th_error err = {0};

            assert_int_equal(setvbuf(file, NULL, _IONBF, 0), 0);
            assert_int_equal(th_operator_write(p.op, "a title", file, &err), TH_EIO);
            assert_non_null(strstr(err.text, "matrix: cannot write"));
            fclose(file);
        }
        pair_free(&p);
        th_flow_destroy(flow[f]);
    }
}

static void test_refused(void **state)
{
    th_flow *flow = step_flow(1, 1.5, 0.5, 1.3, 3);
    const th_mesh_options o = {.order = 6,
                               .accuracy = 1e-6,
                               .omega_top = 0.3,
                               .omega_low = 3e-4,
                               .angle = 0.6,
                               .layer = 1};
    long refused = 0;

    (void)state;
    for (long k = 0;; k++) {
        th_mesh *mesh = NULL;
        th_operator *op = NULL;
        th_error err = {0};
        th_status st;

        refuse_from(k);
        st = th_mesh_create(flow, &o, &mesh, &err);
        if (st == TH_OK)
            st = th_operator_create(mesh, &op, &err);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            th_operator_destroy(op);
            th_mesh_destroy(mesh);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_true(err.text[0] != '\0');
        assert_null(op);
        th_mesh_destroy(mesh);
        refused++;
    }
    assert_true(refused >= 12);
    {
        th_operator *op = NULL;

        assert_int_equal(th_operator_create(NULL, &op, NULL), TH_EINVAL);
        th_operator_destroy(NULL);
    }
    th_flow_destroy(flow);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_structure), cmocka_unit_test(test_null_vectors),
        cmocka_unit_test(test_waves),     cmocka_unit_test(test_mass),
        cmocka_unit_test(test_forms),     cmocka_unit_test(test_file),
        cmocka_unit_test(test_refused),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
