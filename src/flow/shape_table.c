/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape table: a measured or computed profile, smoothed. Goes in: a table with x and speed or
 * density (or both), with or without the sound speed, and the values of the keys. Comes out: a flow
 * with uniform ends, with a note that says how it was found and directions in which it may be
 * wrong. May call: table, state, flow, status.
 *
 * To accept other columns see table_rows.c. Proved by tests/test_table_flow.c,
 * tests/check_profile.py. */
#include <math.h>

#include "inside.h"
#include "shapes.h"
#include "table.h"

enum { TABLE, FLUX, SOUND_UPSTREAM, STATE, SCATTERING_LENGTH, SMOOTHING, TAPER, STRETCH, KEYS };

/* Length of a taper that is not given, over that of the table. */
static const double usual_taper = 0.1;

typedef struct {
    th_workspace *workspace;
    th_table table;
} profile;

static void release(void *ctx)
{
    profile *p = ctx;

    th_table_clear(&p->table);
    th_give(p->workspace, p);
}

static void eval(const void *ctx, int piece, double x, th_flow_point *point)
{
    const profile *p = ctx;

    th_table_eval(&p->table, piece, x, point);
}

static th_status vary(const void *ctx, int direction, double sigmas, const th_ends *ends,
                      th_flow **out, th_error *err);

/* The flow of a profile, which it then owns. */
static th_status finish(profile *p, const th_ends *ends, const char *note, bool varies,
                        th_flow **out, th_error *err)
{
    th_table *t = &p->table;
    th_flow_spec spec = {.eval = eval,
                         .release = release,
                         .ctx = p,
                         .pieces = t->pieces,
                         .note = note,
                         .scattering = t->state.a,
                         .directions = varies ? th_table_directions(t) : 0,
                         .vary = vary};
    double *edge = th_take(p->workspace, (size_t)t->pieces + 1, sizeof *edge);
    th_status st;

    if (edge == NULL)
        return th_fail(err, TH_ENOMEM, "shape table: %d pieces", t->pieces);
    for (int i = 0; i <= t->pieces; i++)
        edge[i] = t->stretch * t->left[i];
    spec.edge = edge;
    st = th_flow_create_in(&spec, ends, p->workspace, out, err);
    th_give(p->workspace, edge);
    return st;
}

static th_status vary(const void *ctx, int direction, double sigmas, const th_ends *ends,
                      th_flow **out, th_error *err)
{
    const profile *from = ctx;
    profile *p = th_take(NULL, 1, sizeof *p);
    th_status st;

    if (p == NULL)
        return th_fail(err, TH_ENOMEM, "shape table: a moved table");
    st = th_table_move(&from->table, direction, sigmas, &p->table, err);
    if (st == TH_OK)
        st = finish(p, ends, "", false, out, err);
    if (st != TH_OK)
        release(p);
    return st;
}

double th_table_taper(const th_flow_setup *setup)
{
    const double *x;

    if (setup->shape != &th_shape_table || setup->data == NULL)
        return 0;
    if (setup->given[TAPER])
        return setup->value[TAPER];
    x = th_data_values(setup->data, TH_DATA_X);
    return usual_taper * (x[th_data_rows(setup->data) - 1] - x[0]);
}

void th_table_set_taper(th_flow_setup *setup, double taper)
{
    setup->value[TAPER] = taper;
    setup->given[TAPER] = true;
}

static th_status build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    const double *value = setup->value;
    const th_table_plan plan = {.data = setup->data,
                                .smoothing = value[SMOOTHING],
                                .taper = th_table_taper(setup),
                                .stretch = value[STRETCH],
                                .flux = value[FLUX],
                                .state = {.n_u = setup->density,
                                          .c_u = value[SOUND_UPSTREAM],
                                          .a = value[SCATTERING_LENGTH]},
                                .workspace = setup->workspace};
    char note[TH_FLOW_NOTE_MAX];
    profile *p = NULL;
    th_status st;

    if (setup->ends.kind == TH_ENDS_RING)
        return th_fail_key(err, TH_EINVAL, "kind",
                           "shape table has uniform ends of its own, so it cannot close on a ring");
    st = th_state_check((int)value[STATE], value[SCATTERING_LENGTH], err);
    if (st != TH_OK)
        return st;
    p = th_take(setup->workspace, 1, sizeof *p);
    if (p == NULL)
        return th_fail(err, TH_ENOMEM, "shape table: its parameters");
    p->workspace = setup->workspace;
    st = th_table_make(&plan, &p->table, err);
    if (st == TH_OK) {
        th_table_note(&p->table, th_data_rows(setup->data), note, sizeof note);
        st = finish(p, &setup->ends, note, true, out, err);
    }
    if (st != TH_OK)
        release(p);
    return st;
}

const th_shape th_shape_table = {
    .name = "table",
    .doc = "a measured or computed profile from a CSV file, smoothed",
    .keys = KEYS,
    .key = {[TABLE] = {.key = "file",
                       .file = true,
                       .doc = "table of x with speed or density or both, and sound"},
            [FLUX] = {.key = "flux",
                      .dimension = TH_DIM_RATE,
                      .below = HUGE_VAL,
                      .optional = true,
                      .doc = "density times speed, of a table with a density and no speed"},
            [SOUND_UPSTREAM] = {.key = "sound_upstream",
                                .dimension = TH_DIM_SPEED,
                                .below = HUGE_VAL,
                                .optional = true,
                                .doc = "sound speed upstream, of a table without a column sound"},
            [STATE] = TH_STATE_KEY,
            [SCATTERING_LENGTH] = TH_SCATTERING_KEY,
            [SMOOTHING] = {.key = "smoothing",
                           .dimension = TH_DIM_LENGTH,
                           .below = HUGE_VAL,
                           .zero = true,
                           .optional = true,
                           .fallback = -1,
                           .doc = "length below which the table is smoothed; 0: not at all; "
                                  "absent: by cross-validation"},
            [TAPER] = {.key = "taper",
                       .dimension = TH_DIM_LENGTH,
                       .below = HUGE_VAL,
                       .optional = true,
                       .doc = "length at each end over which the table is led to a uniform state; "
                              "absent: a tenth of it"},
            [STRETCH] = {.key = "stretch",
                         .dimension = TH_DIM_NUMBER,
                         .below = HUGE_VAL,
                         .optional = true,
                         .fallback = 1,
                         .doc = "x of the flow over x of the table; smoothing and taper are "
                                "lengths of the table"}},
    .build = build,
};
