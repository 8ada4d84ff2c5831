/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Sweeps: every point of the grid, one after another. In: a case with axes. Out: a callback for
 * each point. Calls case's types, flow, modes, branches. Proof: tests/test_sweep.c. */
#include "twinhorizon/sweep.h"

#include <limits.h>
#include <stdlib.h>

#include "alloc.h"
#include "branches.h"

/* A mode may move this far between neighbouring points, relative to the top of the band, beside
 * its extrapolation; farther than that it is taken for a new one. */
static const double branch_reach = 0.1;

th_status th_sweep_size(const th_case *c, long *points, th_error *err)
{
    long long product = 1;

    if (c == NULL || points == NULL)
        return th_fail(err, TH_EINVAL, "sweep: want a case and a place for the result");
    if (c->axes < 1)
        return th_fail(err, TH_EINVAL, "%s has no [sweep] section with an axis", c->path);
    for (int a = 0; a < c->axes; a++) {
        product *= c->axis[a].count;
        if (product > INT_MAX)
            return th_fail(err, TH_EINVAL, "the sweep of %s has more than %d points", c->path,
                           INT_MAX);
    }
    *points = (long)product;
    return TH_OK;
}

/* Values of point `number` along the axes; true when it starts a line of the last axis. */
static bool place(const th_case *c, long number, double *value)
{
    const bool first = number % c->axis[c->axes - 1].count == 0;

    for (int a = c->axes - 1; a >= 0; a--) {
        value[a] = c->axis[a].value[number % c->axis[a].count];
        number /= c->axis[a].count;
    }
    return first;
}

static bool fatal(th_status st)
{
    return st == TH_ENOMEM || st == TH_EBUG;
}

/* Solve one point and hand it on. */
static th_status run_point(const th_case *c, long number, double *value, th_branches *line,
                           th_sweep_sink sink, void *ctx, th_error *err)
{
    const th_solve_options options = {.accuracy = c->accuracy};
    th_flow_setup setup = c->setup;
    th_sweep_point point = {.number = number, .value = value, .message = ""};
    th_flow *flow = NULL;
    th_solution *answer = NULL;
    th_error why = {0};
    int *branch = NULL;
    th_status st;

    if (place(c, number, value))
        th_branches_clear(line);
    for (int a = 0; a < c->axes; a++) {
        setup.value[c->axis[a].key] = value[a];
        setup.given[c->axis[a].key] = true;
    }
    st = th_flow_build(&setup, &flow, &why);
    if (st == TH_OK) {
        point.horizon_distance = th_flow_horizon_distance(flow);
        st = th_solve(flow, &options, &answer, &why);
    }
    if (fatal(st)) {
        if (err != NULL)
            *err = why;
        goto done;
    }
    point.status = st;
    if (st == TH_OK) {
        branch = th_alloc((size_t)answer->count, sizeof *branch);
        st = branch != NULL
                 ? th_branches_next(line, answer, branch_reach * answer->omega_top, branch, err)
                 : th_fail(err, TH_ENOMEM, "sweep: branches of %d modes", answer->count);
        if (st != TH_OK)
            goto done;
        point.answer = answer;
        point.branch = branch;
    } else {
        point.message = why.text;
        point.horizon_distance = 0.0;
    }
    st = sink(ctx, &point, err);
done:
    free(branch);
    th_solution_destroy(answer);
    th_flow_destroy(flow);
    return st;
}

th_status th_sweep_run(const th_case *c, th_sweep_sink sink, void *ctx, th_error *err)
{
    th_branches line = {0};
    double *value = NULL;
    long points;
    th_status st = th_sweep_size(c, &points, err);

    if (st != TH_OK)
        return st;
    value = th_alloc((size_t)c->axes, sizeof *value);
    if (value == NULL)
        return th_fail(err, TH_ENOMEM, "sweep: %d axes", c->axes);
    for (long i = 0; st == TH_OK && i < points; i++)
        st = run_point(c, i, value, &line, sink, ctx, err);
    th_branches_clear(&line);
    free(value);
    return st;
}
