/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * From a flow to its certified modes: the order of work. In: flow, accuracy. Out: th_solution.
 * Calls matrix, certify, level.
 * The counts come first: static index and census say how many modes must grow. Then the matrix;
 * while it has fewer than the index, the ends of its mesh move outwards, because slow modes need
 * far ends. Then each mode is polished on the matching function. Proof: tests/test_modes.c. */
#include <gsl/gsl_math.h>
#include <stdlib.h>

#include "alloc.h"
#include "modes/solver.h"

/* Would farther ends help? They do when modes are missing or the slowest are inaccurate. */
static bool wants_more(const th_solver *w, double omega_low)
{
    const th_solution *s = w->s;

    if (th_solver_conserving(w) || s->absorbing)
        return false;
    if (s->index_known && s->unstable < s->index)
        return true;
    for (int i = 0; i < s->count; i++)
        if (s->mode[i].omega_error > w->options->accuracy * s->omega_top &&
            cabs(th_mode_omega(&s->mode[i])) < omega_low)
            return true;
    return false;
}

static th_status check(const th_flow *flow, const th_solve_options *options, th_error *err)
{
    if (flow == NULL || options == NULL)
        return th_fail(err, TH_EINVAL, "solve: want a flow and options");
    if (!(options->accuracy >= 1e-12 && options->accuracy <= 1e-3))
        return th_fail(err, TH_EINVAL, "solve: accuracy = %g, want 1e-12 to 1e-3",
                       options->accuracy);
    return TH_OK;
}

/* First attempt whose ends resolve the slowest growing mode that the census found. */
static int first_attempt(const th_solver *w)
{
    double slowest = w->s->omega_top;
    int attempt = 0;

    for (int i = 0; i < w->roots; i++)
        slowest = fmin(slowest, hypot(w->root[i][0], w->root[i][1]));
    while (th_matrix_reach(attempt + 1) > 0.0 &&
           th_matrix_reach(attempt) * w->s->omega_top > slowest)
        attempt++;
    return attempt;
}

static th_status run(th_solver *w, th_error *err)
{
    th_status st = th_certify_prepare(w, err);
    double low = 0.0;

    for (int i = first_attempt(w); st == TH_OK && th_matrix_reach(i) > 0.0; i++) {
        if (low > 0.0 && !wants_more(w, low))
            break;
        low = th_matrix_reach(i) * w->s->omega_top;
        st = th_matrix_modes(w, low, err);
        if (st == TH_OK)
            st = th_certify_modes(w, err);
    }
    if (st == TH_OK)
        th_certify_decide(w);
    return st;
}

th_status th_solve(const th_flow *flow, const th_solve_options *options, th_solution **out,
                   th_error *err)
{
    th_solver w = {.flow = flow, .options = options};
    th_status st;

    if (out == NULL)
        return th_fail(err, TH_EINVAL, "solve: want a place for the result");
    *out = NULL;
    st = check(flow, options, err);
    if (st != TH_OK)
        return st;
    w.s = th_alloc(1, sizeof *w.s);
    if (w.s == NULL)
        return th_fail(err, TH_ENOMEM, "solve: one object");
    w.s->omega_top = th_flow_band_limit(flow);
    st = run(&w, err);
    for (int i = 0; i < TH_LEVELS; i++)
        th_level_clear(&w.level[i]);
    th_matching_destroy(w.usual);
    th_matching_destroy(w.fine);
    free(w.root);
    if (st == TH_OK)
        *out = w.s;
    else
        th_solution_destroy(w.s);
    return st;
}

void th_solution_destroy(th_solution *solution)
{
    if (solution == NULL)
        return;
    free(solution->mode);
    free(solution);
}

th_status th_matrix_write(const th_flow *flow, const th_solve_options *options, const char *title,
                          FILE *stream, th_error *err)
{
    th_level fine = {NULL, NULL};
    double top;
    th_status st = check(flow, options, err);

    if (st != TH_OK)
        return st;
    top = th_flow_band_limit(flow);
    st = th_level_create(flow, TH_LEVEL_FINE, options->accuracy, top, th_matrix_reach(0) * top,
                         &fine, err);
    if (st == TH_OK)
        st = th_operator_write(fine.op, title, stream, err);
    th_level_clear(&fine);
    return st;
}
