/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The table of shapes and the checks that hold for all of them. Goes in: a setup (shape, values,
 * ends). Comes out: its flow. May call: the shapes, flow, status.
 *
 * To add a shape: (1) copy shape_sech.c to shape_NAME.c and write its keys, checks and formulas;
 * (2) declare th_shape_NAME in shapes.h; (3) add it to the table below; (4) add its closed forms to
 * tests/test_flow.c. The case reader reads the table.
 * Proved by tests/test_flow.c. */
#include "shapes.h"

#include <gsl/gsl_math.h>
#include <string.h>

#include "inside.h"

/* A speed that the winding of a ring fixes may be given to this relative precision. */
#define RING_SPEED_TOLERANCE 1e-9

static const th_shape *const table[] = {
    &th_shape_step,     &th_shape_tanh,       &th_shape_sech,      &th_shape_well,
    &th_shape_barriers, &th_shape_continuity, &th_shape_potential, &th_shape_table};

/* Keys that are the length of the pocket, the first that a shape has counts. */
static const char *const length_key[] = {"gap", "width", "stretch"};

int th_shape_count(void)
{
    return (int)(sizeof table / sizeof *table);
}

const th_shape *th_shape_at(int i)
{
    return i >= 0 && i < th_shape_count() ? table[i] : NULL;
}

const th_shape *th_shape_find(const char *name)
{
    for (int i = 0; name != NULL && i < th_shape_count(); i++)
        if (strcmp(table[i]->name, name) == 0)
            return table[i];
    return NULL;
}

int th_shape_length(const th_shape *shape)
{
    for (size_t k = 0; shape != NULL && k < sizeof length_key / sizeof *length_key; k++)
        for (int i = 0; i < shape->keys; i++)
            if (strcmp(shape->key[i].key, length_key[k]) == 0)
                return i;
    return -1;
}

double th_tail_reach(double relative, double width, double sound)
{
    /* slope per healing length = 2/(width sound) x tail */
    double tail = relative * fmax(1, 2 / (width * sound));

    return tail > TH_TAIL_CUT ? width / 2 * log(tail / TH_TAIL_CUT) : 0;
}

th_status th_shape_fits_ring(const th_ends *ends, double sound_upstream, double sound_downstream,
                             double gap, th_error *err)
{
    if (ends->kind != TH_ENDS_RING)
        return TH_OK;
    if (sound_upstream != sound_downstream)
        return th_fail_key(err, TH_EINVAL, "sound_downstream",
                           "sound_downstream = %.15g must equal sound_upstream = %.15g on a ring, "
                           "where the two meet",
                           sound_downstream, sound_upstream);
    if (!(gap < ends->circumference))
        return th_fail_key(err, TH_EINVAL, "gap",
                           "gap = %.15g does not fit on a ring of circumference %.15g", gap,
                           ends->circumference);
    return TH_OK;
}

/* A number that the user gave or the ring fixes, against the bounds of its key. */
static th_status check_bounds(const th_shape_key *key, double value, th_error *err)
{
    const char *than = key->zero ? ">=" : ">";

    if (isfinite(value) && (value > key->above || (key->zero && value == key->above)) &&
        value < key->below)
        return TH_OK;
    if (key->below < HUGE_VAL)
        return th_fail_key(err, TH_EINVAL, key->key, "%s = %.15g, want %s %g and < %g", key->key,
                           value, than, key->above, key->below);
    return th_fail_key(err, TH_EINVAL, key->key, "%s = %.15g, want a finite number %s %g", key->key,
                       value, than, key->above);
}

/* A key that holds a word or names a table. */
static th_status check_other(const th_flow_setup *setup, int i, double *value, th_error *err)
{
    const th_shape_key *key = &setup->shape->key[i];
    bool there = key->file ? setup->data != NULL : setup->given[i];
    int words = 0;

    while (key->word != NULL && key->word[words] != NULL)
        words++;
    if (there && key->word != NULL) {
        *value = setup->value[i];
        if (!(*value >= 0 && *value < words && *value == floor(*value)))
            return th_fail_key(err, TH_EINVAL, key->key, "%s: word %g of %d", key->key, *value,
                               words);
    } else if (there || key->optional) {
        *value = key->fallback;
    } else {
        return th_fail_key(err, TH_EINVAL, key->key, "%s is missing, shape %s needs it", key->key,
                           setup->shape->name);
    }
    return TH_OK;
}

/* The value of one key, by the rules of th_shape_key. */
static th_status read_value(const th_flow_setup *setup, int i, double *value, th_error *err)
{
    const th_shape_key *key = &setup->shape->key[i];
    bool ring = key->fixed_by_ring && setup->ends.kind == TH_ENDS_RING;
    bool fixed = ring && !setup->shape->closes_itself;
    double around = fixed ? 2 * M_PI * setup->ends.winding / setup->ends.circumference : 0;
    th_status st;

    if (!th_shape_key_number(key))
        return check_other(setup, i, value, err);
    if (setup->given[i])
        *value = setup->value[i];
    else if (fixed)
        *value = around;
    else if (ring || key->optional || key->si_only) {
        *value = ring ? 0 : key->fallback; /* on such a ring the shape finds it */
        return TH_OK;
    } else
        return th_fail_key(err, TH_EINVAL, key->key, "%s is missing, shape %s needs it", key->key,
                           setup->shape->name);
    st = check_bounds(key, *value, err);
    if (st != TH_OK)
        return st;
    if (fixed && !(fabs(*value - around) <= RING_SPEED_TOLERANCE * around))
        return th_fail_key(err, TH_EINVAL, key->key,
                           "%s = %.12g, but winding %d on circumference %.12g makes it %.12g",
                           key->key, *value, setup->ends.winding, setup->ends.circumference,
                           around);
    if (fixed)
        *value = around;
    return TH_OK;
}

th_status th_shape_flow(const th_flow_setup *setup, const th_flow_spec *spec, th_flow **out,
                        th_error *err)
{
    const th_status st = th_flow_create_in(spec, &setup->ends, setup->workspace, out, err);

    if (st == TH_OK)
        (*out)->owned = spec->ctx;
    return st;
}

th_status th_flow_build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    th_flow_setup full;
    th_status st;

    if (out != NULL)
        *out = NULL;
    if (setup == NULL || setup->shape == NULL || out == NULL)
        return th_fail(err, TH_EINVAL,
                       "flow: a setup with a shape and a place for the result are needed");
    if (!(setup->density > 0) || !isfinite(setup->density))
        return th_fail_key(err, TH_EINVAL, "density", "density = %.15g, want a finite number > 0",
                           setup->density);
    st = th_ends_check(&setup->ends, err);
    if (st != TH_OK)
        return st;
    full = *setup;
    for (int i = 0; i < setup->shape->keys; i++) {
        st = read_value(setup, i, &full.value[i], err);
        if (st != TH_OK)
            return st;
    }
    return setup->shape->build(&full, out, err);
}
