/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Newton's method for stationary flows on elements, see stationary.h for equation (1). May call:
 * gll, trap, state, status, GSL's band factors.
 *
 * Weak form on continuous elements with the nodes as quadrature points: for every node i
 *     R_i = [a' l_i] - Int a' l_i' - Int 2 (V + H) a l_i = 0,
 * a' = k (a - 1) at the far left end, a' = -k_d (a - a_d) at the far right one, a' = 0 where half
 * of the problem ends. dR/da adds the local term 2 (V + H) + 4 (c^2 - v^2). An unknown depth is
 * eliminated by a second right-hand side.
 * Symbols: as stationary.h; k decay rate of a tail, L half length of an element, w weights.
 * Proved by tests/test_potential.c. */
#include "stationary.h"

#include <float.h>
#include <gsl/gsl_integration.h>
#include <gsl/gsl_linalg.h>
#include <math.h>
#include <string.h>

#include "../alloc.h"

/* Tails go on until exp(-k x) is this: below rounding of what it is added to. */
#define TAIL 1e-17
/* An element is this part of the distance over which the solution or the potential varies: poles
 * of tanh and of the soliton then lie so far off that order 16 is exact to rounding. */
#define PART 0.6
/* Largest part of a that one step may take away. */
#define DAMP 0.5
enum { ROUNDS = 60, REFINEMENTS = 4 };
/* Elements at most: 64000 unknowns are a second and 30 MB for each step of Newton's method. */
enum { ELEMENTS_MAX = 4000 };
/* A step below this part of a is rounding; it is made, and ends the iteration. */
#define SETTLED 1e-11

double th_upstream_excess(const th_upstream *up, double rho)
{
    const double n_u = up->state.n_u;

    /* (1/rho^2 - 1) without cancellation near 1 */
    return th_state_mu(&up->state, n_u * rho) - th_state_mu(&up->state, n_u) +
           up->v_u * up->v_u / 2 * (1 - rho) * (1 + rho) / (rho * rho);
}

double th_upstream_room(const th_upstream *up, double rho)
{
    const double c = th_state_sound(&up->state, up->state.n_u * rho), v = up->v_u / rho;

    return (c - v) * (c + v);
}

double th_upstream_orbit(const th_upstream *up, double rho)
{
    /* (a')^2 = 2 Int_1^rho H; the integral of h(n) - h(n_u) is (n - n_u)^2 times
     * 2 c_u^2 r_u (2 r + r_u)/(3 n_u (r + r_u)^2), r = sqrt(1 + 4 a n) */
    const double r_u = sqrt(1 + 4 * up->state.a * up->state.n_u);
    const double r = sqrt(1 + 4 * up->state.a * up->state.n_u * rho), c_u = up->state.c_u;

    return 4 * c_u * c_u * r_u * (2 * r + r_u) / (3 * (r + r_u) * (r + r_u)) -
           up->v_u * up->v_u / rho;
}

/* Zero of a function that grows from below to above zero between low and high. */
static double bisect(const th_upstream *up, double (*f)(const th_upstream *, double), double shift,
                     double low, double high)
{
    for (int i = 0; i < 200 && low < high; i++) {
        const double middle = low + (high - low) / 2;

        if (middle <= low || middle >= high)
            break;
        if (f(up, middle) + shift < 0)
            low = middle;
        else
            high = middle;
    }
    return low + (high - low) / 2;
}

double th_upstream_bottom(const th_upstream *up)
{
    return bisect(up, th_upstream_orbit, 0, 0, 1);
}

static double minus_excess(const th_upstream *up, double rho)
{
    return -th_upstream_excess(up, rho);
}

double th_upstream_uniform(const th_upstream *up, double v, bool subsonic)
{
    /* H falls to its least value where v = c and grows from there */
    const double sonic = bisect(up, th_upstream_room, 0, 0, 1);
    double far = 2;

    if (v + th_upstream_excess(up, sonic) > 0)
        return 0;
    if (!subsonic)
        return bisect(up, minus_excess, -v, 0, sonic);
    while (v + th_upstream_excess(up, far) < 0 && far < DBL_MAX / 4)
        far *= 2;
    return bisect(up, th_upstream_excess, v, sonic, far);
}

/* ---- elements -------------------------------------------------------------------------------- */

/* How long an element at x may be: near features their width or the solution's length, growing
 * away from them, up to a healing length. */
static double longest(const th_stationary *s, double scale, double x)
{
    const double healing = 1 / s->up.state.c_u;
    double length = 1.5 * healing;

    for (int i = 0; i < s->trap->features; i++) {
        const th_feature *f = &s->trap->feature[i];
        const double own = f->width > 0 ? fmin(f->width, scale) : scale;

        length = fmin(length, fmax(own, 0.5 * fabs(x - f->x)));
    }
    if (x > s->trap->edge[0] && x < s->trap->edge[s->trap->pieces])
        length = fmin(length, scale);
    return PART * length;
}

/* Cut [from, to] of one piece; counts only when at == NULL. */
static int cut(const th_stationary *s, double scale, double from, double to, double *at)
{
    int n = 0;
    double x = from;

    while (x < to && n <= ELEMENTS_MAX) {
        double length = fmin(longest(s, scale, x), longest(s, scale, x + longest(s, scale, x)));
        const double stop = fmin(to, th_trap_next_cut(s->trap, x));
        double next = x + length;

        if (next > stop - 0.3 * length)
            next = stop;
        n++;
        if (at != NULL)
            at[n] = next;
        x = next;
    }
    return n;
}

/* Decay rate k at the uniform density rho; 0 where it is supersonic. */
static double decay(const th_upstream *up, double rho)
{
    const double room = th_upstream_room(up, rho);

    return room > 0 ? 2 * sqrt(room) : 0;
}

th_status th_stationary_create(const th_trap *trap, const th_upstream *up, bool half, double end,
                               double scale, const th_gll *rule, th_stationary *out, th_error *err)
{
    double stop[TH_TRAP_PIECES_MAX + 3];
    int piece[TH_TRAP_PIECES_MAX + 2], stretches = 0, total = 0, n = 0;
    size_t nodes;

    *out = (th_stationary){
        .trap = trap, .up = *up, .half = half, .end = end, .scale = scale, .rule = rule};
    stop[0] = trap->edge[0] + log(TAIL) / decay(up, 1);
    for (int p = -1; p <= trap->pieces; p++) {
        double to = p < trap->pieces     ? trap->edge[p + 1]
                    : decay(up, end) > 0 ? trap->edge[trap->pieces] - log(TAIL) / decay(up, end)
                                         : trap->edge[trap->pieces];

        if (half && to >= th_trap_plateau(trap))
            to = th_trap_plateau(trap);
        if (!(to > stop[stretches]))
            continue;
        piece[stretches] = p;
        stop[++stretches] = to;
    }
    for (int i = 0; i < stretches; i++) {
        const double least = (stop[i + 1] - stop[i]) / (PART * 1.5 / up->state.c_u);

        /* a lower bound first: counting alone could take for ever */
        if (least > ELEMENTS_MAX)
            total = ELEMENTS_MAX + 1;
        if (total <= ELEMENTS_MAX)
            total += cut(out, scale, stop[i], stop[i + 1], NULL);
    }
    if (total > ELEMENTS_MAX)
        return th_fail_key(err, TH_EINVAL, "mach",
                           "the flow varies over %.2g healing lengths, so that it needs more than "
                           "%d elements; %s or a shorter potential needs fewer",
                           scale * up->state.c_u, (int)ELEMENTS_MAX,
                           scale * up->state.c_u > 1 ? "a Mach number farther from 1"
                                                     : "a larger Mach number");
    nodes = (size_t)total * (size_t)rule->order + 1;
    out->elements = total;
    out->at = th_alloc((size_t)total + 1, sizeof *out->at);
    out->piece = th_alloc((size_t)total, sizeof *out->piece);
    out->a = th_alloc(nodes, sizeof *out->a);
    out->da = th_alloc(nodes + (size_t)total, sizeof *out->da);
    if (out->at == NULL || out->piece == NULL || out->a == NULL || out->da == NULL)
        return th_fail(err, TH_ENOMEM, "potential: %d elements", total);
    out->at[0] = stop[0];
    for (int i = 0; i < stretches; i++) {
        const int here = cut(out, scale, stop[i], stop[i + 1], out->at + n);

        for (int k = 0; k < here; k++)
            out->piece[n + k] = piece[i];
        n += here;
    }
    return TH_OK;
}

void th_stationary_clear(th_stationary *s)
{
    free(s->at);
    free(s->piece);
    free(s->a);
    free(s->da);
    s->at = s->a = s->da = NULL;
    s->piece = NULL;
}

double th_stationary_node(const th_stationary *s, int e, int j)
{
    const double half = (s->at[e + 1] - s->at[e]) / 2;

    return j == s->rule->order ? s->at[e + 1] : s->at[e] + half * (1 + s->rule->node[j]);
}

/* ---- Newton ---------------------------------------------------------------------------------- */

typedef struct {
    int size, band;
    gsl_matrix *ab; /* [size][3 band + 1]: row j holds column j of the matrix */
    gsl_vector_uint *pivot;
    gsl_vector *r, *g; /* residual; derivative by the depth */
} newton;

static void newton_clear(newton *w)
{
    gsl_matrix_free(w->ab);
    gsl_vector_uint_free(w->pivot);
    gsl_vector_free(w->r);
    gsl_vector_free(w->g);
}

static th_status newton_make(const th_stationary *s, newton *w, th_error *err)
{
    const size_t band = (size_t)s->rule->order;
    const size_t size = (size_t)s->elements * band + 1;

    *w = (newton){.size = (int)size, .band = (int)band};
    w->ab = gsl_matrix_alloc(size, 3 * band + 1);
    w->pivot = gsl_vector_uint_alloc(size);
    w->r = gsl_vector_alloc(size);
    w->g = gsl_vector_alloc(size);
    if (w->ab == NULL || w->pivot == NULL || w->r == NULL || w->g == NULL)
        return th_fail(err, TH_ENOMEM, "potential: a band matrix of %zu unknowns", size);
    return TH_OK;
}

static void add(newton *w, int row, int column, double value)
{
    double *place = gsl_matrix_ptr(w->ab, (size_t)column, (size_t)(2 * w->band + row - column));

    *place += value;
}

/* Residual, Jacobian and derivative by the depth at the current values. */
static void assemble(const th_stationary *s, newton *w)
{
    const th_gll *rule = s->rule;
    const int p = rule->order, last = w->size - 1;
    const double a_d = sqrt(s->end), k = decay(&s->up, 1), k_d = decay(&s->up, s->end);

    gsl_matrix_set_zero(w->ab);
    gsl_vector_set_zero(w->r);
    gsl_vector_set_zero(w->g);
    for (int e = 0; e < s->elements; e++) {
        const double half = (s->at[e + 1] - s->at[e]) / 2;
        const double *a = s->a + e * p;

        for (int q = 0; q <= p; q++) {
            const double form = th_trap_value(s->trap, s->piece[e], th_stationary_node(s, e, q));
            const double rho = a[q] * a[q], weight = rule->weight[q] * half;
            const double local = 2 * (s->depth * form + th_upstream_excess(&s->up, rho));
            double slope = 0;

            *gsl_vector_ptr(w->r, (size_t)(e * p + q)) -= weight * local * a[q];
            *gsl_vector_ptr(w->g, (size_t)(e * p + q)) -= weight * 2 * form * a[q];
            add(w, e * p + q, e * p + q, -weight * (local + 4 * th_upstream_room(&s->up, rho)));
            for (int j = 0; j <= p; j++)
                slope += rule->slope[q][j] * a[j];
            for (int i = 0; i <= p; i++) {
                const double part = rule->weight[q] / half * rule->slope[q][i];

                *gsl_vector_ptr(w->r, (size_t)(e * p + i)) -= part * slope;
                for (int j = 0; j <= p; j++)
                    add(w, e * p + i, e * p + j, -part * rule->slope[q][j]);
            }
        }
    }
    *gsl_vector_ptr(w->r, 0) -= k * (s->a[0] - 1);
    add(w, 0, 0, -k);
    if (!s->half) {
        *gsl_vector_ptr(w->r, (size_t)last) -= k_d * (s->a[last] - a_d);
        add(w, last, last, -k_d);
    }
}

/* One step; *size is its largest part of a. */
static th_status step(th_stationary *s, newton *w, double *size, th_error *err)
{
    const size_t band = (size_t)w->band, last = (size_t)w->size - 1;
    double move = 0, least = 1;

    assemble(s, w);
    if (gsl_linalg_LU_band_decomp((size_t)w->size, band, band, w->ab, w->pivot) != 0 ||
        gsl_linalg_LU_band_svx(band, band, w->ab, w->pivot, w->r) != 0)
        return th_fail(err, TH_ECONVERGE, "potential: a singular step of Newton's method");
    if (s->free_depth) {
        /* J da + g dd = -R and V + H = 0 at the last node: d(V + H) = f dd + 2 (c^2 - v^2)/a da */
        const double plateau = th_trap_plateau(s->trap);
        const double form = th_trap_value(s->trap, th_trap_piece(s->trap, plateau), plateau);
        const double a = s->a[last], rho = a * a;
        const double by_a = 2 * th_upstream_room(&s->up, rho) / a;
        const double wrong = s->depth * form + th_upstream_excess(&s->up, rho);

        if (gsl_linalg_LU_band_svx(band, band, w->ab, w->pivot, w->g) != 0)
            return th_fail(err, TH_ECONVERGE, "potential: a singular step of Newton's method");
        move = (by_a * gsl_vector_get(w->r, last) - wrong) /
               (form - by_a * gsl_vector_get(w->g, last));
    }
    *size = 0;
    for (size_t i = 0; i <= last; i++) {
        const double part = (-gsl_vector_get(w->r, i) - move * gsl_vector_get(w->g, i)) / s->a[i];

        gsl_vector_set(w->r, i, part * s->a[i]);
        *size = fmax(*size, fabs(part));
        if (!isfinite(part))
            return th_fail(err, TH_ECONVERGE, "potential: Newton's method ran away");
        least = fmin(least, part < 0 ? DAMP / -part : part > 1 ? 1 / part : 1);
    }
    for (size_t i = 0; i <= last; i++)
        s->a[i] += least * gsl_vector_get(w->r, i);
    s->depth += least * move;
    return TH_OK;
}

/* Int 2 (V + H) a over half an element, by the ten-point Gauss rule of GSL, whose points are none
 * of the nodes. */
static double force(const th_stationary *s, const gsl_integration_glfixed_table *gauss, int e,
                    double from, double to)
{
    const double half = (s->at[e + 1] - s->at[e]) / 2, *a = s->a + e * s->rule->order;
    double sum = 0;

    for (size_t i = 0; i < gauss->n; i++) {
        double z, weight, value, v;

        (void)gsl_integration_glfixed_point(from, to, i, &z, &weight, gauss);
        value = th_gll_interpolate(s->rule, a, z);
        v = s->depth * th_trap_value(s->trap, s->piece[e], s->at[e] + half * (1 + z));
        sum += weight * half * 2 * (v + th_upstream_excess(&s->up, value * value)) * value;
    }
    return sum;
}

/* a' at the nodes, and how well (1) holds over each half of an element, once integrated: the second
 * derivative of a polynomial would show its rounding only. */
static th_status finish(th_stationary *s, th_error *err)
{
    const th_gll *rule = s->rule;
    const int p = rule->order;
    gsl_integration_glfixed_table *gauss = gsl_integration_glfixed_table_alloc(10);

    if (gauss == NULL)
        return th_fail(err, TH_ENOMEM, "potential: a rule of ten points");
    s->residual = 0;
    for (int e = 0; e < s->elements; e++) {
        const double half = (s->at[e + 1] - s->at[e]) / 2;
        double *da = s->da + e * (p + 1);

        for (int i = 0; i <= p; i++) {
            da[i] = 0;
            for (int j = 0; j <= p; j++)
                da[i] += rule->slope[i][j] * (s->a[e * p + j] - s->a[e * p + i]) / half;
        }
        for (int side = -1; side <= 0; side++) {
            const double change =
                th_gll_interpolate(rule, da, side + 1) - th_gll_interpolate(rule, da, side);

            s->residual = fmax(s->residual, fabs(change - force(s, gauss, e, side, side + 1)));
        }
    }
    s->residual /= s->up.state.c_u;
    gsl_integration_glfixed_table_free(gauss);
    return TH_OK;
}

static th_status settle(th_stationary *s, th_error *err)
{
    newton w;
    double size = HUGE_VAL;
    th_status st = newton_make(s, &w, err);

    for (int round = 0; st == TH_OK && !(size <= SETTLED); round++) {
        if (round == ROUNDS)
            st = th_fail(err, TH_ECONVERGE,
                         "potential: Newton's method does not settle in %d steps", (int)ROUNDS);
        else
            st = step(s, &w, &size, err);
    }
    newton_clear(&w);
    return st == TH_OK ? finish(s, err) : st;
}

void th_stationary_carry(const th_stationary *from, th_stationary *to)
{
    const int p = to->rule->order;

    for (int e = 0; e < to->elements; e++)
        for (int j = 0; j <= p; j++) {
            double a[3];

            th_stationary_eval(from, to->piece[e], th_stationary_node(to, e, j), a);
            to->a[e * p + j] = a[0];
        }
}

th_status th_stationary_solve(th_stationary *s, th_error *err)
{
    th_status st = settle(s, err);

    for (int times = 0; st == TH_OK && s->residual > TH_STATIONARY_RESIDUAL; times++) {
        th_stationary finer = {0};

        if (times == REFINEMENTS)
            return th_fail(err, TH_ECONVERGE,
                           "potential: the stationary equation holds to %.1e only, want %g",
                           s->residual, TH_STATIONARY_RESIDUAL);
        st = th_stationary_create(s->trap, &s->up, s->half, s->end, s->scale / 2, s->rule, &finer,
                                  err);
        if (st == TH_OK) {
            finer.depth = s->depth;
            finer.free_depth = s->free_depth;
            th_stationary_carry(s, &finer);
            st = settle(&finer, err);
        }
        if (st == TH_OK) {
            th_stationary_clear(s);
            *s = finer;
        } else {
            th_stationary_clear(&finer);
        }
    }
    return st;
}

/* ---- values ---------------------------------------------------------------------------------- */

void th_stationary_eval(const th_stationary *s, int piece, double x, double a[3])
{
    const th_gll *rule = s->rule;
    const int p = rule->order;
    const bool even = s->half && th_trap_plateau(s->trap) == 0 && s->trap->kind != TH_TRAP_STEP &&
                      s->trap->kind != TH_TRAP_BARRIER;
    const double side = even && x > 0 ? -1 : 1, y = side * x;
    const int pieces = s->trap->pieces;
    int low = 0, high = s->elements;
    double half, z, v;

    piece = side < 0 ? pieces - 1 - piece : piece;
    a[1] = a[2] = 0;
    if (y <= s->at[0] || (!even && y >= s->at[s->elements])) {
        a[0] = y <= s->at[0] ? 1 : s->half ? s->a[s->elements * p] : sqrt(s->end);
        return;
    }
    while (high - low > 1) {
        const int middle = low + (high - low) / 2;

        if (s->piece[middle] > piece || (s->piece[middle] == piece && y < s->at[middle]))
            high = middle;
        else
            low = middle;
    }
    half = (s->at[low + 1] - s->at[low]) / 2;
    z = fmax(-1, fmin(1, (y - s->at[low]) / half - 1));
    a[0] = th_gll_interpolate(rule, s->a + low * p, z);
    a[1] = side * th_gll_interpolate(rule, s->da + low * (p + 1), z);
    v = s->depth * th_trap_value(s->trap, s->piece[low], y);
    a[2] = 2 * (v + th_upstream_excess(&s->up, a[0] * a[0])) * a[0];
}
