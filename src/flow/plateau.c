/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The depth at which a plateau forms. May call: stationary, trap, state, status.
 * Symbols: rho = n/n_u, rho_p on the plateau, w width, Z strength of a barrier, d(x) distance
 * upstream of the edge, k inverse width of the soliton.
 * Proved by tests/test_potential.c. */
#include "plateau.h"

#include <gsl/gsl_math.h>

/* Widths of the steps from a sharp edge: from this part of a healing length, by this factor. */
#define FIRST_WIDTH 0.1
#define WIDEN       1.5
/* The steps end where the next would widen by less than this factor. */
#define NARROW 1.003

static bool is_barrier(const th_trap *trap)
{
    return trap->kind == TH_TRAP_BARRIER || trap->kind == TH_TRAP_BARRIERS;
}

static double edge_of(const th_trap *trap)
{
    return trap->kind == TH_TRAP_WELL || trap->kind == TH_TRAP_BARRIERS ? -trap->half : 0;
}

/* Shortest length of the solution: the zeros of n lie asin(m)/k off the bottom of a soliton. */
static double scale_of(const th_upstream *up)
{
    const double c = up->state.c_u, v = up->v_u;

    return asin(v / c) / sqrt((c - v) * (c + v));
}

/* The sharp case: depth and a(x). */
static double first_depth(const th_trap *trap, const th_upstream *up, double rho_p)
{
    if (is_barrier(trap)) /* a' jumps from -(1 - rho) sqrt(orbit) to 0 = 2 Z a higher */
        return (1 - rho_p) * sqrt(fmax(0, th_upstream_orbit(up, rho_p))) / (2 * rho_p) /
               (trap->width * sqrt(M_PI)) * sqrt(rho_p);
    return th_upstream_excess(up, rho_p);
}

static void first_guess(th_stationary *s, double rho_p)
{
    const double bottom = th_upstream_bottom(&s->up), edge = edge_of(s->trap);
    const double k = sqrt(th_upstream_room(&s->up, 1));
    /* where the soliton has rho_p */
    const double start = atanh(sqrt(fmax(0, (rho_p - bottom) / (1 - bottom))));
    const int p = s->rule->order;

    for (int e = 0; e < s->elements; e++)
        for (int j = 0; j <= p; j++) {
            const double d = fmax(0, edge - th_stationary_node(s, e, j)), t = tanh(k * d + start);

            s->a[e * p + j] = sqrt(bottom + (1 - bottom) * t * t);
        }
}

/* One width: from the flow at another, or from the sharp edge when there is none. TH_ENONE when
 * Newton's method ends at no supersonic plateau. */
static th_status at_width(th_trap *trap, const th_upstream *up, const th_gll *rule, double width,
                          const th_stationary *from, double from_width, th_stationary *out,
                          th_error *err)
{
    const double rho_p =
        is_barrier(trap) ? th_upstream_uniform(up, 0, false) : th_upstream_bottom(up);
    th_error why;
    th_status st = th_trap_make(trap->kind, 2 * trap->half, width, NULL, trap, err);

    if (st == TH_OK)
        st = th_stationary_create(trap, up, true, rho_p, scale_of(up), rule, out, err);
    if (st != TH_OK)
        return st;
    out->free_depth = true;
    if (from == NULL) {
        out->depth = first_depth(trap, up, rho_p);
        first_guess(out, rho_p);
    } else {
        out->depth = is_barrier(trap) ? from->depth * from_width / width : from->depth;
        th_stationary_carry(from, out);
    }
    st = th_stationary_solve(out, &why);
    if (st == TH_ECONVERGE)
        return TH_ENONE;
    if (st != TH_OK)
        return th_fail(err, st, "%s", why.text);
    {
        const double last = out->a[out->elements * rule->order];

        return out->depth > 0 && th_upstream_room(up, last * last) < 0 ? TH_OK : TH_ENONE;
    }
}

th_status th_plateau_find(th_trap *trap, const th_upstream *up, const th_gll *rule,
                          th_stationary *out, th_error *err)
{
    const double target = trap->width;
    double good = 0, factor = WIDEN, width = fmin(target, FIRST_WIDTH / up->state.c_u);
    th_stationary last = {0}, now = {0};
    th_status st;

    for (;;) {
        st = at_width(trap, up, rule, width, good > 0 ? &last : NULL, good, &now, err);
        if (st == TH_ENONE && good > 0 && factor > NARROW) { /* a shorter step */
            const double failed = width;

            th_stationary_clear(&now);
            while (width >= failed && factor > NARROW) {
                factor = sqrt(factor);
                width = good * factor;
            }
            continue;
        }
        if (st != TH_OK || width >= target)
            break;
        th_stationary_clear(&last);
        last = now;
        now = (th_stationary){0};
        good = width;
        width = fmin(target, factor * width);
    }
    th_stationary_clear(&last);
    if (st == TH_OK) {
        *out = now;
        return TH_OK;
    }
    th_stationary_clear(&now);
    if (st == TH_ENONE && good > 0)
        st = th_fail_key(err, TH_EINVAL, "width",
                         "width = %.6g: no depth makes a supersonic plateau; edges narrower than "
                         "about %.2g do",
                         target, good);
    else if (st == TH_ENONE && !(trap->half > 0))
        st =
            th_fail_key(err, TH_EINVAL, "mach",
                        "mach = %.6g: no depth makes a supersonic plateau, however narrow the edge",
                        up->v_u / up->state.c_u);
    else if (st == TH_ENONE)
        st = th_fail_key(err, TH_EINVAL, "gap",
                         "gap = %.6g: no depth makes a supersonic plateau in so short a pocket",
                         2 * trap->half);
    return st;
}
