/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * All stationary flows at a given depth. Upstream of the trap a flow lies on one of the two orbits
 * that leave the uniform state: the grey soliton (density dips) or its rising counterpart. Where
 * the trap begins on that orbit is the one free parameter. Each choice is integrated through the
 * trap and compared with the orbit that leads to the uniform state downstream; the zeros of the
 * difference are polished on elements. May call: stationary, trap, state, status, GSL.
 *
 * Symbols: rho = a^2 = n/n_u, b bottom of the soliton, t place on the orbit (0: its bottom), k its
 * inverse width, M(rho) = (a')^2 on the orbit that leads downstream, F = (a')^2 - M the mismatch.
 * Proved by tests/test_potential.c. */
#include <gsl/gsl_errno.h>
#include <gsl/gsl_math.h>
#include <gsl/gsl_odeiv2.h>
#include <string.h>

#include "../alloc.h"
#include "plateau.h"

/* Places tried on each orbit. */
enum { DIPS = 240, RISES = 120 };
/* On the orbits a - 1 falls like exp(-2 k |t|): beyond this k t it is 1e-9. */
#define FARTHEST 10.5
/* Rising orbits are followed from this density on; denser pockets are no weak perturbation of
 * anything that an experiment makes. */
#define DENSEST 30.0
/* Accuracy of the integration when scanning, and of a zero before it is polished. */
#define SCAN 1e-9
#define ZERO 1e-10
/* Steps down to the least |F| between three places, and how near to zero it counts as touching. */
enum { DESCENT = 30 };
#define TOUCH 1e-7
/* A pocket counts as supersonic when this share of it is. */
#define MOST 0.5
/* Places in the pocket that are looked at. */
enum { LOOKS = 96 };
/* Two flows are one when densities differ by less anywhere in the pocket. */
#define SAME 1e-7

typedef struct {
    const th_trap *trap;
    const th_upstream *up;
    double depth;
    const double *pocket;
    double end, v_end; /* density and V far downstream */
    double b, k;
    int piece; /* under the integrator */
} shot;

typedef struct {
    double t;
    bool rising;
} place;

/* ---- orbits ---------------------------------------------------------------------------------- */

static double orbit_density(const shot *s, const place *at)
{
    const double th = tanh(s->k * at->t), factor = at->rising ? 1 / (th * th) : th * th;

    return s->b + (1 - s->b) * factor;
}

static void start(const shot *s, const place *at, double y[2])
{
    const double rho = orbit_density(s, at);
    const double slope = fabs(rho - 1) * sqrt(fmax(0, th_upstream_orbit(s->up, rho)));

    y[0] = sqrt(rho);
    y[1] = at->rising || at->t > 0 ? slope : -slope;
}

/* M(rho) = 2 Int_{end}^{rho} (V + H) drho. */
static double downstream(const shot *s, double rho)
{
    const double own = (rho - 1) * (rho - 1) * th_upstream_orbit(s->up, rho);
    const double end =
        s->end == 1 ? 0 : (s->end - 1) * (s->end - 1) * th_upstream_orbit(s->up, s->end);

    return own - end + 2 * s->v_end * (rho - s->end);
}

/* ---- through the trap ------------------------------------------------------------------------ */

static int equation(double x, const double y[], double dy[], void *params)
{
    const shot *s = params;
    const double rho = y[0] * y[0];

    if (!(y[0] > 0.01 && y[0] < 1e3))
        return GSL_EBADFUNC;
    dy[0] = y[1];
    dy[1] = 2 * (s->depth * th_trap_value(s->trap, s->piece, x) + th_upstream_excess(s->up, rho)) *
            y[0];
    return GSL_SUCCESS;
}

/* From `from` on in the current piece; false when the solution leaves all bounds. */
static bool advance(gsl_odeiv2_driver *driver, double *x, double to, double y[2])
{
    if (to <= *x)
        return true;
    return gsl_odeiv2_driver_apply(driver, x, to, y) == GSL_SUCCESS;
}

/* Integrate through the trap's core and all `stops` [count] ascending places; visit is told
 * a and a' at each. false when the solution leaves all bounds. */
typedef void (*visitor)(void *ctx, int stop, const double y[2]);
static bool shoot(shot *s, const place *at, const double *stops, int count, visitor visit,
                  void *ctx, double y[2])
{
    gsl_odeiv2_system system = {.function = equation, .dimension = 2, .params = s};
    gsl_odeiv2_driver *driver = gsl_odeiv2_driver_alloc_y_new(&system, gsl_odeiv2_step_rk8pd,
                                                              0.02 / s->up->state.c_u, SCAN, SCAN);
    const int pieces = s->trap->pieces;
    double x = s->trap->core[0];
    bool good = driver != NULL;
    int next = 0;

    start(s, at, y);
    while (next < count && stops[next] < x)
        next++;
    for (int p = 0; good && p < pieces; p++) {
        const double to = fmin(s->trap->edge[p + 1], s->trap->core[1]);

        s->piece = p;
        for (; good && next < count && stops[next] <= to; next++) {
            good = advance(driver, &x, stops[next], y);
            if (good && visit != NULL)
                visit(ctx, next, y);
        }
        good = good && advance(driver, &x, to, y);
        if (good)
            (void)gsl_odeiv2_driver_reset(driver);
    }
    if (driver != NULL)
        gsl_odeiv2_driver_free(driver);
    return good;
}

/* F; a solution that leaves all bounds ends beyond its orbit: F < 0. */
static double mismatch(shot *s, const place *at)
{
    double y[2];

    if (!shoot(s, at, NULL, 0, NULL, NULL, y))
        return -s->k * s->k;
    return y[1] * y[1] - downstream(s, y[0] * y[0]);
}

/* Does the solution go on to the uniform state, not away from it? */
static bool arrives(const shot *s, const double y[2])
{
    return !(y[0] * y[0] > s->end && y[1] > 0);
}

/* ---- the zeros ------------------------------------------------------------------------------- */

static place nth(const shot *s, bool rising, int i)
{
    const double far = FARTHEST / s->k;
    double close;

    if (!rising)
        return (place){.t = far * (2.0 * i / (DIPS - 1) - 1), .rising = false};
    close = atanh(sqrt((1 - s->b) / (DENSEST - s->b))) / s->k;
    return (place){.t = -far * pow(close / far, (double)i / (RISES - 1)), .rising = true};
}

/* Called for each zero; false ends the search. */
typedef bool (*taker)(void *ctx, shot *s, const place *at);

/* The zero between two places of opposite signs; false ends the search. */
static bool take_zero(shot *s, place low, double at_low, place high, taker take, void *ctx)
{
    double y[2];

    while (fabs(high.t - low.t) > ZERO / s->k) {
        place middle = {.t = low.t + (high.t - low.t) / 2, .rising = low.rising};
        const double m = mismatch(s, &middle);

        if (!(m * at_low > 0))
            high = middle;
        else
            low = middle;
    }
    /* rounding decides on which side of the uniform state a good one ends */
    if ((!shoot(s, &low, NULL, 0, NULL, NULL, y) || !arrives(s, y)) &&
        (!shoot(s, &high, NULL, 0, NULL, NULL, y) || !arrives(s, y)))
        return true;
    return take(ctx, s, &low);
}

/* Two zeros, or a double one, may hide where |F| is least between neighbours of one sign: go down
 * to the least by golden section; a flow that touches zero is taken as it is. */
static bool take_hidden(shot *s, place low, place high, double sign, taker take, void *ctx)
{
    const double ratio = 0.61803398874989484820;
    const place ends[2] = {low, high};
    place x[2] = {low, low};
    double f[2];

    x[0].t = high.t - ratio * (high.t - low.t);
    x[1].t = low.t + ratio * (high.t - low.t);
    for (int i = 0; i < 2; i++)
        f[i] = sign * mismatch(s, &x[i]);
    for (int step = 0; step < DESCENT && f[0] > 0 && f[1] > 0; step++) {
        const int keep = f[0] < f[1] ? 1 : 0;

        *(keep == 1 ? &high : &low) = x[keep];
        x[keep] = x[1 - keep];
        f[keep] = f[1 - keep];
        x[1 - keep].t =
            keep == 1 ? high.t - ratio * (high.t - low.t) : low.t + ratio * (high.t - low.t);
        f[1 - keep] = sign * mismatch(s, &x[1 - keep]);
    }
    for (int i = 0; i < 2; i++)
        if (f[i] <= 0)
            return take_zero(s, ends[0], sign, x[i], take, ctx) &&
                   take_zero(s, x[i], -sign, ends[1], take, ctx);
    return fmin(f[0], f[1]) > TOUCH * s->k * s->k || take(ctx, s, &x[f[0] < f[1] ? 0 : 1]);
}

static bool zeros_of(shot *s, bool rising, taker take, void *ctx)
{
    const int count = rising ? RISES : DIPS;
    place at[3] = {{0, rising}, {0, rising}, {0, rising}};
    double f[3] = {0, 0, 0};

    for (int i = 0; i < count; i++) {
        at[0] = at[1];
        at[1] = at[2];
        f[0] = f[1];
        f[1] = f[2];
        at[2] = nth(s, rising, i);
        f[2] = mismatch(s, &at[2]);
        if (i > 0 && f[1] * f[2] <= 0 && !take_zero(s, at[1], f[1], at[2], take, ctx))
            return false;
        if (i > 1 && f[0] * f[1] > 0 && f[1] * f[2] > 0 && fabs(f[1]) <= fabs(f[0]) &&
            fabs(f[1]) <= fabs(f[2]) && !take_hidden(s, at[0], at[2], f[1] > 0 ? 1 : -1, take, ctx))
            return false;
    }
    return true;
}

static void prepare(shot *s, const th_trap *trap, const th_upstream *up, double depth,
                    const double *pocket)
{
    *s = (shot){.trap = trap, .up = up, .depth = depth, .pocket = pocket};
    s->v_end = depth * th_trap_value(trap, trap->pieces, trap->edge[trap->pieces]);
    s->end = s->v_end == 0 ? 1 : th_upstream_uniform(up, s->v_end, true);
    s->b = th_upstream_bottom(up);
    s->k = sqrt(th_upstream_room(up, 1));
}

/* ---- what a flow is like in the pocket ------------------------------------------------------- */

typedef struct {
    const th_upstream *up;
    int fast;
    double low, high;
} look;

static void see(void *ctx, int stop, const double y[2])
{
    look *l = ctx;
    const double rho = y[0] * y[0];

    l->fast += th_upstream_room(l->up, rho) < 0;
    if (stop >= LOOKS / 4 && stop < 3 * LOOKS / 4) { /* the middle half */
        l->low = fmin(l->low, rho);
        l->high = fmax(l->high, rho);
    }
}

static double look_at(const double *pocket, int i)
{
    return pocket[0] + (pocket[1] - pocket[0]) * (i + 0.5) / LOOKS;
}

/* The share of the pocket that must be supersonic: of a table a healing length. */
static double share(const th_trap *trap, const th_upstream *up, const double *pocket)
{
    return trap->kind == TH_TRAP_TABLE ? 1 / (up->state.c_u * (pocket[1] - pocket[0])) : MOST;
}

static bool count_one(void *ctx, shot *s, const place *at)
{
    look l = {.up = s->up, .low = HUGE_VAL};
    double stops[LOOKS], y[2];
    int *count = ctx;

    for (int i = 0; i < LOOKS; i++)
        stops[i] = look_at(s->pocket, i);
    if (shoot(s, at, stops, LOOKS, see, &l, y) && l.fast > share(s->trap, s->up, s->pocket) * LOOKS)
        ++*count;
    return *count == 0; /* one is enough */
}

th_status th_flows_count(const th_trap *trap, const th_upstream *up, double depth,
                         const double *pocket, int *count, th_error *err)
{
    shot s;

    (void)err;
    prepare(&s, trap, up, depth, pocket);
    *count = 0;
    if (s.end > 0 && zeros_of(&s, false, count_one, count))
        (void)zeros_of(&s, true, count_one, count);
    return TH_OK;
}

/* ---- solved flows ---------------------------------------------------------------------------- */

typedef struct {
    th_flow_list *list;
    const th_gll *rule;
    th_status status;
    th_error err;
} collector;

typedef struct {
    th_stationary *flow;
    const int *node; /* [stops] place in flow->a */
} filler;

static void fill(void *ctx, int stop, const double y[2])
{
    const filler *f = ctx;

    f->flow->a[f->node[stop]] = y[0];
}

/* Where on the orbits of V = 0 a solution is that has come through the trap. */
static place after(const shot *s, const double y[2])
{
    const double rho = y[0] * y[0], part = fmax(0, (rho - s->b) / (1 - s->b));
    const double t = atanh(fmin(1 - 1e-15, sqrt(part < 1 ? part : 1 / part))) / s->k;

    return (place){.t = part < 1 && y[1] < 0 ? -t : t, .rising = part >= 1};
}

/* First guess at all nodes: the orbit before the trap, the integration in it, a tail beyond. */
static th_status guess(shot *s, const place *at, th_stationary *flow, th_error *err)
{
    const int p = flow->rule->order, nodes = flow->elements * p + 1;
    const double first = s->trap->core[0], last = s->trap->core[1];
    const double decay = 2 * sqrt(fmax(0, th_upstream_room(s->up, s->end)));
    double *stops = th_alloc((size_t)nodes, sizeof *stops), y[2] = {1, 0};
    int *node = th_alloc((size_t)nodes, sizeof *node), inside = 0;
    filler f = {.flow = flow, .node = node};
    place beyond;

    if (stops == NULL || node == NULL) {
        free(stops);
        free(node);
        return th_fail(err, TH_ENOMEM, "potential: %d nodes", nodes);
    }
    for (int i = 0; i < nodes; i++) {
        const int e = i / p < flow->elements ? i / p : flow->elements - 1;
        const double x = th_stationary_node(flow, e, i - e * p);

        if (x < first) {
            const place here = {.t = at->t + (x - first), .rising = at->rising};

            flow->a[i] = sqrt(orbit_density(s, &here));
        } else if (x <= last) {
            stops[inside] = x;
            node[inside++] = i;
        }
    }
    (void)shoot(s, at, stops, inside, fill, &f, y);
    beyond = after(s, y);
    for (int i = 0; i < nodes; i++) {
        const int e = i / p < flow->elements ? i / p : flow->elements - 1;
        const double x = th_stationary_node(flow, e, i - e * p);
        const place here = {.t = beyond.t + (x - last), .rising = beyond.rising};

        if (x > last)
            flow->a[i] = s->v_end == 0
                             ? sqrt(orbit_density(s, &here))
                             : sqrt(s->end) + (y[0] - sqrt(s->end)) * exp(-decay * (x - last));
    }
    free(stops);
    free(node);
    return TH_OK;
}

static void judge(th_flow_list *list, int i, const double *pocket)
{
    const th_stationary *flow = &list->flow[i];
    look l = {.up = &flow->up, .low = HUGE_VAL};

    for (int k = 0; k < LOOKS; k++) {
        const double x = look_at(pocket, k);
        double a[3];

        th_stationary_eval(flow, th_trap_piece(flow->trap, x), x, a);
        see(&l, k, a);
    }
    list->inside[i] = (double)l.fast / LOOKS;
    list->ripple[i] = (l.high - l.low) / (l.high + l.low);
}

static bool same(const th_stationary *f, const th_stationary *g, const double *pocket)
{
    double apart = 0;

    for (int k = 0; k < LOOKS; k++) {
        const double x = look_at(pocket, k);
        double a[3], b[3];

        th_stationary_eval(f, th_trap_piece(f->trap, x), x, a);
        th_stationary_eval(g, th_trap_piece(g->trap, x), x, b);
        apart = fmax(apart, fabs(a[0] - b[0]));
    }
    return apart < SAME;
}

/* The guess of a flow that is subsonic everywhere: uniform flow at each place. */
static void guess_subsonic(const shot *s, th_stationary *flow)
{
    const int p = flow->rule->order;

    for (int e = 0; e < flow->elements; e++)
        for (int j = 0; j <= p; j++) {
            const double x = th_stationary_node(flow, e, j);
            const double v = s->depth * th_trap_value(s->trap, flow->piece[e], x);
            const double rho = th_upstream_uniform(s->up, v, true);

            flow->a[e * p + j] = rho > 0 ? sqrt(rho) : 1;
        }
}

/* Polish the flow at a place of the orbits, or the subsonic one for NULL. */
static bool collect(void *ctx, shot *s, const place *at)
{
    collector *c = ctx;
    th_flow_list *list = c->list;
    th_stationary flow = {0};
    const double scale = asin(s->up->v_u / s->up->state.c_u) / s->k;

    c->status = th_stationary_create(s->trap, s->up, false, s->end, scale, c->rule, &flow, &c->err);
    if (c->status == TH_OK && at == NULL)
        guess_subsonic(s, &flow);
    else if (c->status == TH_OK)
        c->status = guess(s, at, &flow, &c->err);
    flow.depth = s->depth;
    if (c->status == TH_OK)
        c->status = th_stationary_solve(&flow, &c->err);
    if (c->status != TH_OK) { /* a zero that leads to no flow is left out */
        th_stationary_clear(&flow);
        if (c->status == TH_ECONVERGE)
            c->status = TH_OK;
        return c->status == TH_OK;
    }
    for (int i = 0; i < list->count; i++)
        if (same(&flow, &list->flow[i], s->pocket)) {
            th_stationary_clear(&flow);
            return true;
        }
    list->flow[list->count] = flow;
    judge(list, list->count, s->pocket);
    list->count++;
    return list->count < TH_FLOWS_MAX;
}

static bool better(const th_flow_list *list, int i, int k)
{
    const bool fast_i = list->inside[i] > MOST, fast_k = list->inside[k] > MOST;

    if (fast_i && fast_k)
        return list->ripple[i] < list->ripple[k];
    return fast_i != fast_k ? fast_i : list->inside[i] > list->inside[k];
}

static void swap(th_flow_list *list, int i, int k)
{
    const th_stationary flow = list->flow[i];
    const double inside = list->inside[i], ripple = list->ripple[i];

    list->flow[i] = list->flow[k];
    list->inside[i] = list->inside[k];
    list->ripple[i] = list->ripple[k];
    list->flow[k] = flow;
    list->inside[k] = inside;
    list->ripple[k] = ripple;
}

th_status th_flows_find(const th_trap *trap, const th_upstream *up, double depth,
                        const double *pocket, const th_gll *rule, th_flow_list *out, th_error *err)
{
    collector c = {.list = out, .rule = rule, .status = TH_OK};
    shot s;

    memset(out, 0, sizeof *out);
    out->most = share(trap, up, pocket);
    prepare(&s, trap, up, depth, pocket);
    if (s.end > 0 && collect(&c, &s, NULL) && zeros_of(&s, false, collect, &c))
        (void)zeros_of(&s, true, collect, &c);
    if (c.status != TH_OK) {
        th_flow_list_clear(out);
        return th_fail(err, c.status, "%s", c.err.text);
    }
    for (int i = 1; i < out->count; i++)
        for (int k = i; k > 0 && better(out, k, k - 1); k--)
            swap(out, k, k - 1);
    return TH_OK;
}

void th_flow_list_clear(th_flow_list *list)
{
    for (int i = 0; i < list->count; i++)
        th_stationary_clear(&list->flow[i]);
    list->count = 0;
}

bool th_flow_list_transonic(const th_flow_list *list)
{
    return list->count > 0 && list->inside[0] > list->most;
}
