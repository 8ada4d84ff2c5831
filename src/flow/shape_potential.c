/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Shape potential: the stationary Gross-Pitaevskii flow in a given external potential, from the
 * state far upstream. Where no depth is given it is found such that the supersonic side is a
 * plateau; at a given depth all stationary flows are found and the one that is supersonic over most
 * of the pocket, and smoothest there, is taken. Goes in: values of the keys. Comes out: a flow on
 * elements, with a note that says what was found. May call: trap, stationary, plateau, state, flow.
 *
 * Symbols: rho = n/n_u = a^2, v_u, c_u upstream speed and sound speed.
 * To add a profile see trap.c. Proved by tests/test_potential.c, tests/check_potential.py. */
#include <gsl/gsl_math.h>
#include <stdio.h>

#include "../alloc.h"
#include "plateau.h"
#include "shapes.h"

enum {
    SOUND_UPSTREAM,
    MACH,
    FLUX,
    PROFILE,
    GAP,
    WIDTH,
    DEPTH,
    TABLE,
    STATE,
    SCATTERING_LENGTH,
    KEYS
};

/* Order of the elements: with the lengths of stationary.c exact to rounding. */
enum { ORDER = 16 };
/* Thinnest edge or barrier in upstream healing lengths: elements on it are then so short that
 * slopes keep ten digits. */
#define THINNEST 0.01
/* A critical depth nearer to the one asked for than this is none: both are on its edge. */
#define APART 1e-3
/* A given depth of a flow with one edge is the one that makes a plateau to this, relatively. */
#define SAME_DEPTH 1e-9
/* The nearest depth with a supersonic pocket is looked for in steps of this factor, so many of
 * them, and then bisected so often. */
#define DEPTH_FACTOR 1.15
enum { DEPTH_STEPS = 16, DEPTH_HALVINGS = 14 };
/* Features along a pocket whose density may undulate: one for each of these in healing lengths. */
#define FEATURE_SPACING 1.0
enum { FEATURES_MAX = 64, EDGES_MAX = TH_SMOOTH_INTERVALS + 5 };

typedef struct {
    th_trap trap;
    th_gll rule;
    th_stationary flow;
    double n_u;
    int jumps; /* sharp edges: flow pieces are trap pieces, counted from -1 */
    bool plateau;
} solved;

static void release(void *ctx)
{
    solved *s = ctx;

    th_stationary_clear(&s->flow);
    th_trap_clear(&s->trap);
    free(s);
}

static void eval(const void *ctx, int piece, double x, th_flow_point *point)
{
    const solved *s = ctx;
    const int inside = s->jumps > 0 ? piece - 1 : th_trap_piece(&s->trap, x);
    const bool flat = s->plateau && s->jumps == 2 && piece == 1; /* between two sharp edges */
    double a[3], rho, n;

    th_stationary_eval(&s->flow, inside, flat ? 0 : x, a);
    if (flat)
        a[1] = a[2] = 0;
    rho = a[0] * a[0];
    n = s->n_u * rho;
    *point = (th_flow_point){.n = n,
                             .dn = 2 * s->n_u * a[0] * a[1],
                             .ddn = 2 * s->n_u * (a[1] * a[1] + a[0] * a[2]),
                             .v = s->flow.up.v_u / rho,
                             .c = th_state_sound(&s->flow.up.state, n)};
    point->dv = -point->v * point->dn / n;
    point->dc = th_state_sound_slope(&s->flow.up.state, n) * point->dn;
}

static th_status check_keys(const th_flow_setup *setup, th_error *err)
{
    const th_trap_kind kind = (th_trap_kind)setup->value[PROFILE];
    const bool paired = kind == TH_TRAP_WELL || kind == TH_TRAP_BARRIERS;
    const bool table = kind == TH_TRAP_TABLE;

    if (setup->ends.kind == TH_ENDS_RING)
        return th_fail_key(
            err, TH_EINVAL, "kind",
            "shape potential has an upstream state of its own, so it cannot close on "
            "a ring");
    if (setup->given[MACH] == setup->given[FLUX])
        return th_fail_key(err, TH_EINVAL, setup->given[FLUX] ? "flux" : "mach",
                           setup->given[FLUX]
                               ? "flux and mach are both given, want one of them"
                               : "mach is missing, shape potential needs it or flux");
    if (setup->given[FLUX] && !(setup->value[FLUX] < setup->density * setup->value[SOUND_UPSTREAM]))
        return th_fail_key(err, TH_EINVAL, "flux",
                           "flux = %.15g makes the upstream state supersonic, want less than "
                           "density x sound_upstream = %.15g",
                           setup->value[FLUX], setup->density * setup->value[SOUND_UPSTREAM]);
    if (paired && !setup->given[GAP])
        return th_fail_key(err, TH_EINVAL, "gap", "gap is missing, profile = %s needs it",
                           th_trap_word[kind]);
    if (!paired && setup->given[GAP])
        return th_fail_key(err, TH_EINVAL, "gap",
                           "gap = %.15g, only the profiles well and barriers have one",
                           setup->value[GAP]);
    if (table && setup->given[WIDTH])
        return th_fail_key(err, TH_EINVAL, "width", "width = %.15g, profile = table has none",
                           setup->value[WIDTH]);
    if (table && setup->given[DEPTH])
        return th_fail_key(err, TH_EINVAL, "depth", "depth = %.15g, profile = table has its own",
                           setup->value[DEPTH]);
    if (table && setup->data == NULL)
        return th_fail_key(err, TH_EINVAL, "file", "file is missing, profile = table needs it");
    if (!table && setup->data != NULL)
        return th_fail_key(err, TH_EINVAL, "file", "only profile = table reads a file");
    if (setup->value[WIDTH] > 0 && setup->value[WIDTH] * setup->value[SOUND_UPSTREAM] < THINNEST)
        return th_fail_key(err, TH_EINVAL, "width",
                           "width = %.15g is less than %g healing lengths; give 0 for a jump",
                           setup->value[WIDTH], THINNEST);
    return th_state_check((int)setup->value[STATE], setup->value[SCATTERING_LENGTH], err);
}

/* The depth nearest to `depth` at which a flow is supersonic over most of the pocket; 0: none near.
 */
static th_status nearest(const solved *s, const th_upstream *up, double depth, const double *pocket,
                         double *found, th_error *err)
{
    th_status st = TH_OK;

    *found = 0;
    for (int i = 1; i <= DEPTH_STEPS && *found == 0; i++)
        for (int side = -1; side <= 1 && *found == 0; side += 2) {
            double with = depth * pow(DEPTH_FACTOR, side * i), without = with;
            int count = 0;

            st = th_flows_count(&s->trap, up, with, pocket, &count, err);
            if (st != TH_OK)
                return st;
            if (count == 0)
                continue;
            without = with / pow(DEPTH_FACTOR, side);
            for (int k = 0; k < DEPTH_HALVINGS; k++) {
                const double middle = (with + without) / 2;

                st = th_flows_count(&s->trap, up, middle, pocket, &count, err);
                if (st != TH_OK)
                    return st;
                *(count > 0 ? &with : &without) = middle;
            }
            *found = with;
        }
    return TH_OK;
}

/* No flow of the list is supersonic in the pocket. */
static th_status refuse(const solved *s, const th_upstream *up, double depth, const double *pocket,
                        const th_flow_list *list, th_error *err)
{
    const bool table = s->trap.kind == TH_TRAP_TABLE;
    double found = 0;
    th_status st = nearest(s, up, depth, pocket, &found, err);
    char near[96] = "and none within a factor of nine";

    if (st != TH_OK)
        return st;
    if (found > 0 && fabs(found - depth) < APART * depth)
        (void)snprintf(near, sizeof near, "and it is too close to the limit of such flows");
    else if (found > 0)
        (void)snprintf(near, sizeof near, "the nearest %s with one is %.4g",
                       table ? "multiple of the table" : "depth", found);
    return th_fail_key(err, TH_EINVAL, table ? "file" : "depth",
                       "%s%.15g: no stationary flow is supersonic in the pocket (%d other%s), %s",
                       table ? "potential times " : "depth = ", depth, list->count,
                       list->count == 1 ? " exists" : "s exist", near);
}

/* What is said of the flow that was taken and of the others. */
static void describe(const solved *s, const th_flow_list *list, char *note, size_t size)
{
    const double c_u = s->flow.up.state.c_u;
    size_t used = (size_t)snprintf(
        note, size, "depth %.10g m sound_upstream^2%s; the stationary equation holds to %.1e",
        s->flow.depth / (c_u * c_u), s->plateau ? ", found for a plateau" : "", s->flow.residual);

    if (list->count > 1 && used < size)
        used += (size_t)snprintf(note + used, size - used,
                                 "; density varies by %.2g %% in the "
                                 "pocket; %d more at this depth:",
                                 200 * list->ripple[0], list->count - 1);
    for (int i = 1; i < list->count && used < size; i++)
        used += (size_t)snprintf(note + used, size - used,
                                 "%s supersonic over %.0f %% (varies by "
                                 "%.2g %%)",
                                 i > 1 ? "," : "", 100 * list->inside[i], 200 * list->ripple[i]);
}

/* The flow at a given depth. */
static th_status choose(solved *s, const th_upstream *up, double depth, char *note, size_t size,
                        th_error *err)
{
    const bool table = s->trap.kind == TH_TRAP_TABLE;
    const double half = s->trap.half;
    const double pocket[2] = {table ? s->trap.core[0] : -half, table ? s->trap.core[1] : half};
    th_flow_list *list = th_alloc(1, sizeof *list);
    th_status st;

    if (list == NULL)
        return th_fail(err, TH_ENOMEM, "potential: a list of flows");
    st = th_flows_find(&s->trap, up, depth, pocket, &s->rule, list, err);
    if (st == TH_OK && !th_flow_list_transonic(list))
        st = refuse(s, up, depth, pocket, list, err);
    if (st == TH_OK) {
        s->flow = list->flow[0];
        list->flow[0] = (th_stationary){0};
        describe(s, list, note, size);
    }
    th_flow_list_clear(list);
    free(list);
    return st;
}

/* The flow at the depth that makes a plateau; a given depth must be that one. */
static th_status find(solved *s, const th_upstream *up, const th_flow_setup *setup, char *note,
                      size_t size, th_error *err)
{
    const double given = setup->value[DEPTH];
    const th_flow_list alone = {.count = 1};
    th_status st = th_plateau_find(&s->trap, up, &s->rule, &s->flow, err);

    if (st != TH_OK)
        return st;
    s->plateau = true;
    if (setup->given[DEPTH] && !(fabs(given - s->flow.depth) <= SAME_DEPTH * given))
        return th_fail_key(
            err, TH_EINVAL, "depth",
            "depth = %.15g: no stationary flow is uniform and supersonic downstream; "
            "the only depth with one is %.10g",
            given, s->flow.depth);
    describe(s, &alone, note, size);
    return TH_OK;
}

/* Edges and features of the flow. */
static void lay_out(const solved *s, double *edge, bool *uniform, th_feature *feature,
                    th_flow_spec *spec)
{
    const th_stationary *f = &s->flow;
    const double first = f->at[0], end = f->at[f->elements];
    const bool mirrored = f->half && th_trap_plateau(&s->trap) == 0 && s->trap.features == 2;
    const double last = mirrored ? -first : end;
    const double from = fmax(s->trap.core[0], first), to = fmin(s->trap.core[1], last);
    const double healing = 1 / f->up.state.c_u;
    int many = (int)fmin(FEATURES_MAX - 2, ceil((to - from) / (FEATURE_SPACING * healing)));

    spec->pieces = 0;
    edge[0] = first;
    for (double at = th_trap_next_cut(&s->trap, first);
         (s->jumps > 0 || s->trap.kind == TH_TRAP_TABLE) && at < last;
         at = th_trap_next_cut(&s->trap, at))
        edge[++spec->pieces] = at;
    edge[++spec->pieces] = last;
    for (int i = 0; i < spec->pieces; i++)
        uniform[i] = s->plateau && s->jumps == 2 && i == 1;
    spec->features = 0;
    for (int i = 0; i < s->trap.features; i++) {
        const th_feature *own = &s->trap.feature[i];

        feature[spec->features++] = (th_feature){
            .x = own->x, .width = own->width > 0 ? fmin(own->width, f->scale) : f->scale};
    }
    if (s->plateau)
        many = 0;
    for (int i = 0; i < many; i++)
        feature[spec->features++] = (th_feature){.x = from + (to - from) * (i + 0.5) / many,
                                                 .width = FEATURE_SPACING * healing};
    spec->edge = edge;
    spec->uniform = uniform;
    spec->feature = feature;
}

static th_status build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    const double *value = setup->value;
    const th_trap_kind kind = (th_trap_kind)value[PROFILE];
    const bool one = kind == TH_TRAP_STEP || kind == TH_TRAP_BARRIER;
    const th_upstream up = {.state = {.n_u = setup->density,
                                      .c_u = value[SOUND_UPSTREAM],
                                      .a = value[SCATTERING_LENGTH]},
                            .v_u = setup->given[FLUX] ? value[FLUX] / setup->density
                                                      : value[MACH] * value[SOUND_UPSTREAM]};
    char note[TH_FLOW_NOTE_MAX] = "";
    double edge[EDGES_MAX];
    bool uniform[EDGES_MAX];
    th_feature feature[FEATURES_MAX];
    th_flow_spec spec = {
        .eval = eval, .release = release, .scattering = value[SCATTERING_LENGTH], .note = note};
    solved *s = NULL;
    th_status st = check_keys(setup, err);

    if (st != TH_OK)
        return st;
    s = th_alloc(1, sizeof *s);
    if (s == NULL)
        return th_fail(err, TH_ENOMEM, "shape potential: its parameters");
    s->n_u = setup->density;
    st = th_gll_make(ORDER, &s->rule, err);
    if (st == TH_OK)
        st = th_trap_make(kind, value[GAP], value[WIDTH], setup->data, &s->trap, err);
    if (st == TH_OK && (one || (kind != TH_TRAP_TABLE && !setup->given[DEPTH])))
        st = find(s, &up, setup, note, sizeof note, err);
    else if (st == TH_OK)
        st = choose(s, &up, kind == TH_TRAP_TABLE ? 1 : value[DEPTH], note, sizeof note, err);
    if (st == TH_OK) {
        s->jumps = value[WIDTH] > 0 || kind == TH_TRAP_TABLE ? 0 : kind == TH_TRAP_STEP ? 1 : 2;
        lay_out(s, edge, uniform, feature, &spec);
        spec.ctx = s;
        st = th_flow_create(&spec, &setup->ends, out, err);
    }
    if (st != TH_OK)
        release(s);
    return st;
}

const th_shape th_shape_potential = {
    .name = "potential",
    .doc = "stationary flow in an external potential, supersonic in the pocket",
    .keys = KEYS,
    .key = {[SOUND_UPSTREAM] = {.key = "sound_upstream",
                                .dimension = TH_DIM_SPEED,
                                .below = HUGE_VAL,
                                .fallback = 1,
                                .si_only = true,
                                .doc = "sound speed upstream; 1 in a reduced case"},
            [MACH] = {.key = "mach",
                      .dimension = TH_DIM_NUMBER,
                      .below = 1,
                      .optional = true,
                      .doc = "upstream Mach number; this or flux"},
            [FLUX] = {.key = "flux",
                      .dimension = TH_DIM_RATE,
                      .below = HUGE_VAL,
                      .optional = true,
                      .absolute = true,
                      .doc = "density times speed, in place of mach"},
            [PROFILE] = {.key = "profile",
                         .word = th_trap_word,
                         .doc = "form of the potential: well, step (down), barrier, barriers "
                                "(Gaussian), table"},
            [GAP] = {.key = "gap",
                     .dimension = TH_DIM_LENGTH,
                     .below = HUGE_VAL,
                     .optional = true,
                     .doc = "length of the well, distance of the barriers"},
            [WIDTH] = {.key = "width",
                       .dimension = TH_DIM_LENGTH,
                       .below = HUGE_VAL,
                       .zero = true,
                       .optional = true,
                       .doc = "width of the tanh edges, default 0: sharp; of a barrier "
                              "exp(-x^2/width^2)"},
            [DEPTH] = {.key = "depth",
                       .dimension = TH_DIM_SPEED_SQUARED,
                       .below = HUGE_VAL,
                       .optional = true,
                       .doc = "depth of the well or step, height of barriers, over the mass; found "
                              "for a plateau when absent"},
            [TABLE] = {.key = "file",
                       .file = true,
                       .optional = true,
                       .doc = "table of x and potential, of profile = table"},
            [STATE] = TH_STATE_KEY,
            [SCATTERING_LENGTH] = TH_SCATTERING_KEY},
    .build = build,
};
