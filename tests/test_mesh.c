/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of what lies under the matrix: quadrature nodes, wave numbers, elements. Random cases have
 * fixed seeds. */
#include <complex.h>
#include <float.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <string.h>
#include <cmocka.h>

#include "dispersion.h"
#include "flows.h"
#include "gll.h"
#include "mesh/mesh.h"

/* ---- Gauss-Lobatto-Legendre rules ----------------------------------------------------------- */

/* Abscissas and weights of Lobatto integration, Handbook of Mathematical Functions (NBS AMS 55,
 * 1964), table 25.6, from memory to its 8 digits (some cut, not rounded); nodes in closed form
 * where there is one. */
static void test_known_nodes(void **state)
{
    static const struct {
        int order, at;
        double node, weight;
    } known[] = {
        {2, 1, 0, 1.33333333},
        {2, 2, 1, 0.33333333},
        {3, 2, 0.44721360, 0.83333333},
        {3, 3, 1, 0.16666667},
        {4, 2, 0, 0.71111111},
        {4, 3, 0.65465367, 0.54444444},
        {4, 4, 1, 0.1},
        {5, 3, 0.28523152, 0.55485838},
        {5, 4, 0.76505532, 0.37847496},
        {5, 5, 1, 0.06666667},
        {6, 3, 0, 0.48761904},
        {6, 4, 0.46884879, 0.43174538},
        {6, 5, 0.83022390, 0.27682604},
        {6, 6, 1, 0.04761904},
    };
    th_gll rule;

    (void)state;
    for (size_t i = 0; i < sizeof known / sizeof known[0]; i++) {
        const int mirror = known[i].order - known[i].at;

        assert_int_equal(th_gll_make(known[i].order, &rule, NULL), TH_OK);
        close_to("node", rule.node[known[i].at], known[i].node, 0.6e-8);
        close_to("weight", rule.weight[known[i].at], known[i].weight, 1e-8);
        close_to("mirror node", rule.node[mirror], -known[i].node, 0.6e-8);
        close_to("mirror weight", rule.weight[mirror], known[i].weight, 1e-8);
    }
    assert_int_equal(th_gll_make(3, &rule, NULL), TH_OK);
    close_to("1/sqrt 5", rule.node[2], 1 / sqrt(5), 2e-16);
    assert_int_equal(th_gll_make(4, &rule, NULL), TH_OK);
    close_to("sqrt(3/7)", rule.node[3], sqrt(3.0 / 7), 2e-16);
    assert_int_equal(th_gll_make(5, &rule, NULL), TH_OK);
    close_to("sqrt((7 - 2 sqrt 7)/21)", rule.node[3], sqrt((7 - 2 * sqrt(7)) / 21), 2e-16);
}

/* Int z^k dz over [-1, 1]. Exact up to k = 2 p - 1; at k = 2 p the rule errs by
 * 2^(2p+1) (p+1) p^3 ((p-1)!)^4 / ((2p+1) ((2p)!)^2) (Handbook 25.4.32 with n = p + 1). */
static void test_exactness(void **state)
{
    (void)state;
    for (int p = 2; p <= TH_GLL_ORDER_MAX; p++) {
        th_gll rule;

        assert_int_equal(th_gll_make(p, &rule, NULL), TH_OK);
        assert_int_equal(rule.order, p);
        for (int k = 0; k <= 2 * p; k++) {
            double sum = 0, beyond = 0;

            for (int i = 0; i <= p; i++)
                sum += rule.weight[i] * pow(rule.node[i], k);
            if (k == 2 * p)
                beyond = exp((2 * p + 1) * log(2) + log(p + 1) + 3 * log(p) + 4 * lgamma(p) -
                             log(2 * p + 1) - 2 * lgamma(2 * p + 1));
            close_to("integral", sum, (k % 2 == 0 ? 2.0 / (k + 1) : 0) + beyond, 1e-14);
            if (k == 2 * p && p < 10)
                assert_true(beyond > 1e-7);
        }
    }
}

/* Slopes, Legendre coefficients and interpolation on polynomials that the rule holds exactly. */
static void test_polynomials(void **state)
{
    uint64_t seed = 11;

    (void)state;
    for (int p = 2; p <= TH_GLL_ORDER_MAX; p++) {
        th_gll rule;
        double legendre[TH_GLL_ORDER_MAX + 1][TH_GLL_ORDER_MAX + 1];

        assert_int_equal(th_gll_make(p, &rule, NULL), TH_OK);
        for (int k = 0; k <= p; k++) {
            double value[TH_GLL_ORDER_MAX + 1];

            for (int i = 0; i <= p; i++)
                value[i] = pow(rule.node[i], k);
            for (int i = 0; i <= p; i++) {
                double slope = 0;

                for (int j = 0; j <= p; j++)
                    slope += rule.slope[i][j] * value[j];
                /* slopes of order p have entries up to p^2/4 */
                close_to("slope", slope, k == 0 ? 0 : k * pow(rule.node[i], k - 1), 1e-15 * p * p);
                close_to("at a node", th_gll_interpolate(&rule, value, rule.node[i]), value[i], 0);
            }
            for (int trial = 0; trial < 5; trial++) {
                const double z = draw(&seed, -1, 1);

                close_to("between", th_gll_interpolate(&rule, value, z), pow(z, k), 2e-14);
            }
        }
        for (int i = 0; i <= p; i++) /* (l+1) P_{l+1} = (2l+1) z P_l - l P_{l-1} */
            for (int l = 0; l <= p; l++)
                legendre[l][i] = l == 0   ? 1
                                 : l == 1 ? rule.node[i]
                                          : ((2 * l - 1) * rule.node[i] * legendre[l - 1][i] -
                                             (l - 1) * legendre[l - 2][i]) /
                                                l;
        for (int l = 0; l <= p; l++)
            for (int m = 0; m <= p; m++) {
                double c = 0;

                for (int j = 0; j <= p; j++)
                    c += rule.to_legendre[m][j] * legendre[l][j];
                close_to("Legendre coefficient", c, l == m, 1e-13);
            }
    }
}

static void test_gll_errors(void **state)
{
    th_gll rule;
    th_error err = {0};

    (void)state;
    assert_int_equal(th_gll_make(1, &rule, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "1"));
    assert_int_equal(th_gll_make(TH_GLL_ORDER_MAX + 1, &rule, &err), TH_EINVAL);
}

/* ---- wave numbers --------------------------------------------------------------------------- */

/* |q(k)| relative to the sum of the sizes of its terms. */
static double quartic_residual(double complex omega, double v, double c, double complex k)
{
    const double complex square = k * k, a = omega - v * k;
    const double size = (cabs(omega) + v * cabs(k)) * (cabs(omega) + v * cabs(k)) +
                        c * c * cabs(square) + cabs(square * square) / 4;

    return size > 0 ? cabs(a * a - c * c * square - square * square / 4) / size : 0;
}

static void test_roots_random(void **state)
{
    uint64_t seed = 12;
    double worst = 0;

    (void)state;
    for (int trial = 0; trial < 20000; trial++) {
        /* from 1e-12 to 1e4 of the natural rate, all angles of the upper half plane */
        const double scale = exp(draw(&seed, -12, 12)), v = scale * draw(&seed, 0.05, 3);
        const double c = scale * draw(&seed, 0.05, 3), rate = exp(draw(&seed, -27, 9));
        const double complex omega =
            scale * scale * rate * cexp(I * pi * draw(&seed, 1e-3, 1 - 1e-3));
        double complex k[4];
        int up = 0;

        assert_int_equal(th_dispersion_roots(omega, v, c, k, NULL), TH_OK);
        for (int i = 0; i < 4; i++) {
            worst = fmax(worst, quartic_residual(omega, v, c, k[i]));
            up += cimag(k[i]) > 0;
            if (i > 0)
                assert_true(cimag(k[i]) <= cimag(k[i - 1]));
        }
        if (up != 2)
            fail_msg("%d wave numbers with Im k > 0 at omega = %g%+gi, v = %g, c = %g", up,
                     creal(omega), cimag(omega), v, c);
        /* Vieta: the sum is zero */
        close_to("sum", cabs(k[0] + k[1] + k[2] + k[3]) / (cabs(k[0]) + cabs(k[3])), 0, 1e-14);
    }
    if (!(worst <= 1e-14))
        fail_msg("residual %g", worst);
}

/* Real waves put in, and asked back: omega = v k0 +- sqrt(c^2 k0^2 + k0^4/4). */
static void test_roots_real(void **state)
{
    uint64_t seed = 13;

    (void)state;
    for (int trial = 0; trial < 2000; trial++) {
        const double v = draw(&seed, 0.1, 2), c = draw(&seed, 0.1, 2), k0 = draw(&seed, -3, 3);
        const double sign = trial % 2 ? 1 : -1;
        const double omega = v * k0 + sign * fabs(k0) * sqrt(c * c + k0 * k0 / 4);
        double complex k[4];
        double nearest = HUGE_VAL;

        assert_int_equal(th_dispersion_roots(omega, v, c, k, NULL), TH_OK);
        for (int i = 0; i < 4; i++)
            nearest = fmin(nearest, cabs(k[i] - k0));
        /* near a double root (an extremum of the band) half of the digits are lost */
        close_to("distance to the wave put in", nearest, 0, 1e-7);
    }
}

static void test_roots_special(void **state)
{
    double complex k[4];
    const double apart = 2 * sqrt(1.5 * 1.5 - 1);
    double largest = 0;
    th_error err = {0};

    (void)state;
    /* omega = 0: k = 0 twice and k^2 = 4 (v^2 - c^2) */
    assert_int_equal(th_dispersion_roots(0, 1, 1.5, k, NULL), TH_OK);
    close_to("evanescent", cabs(k[0] - I * apart), 0, 1e-14);
    close_to("evanescent", cabs(k[3] + I * apart), 0, 1e-14);
    close_to("zero", cabs(k[1]) + cabs(k[2]), 0, 1e-7);
    assert_int_equal(th_dispersion_roots(0, 1.5, 1, k, NULL), TH_OK);
    for (int i = 0; i < 4; i++)
        largest = fmax(largest, creal(k[i]));
    close_to("undulation", largest, apart, 1e-14);
    /* omega = 0 and v = c: all four vanish */
    assert_int_equal(th_dispersion_roots(0, 1, 1, k, NULL), TH_OK);
    for (int i = 0; i < 4; i++)
        assert_true(k[i] == 0);
    /* v = 0: k^2 = 2 (-c^2 +- sqrt(c^4 + omega^2)); c = 1, omega = sqrt 3: 2 and -6 */
    assert_int_equal(th_dispersion_roots(sqrt(3), 0, 1, k, NULL), TH_OK);
    close_to("at rest", cabs(k[0] - I * sqrt(6)), 0, 1e-14);
    close_to("at rest", fabs(creal(k[1])), sqrt(2), 1e-14);
    /* small omega keeps relative accuracy: k = omega/(v +- c) to first order */
    assert_int_equal(th_dispersion_roots(1e-100 * I, 1, 1.5, k, NULL), TH_OK);
    close_to("slow, downstream", cimag(k[1]) * 1e100, 1 / 2.5, 1e-14);
    close_to("slow, upstream", cimag(k[2]) * 1e100, -1 / 0.5, 1e-14);
    /* v = c: k^3 = -8 omega v for slow waves, and k = omega/(2 v) */
    assert_int_equal(th_dispersion_roots(1e-12, 1, 1, k, NULL), TH_OK);
    for (int i = 0, small = 0; i < 4; i++) {
        const double off = cabs(k[i]) < 1e-8 ? cabs(k[i] / 5e-13 - 1) : cabs(k[i] / 2e-4) - 1;

        small += cabs(k[i]) < 1e-8;
        close_to("sonic", off, 0, 1e-7);
        assert_true(i < 3 || small == 1);
    }
    assert_int_equal(th_dispersion_roots(NAN, 1, 1, k, &err), TH_ECONVERGE);
    assert_non_null(strstr(err.text, "wave numbers"));
    assert_int_equal(th_dispersion_roots(INFINITY, 1, 1, k, &err), TH_ECONVERGE);
    /* out of reach of the iteration: said, not returned as if settled */
    assert_int_equal(th_dispersion_roots(1e-130 * I, 1, 1.5, k, &err), TH_ECONVERGE);
    assert_int_equal(th_dispersion_roots(1, 1, 0, k, &err), TH_ECONVERGE);
}

/* ---- elements ------------------------------------------------------------------------------- */

static const th_mesh_options usual = {
    .order = 14, .accuracy = 1e-12, .omega_top = 0.4, .omega_low = 4e-4, .angle = 0.6, .layer = 1};

static th_mesh *mesh_of(const th_flow *flow, th_mesh_options options)
{
    th_mesh *mesh = NULL;
    th_error err = {0};

    if (th_mesh_create(flow, &options, &mesh, &err) != TH_OK)
        fail_msg("%s", err.text);
    return mesh;
}

/* Elements follow each other without a gap, inside ones end at every edge of the flow, nodes hold
 * the flow. */
static void check_row(const th_flow *flow, const th_mesh *mesh)
{
    const int nodes = mesh->rule.order + 1;
    /* far ends are placed by sums of all lengths between */
    const double rounding = 1e-15 * (double)mesh->elements * (1 + fabs(mesh->element[0].left));
    const double *edge;
    int edges, met = 0;

    edge = th_flow_edges(flow, &edges);
    assert_true(mesh->element[mesh->first_inside].left == edge[0]);
    for (int e = 0; e < mesh->elements; e++) {
        const th_element *el = &mesh->element[e];
        const double right = el->left + el->length;
        const bool inside = e >= mesh->first_inside && e <= mesh->last_inside;

        assert_true(el->length > 0);
        assert_true(inside == (el->piece >= 0 && el->piece < edges - 1));
        if (e > 0)
            close_to("gap", el->left, mesh->element[e - 1].left + mesh->element[e - 1].length,
                     rounding);
        if (inside) {
            assert_true(el->stretch == 1);
            assert_true(el->left >= edge[el->piece] && right <= edge[el->piece + 1] + 1e-13);
            met += fabs(right - edge[el->piece + 1]) < 1e-13;
        }
        for (int j = 0; j < nodes; j++) {
            const size_t at = (size_t)e * (size_t)nodes + (size_t)j;
            th_flow_point p;

            th_flow_eval(flow, el->piece, mesh->x[at], &p);
            assert_true(mesh->density[at] == p.n && mesh->sound2[at] == p.c * p.c);
            close_to("node", mesh->x[at], el->left + el->length * (mesh->rule.node[j] + 1) / 2,
                     1e-12 * (1 + fabs(el->left)));
        }
    }
    assert_int_equal(met, edges - 1);
    assert_true(mesh->flux == th_flow_flux(flow));
}

static void test_elements(void **state)
{
    static const double tanh_value[7] = {1, 1.5, 0.5, 1.3, 0.5, 0.7, 8}, well[3] = {1, 0.6, 1.5};
    const double ring_value[7] = {0, 1.4, 0.6, 1.4, 0.5, 0.5, 10};
    th_flow *flow[7] = {
        step_flow(1, 1.5, 0.5, 1.3, 6),          flow_of("tanh", open_ends(), tanh_value),
        flow_of("well", open_ends(), well),      bumpy_flow(open_ends()),
        flow_of("tanh", walls(7), tanh_value),   bumpy_flow(walls(3)),
        flow_of("tanh", ring(50, 8), ring_value)};

    (void)state;
    for (int i = 0; i < 7; i++) {
        th_mesh *mesh = mesh_of(flow[i], usual);
        const th_ends ends = th_flow_ends(flow[i]);

        check_row(flow[i], mesh);
        assert_int_equal(mesh->ends, ends.kind);
        assert_false(mesh->absorbing);
        if (ends.kind == TH_ENDS_OPEN) {
            /* rotated ends, growing by three, until waves of omega_low have fallen by e^-36 */
            const th_element *last = &mesh->element[mesh->elements - 1], *first = mesh->element;
            const double *edge;
            int edges;
            th_flow_point at;

            edge = th_flow_edges(flow[i], &edges);
            th_flow_eval(flow[i], -1, edge[0], &at);
            assert_true(cabs(first->stretch - cexp(0.6 * I)) < 1e-15);
            assert_true(cabs(last->stretch - cexp(0.6 * I)) < 1e-15);
            assert_true((edge[0] - first->left) * usual.omega_low * sin(0.6) / (at.c + at.v) > 36);
            close_to("growth", first->length / first[1].length, 3, 1e-12);
        } else {
            assert_int_equal(mesh->first_inside, 0);
            assert_int_equal(mesh->last_inside, mesh->elements - 1);
            assert_true(mesh->elements >= 3);
        }
        th_mesh_destroy(mesh);
        th_flow_destroy(flow[i]);
    }
    th_mesh_destroy(NULL);
}

/* What asks for more elements gets more. */
static void test_refinement(void **state)
{
    static const double wide[7] = {1, 1.5, 0.5, 1.3, 0.5, 0.7, 8};
    static const double narrow[7] = {1, 1.5, 0.5, 1.3, 0.01, 0.7, 8};
    th_flow *flow = flow_of("tanh", open_ends(), wide);
    th_flow *sharp = flow_of("tanh", open_ends(), narrow);
    th_mesh *usually = mesh_of(flow, usual), *other;
    th_mesh_options o = usual;
    double shortest = HUGE_VAL;

    (void)state;
    o.omega_top = 40;
    other = mesh_of(flow, o);
    assert_true(other->elements > usually->elements);
    th_mesh_destroy(other);
    o = usual;
    o.accuracy = 1e-4;
    other = mesh_of(flow, o);
    assert_true(other->elements < usually->elements);
    th_mesh_destroy(other);
    o = usual;
    o.omega_low = 1e-9; /* farther ends */
    other = mesh_of(flow, o);
    assert_true(other->element[0].left < 1e4 * usually->element[0].left);
    assert_int_equal(other->last_inside - other->first_inside,
                     usually->last_inside - usually->first_inside);
    th_mesh_destroy(other);
    other = mesh_of(sharp, usual);
    check_row(sharp, other);
    for (int e = 0; e < other->elements; e++)
        shortest = fmin(shortest, other->element[e].length);
    assert_true(shortest <= 0.03 && shortest > 1e-4);
    th_mesh_destroy(other);
    th_mesh_destroy(usually);
    th_flow_destroy(flow);
    th_flow_destroy(sharp);
}

/* A supersonic open end carries an absorbing layer on unrotated elements, and only it does. */
static void test_absorbing(void **state)
{
    th_flow *flow = step_flow(1, 1.5, 0.5, 0.5, 4);
    th_mesh *mesh = mesh_of(flow, usual);
    const size_t nodes = 15, last = (size_t)mesh->elements * nodes - 1;
    double before = 0;

    (void)state;
    assert_true(mesh->absorbing);
    assert_true(mesh->element[mesh->elements - 1].stretch == 1);
    assert_true(mesh->element[0].stretch != 1);
    for (size_t at = 0; at <= last; at++) {
        const int e = (int)(at / nodes);

        assert_true(mesh->damping[at] >= before);
        assert_true(e > mesh->last_inside || mesh->damping[at] == 0);
        before = mesh->damping[at];
    }
    close_to("full rate", mesh->damping[last], 4 * usual.omega_top, 1e-12);
    th_mesh_destroy(mesh);
    th_flow_destroy(flow);
}

static void test_band_limit(void **state)
{
    static const double quiet[5] = {0.5, 1.5, 0.8, 1.3, 4};
    th_flow *flow = step_flow(1, 1.5, 0.5, 1.3, 6);

    (void)state;
    close_to("band", th_flow_band_limit(flow), th_band_top(1, 0.5), 1e-15);
    th_flow_destroy(flow);
    flow = step_flow(1, 1.5, 0.9, 0.4, 6); /* the open end is the faster place */
    close_to("band", th_flow_band_limit(flow), th_band_top(1, 0.4), 1e-15);
    th_flow_destroy(flow);
    flow = flow_of("step", open_ends(), quiet); /* nowhere supersonic: c^2/4 */
    close_to("band", th_flow_band_limit(flow), 1.5 * 1.5 / 4, 1e-15);
    th_flow_destroy(flow);
}

static void reject(const th_flow *flow, th_mesh_options o, const char *word)
{
    th_mesh *mesh = NULL;
    th_error err = {0};

    assert_int_equal(th_mesh_create(flow, &o, &mesh, &err), TH_EINVAL);
    if (strstr(err.text, word) == NULL)
        fail_msg("'%s' does not name %s", err.text, word);
    assert_null(mesh);
}

/* Rough on a scale of 1e-15 of the flow. */
static void rough_eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    (void)ctx;
    *p = (th_flow_point){.n = 1, .v = 1, .c = 1.5};
    if (piece == 0 && fabs(x) < 3)
        p->c = 0.5 + 0.3 * sin(x * 1e15);
}

static void test_errors(void **state)
{
    static const double edge[2] = {-5, 5};
    const th_flow_spec rough = {.eval = rough_eval, .pieces = 1, .edge = edge};
    const th_ends ends = open_ends();
    th_flow *flow = step_flow(1, 1.5, 0.5, 1.3, 6);
    th_mesh *mesh = NULL;
    th_mesh_options o;
    th_error err = {0};

    (void)state;
    assert_int_equal(th_mesh_create(NULL, &usual, &mesh, &err), TH_EINVAL);
    assert_int_equal(th_mesh_create(flow, NULL, &mesh, &err), TH_EINVAL);
    assert_int_equal(th_mesh_create(flow, &usual, NULL, &err), TH_EINVAL);
    for (int i = 0; i < 2; i++) {
        o = usual, o.order = i ? 3 : TH_GLL_ORDER_MAX + 1;
        reject(flow, o, "order");
        o = usual, o.accuracy = i ? 1e-16 : 0.1;
        reject(flow, o, "accuracy");
        o = usual, o.omega_top = i ? 0 : INFINITY;
        reject(flow, o, "omega_top");
        o = usual, o.omega_low = i ? 0 : 0.4;
        reject(flow, o, "omega_low");
        o = usual, o.layer = i ? 0 : 100;
        reject(flow, o, "layer");
        o = usual, o.angle = i ? 0.29 : 0.79;
        reject(flow, o, "angle");
    }
    o = usual, o.omega_top = 1e12, o.omega_low = 1e9;
    assert_int_equal(th_mesh_create(flow, &o, &mesh, &err), TH_EUNDECIDED);
    assert_non_null(strstr(err.text, "elements"));
    assert_null(mesh);
    th_flow_destroy(flow);
    assert_int_equal(th_flow_create(&rough, &ends, &flow, &err), TH_OK);
    assert_int_equal(th_mesh_create(flow, &usual, &mesh, &err), TH_ECONVERGE);
    assert_non_null(strstr(err.text, "too fast"));
    assert_null(mesh);
    th_flow_destroy(flow);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_known_nodes),   cmocka_unit_test(test_exactness),
        cmocka_unit_test(test_polynomials),   cmocka_unit_test(test_gll_errors),
        cmocka_unit_test(test_roots_random),  cmocka_unit_test(test_roots_real),
        cmocka_unit_test(test_roots_special), cmocka_unit_test(test_elements),
        cmocka_unit_test(test_refinement),    cmocka_unit_test(test_absorbing),
        cmocka_unit_test(test_band_limit),    cmocka_unit_test(test_errors),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
