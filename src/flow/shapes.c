/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The table of shapes and the checks that hold for all of them. Goes in: a setup (shape, values,
 * ends). Comes out: its flow. May call: the shapes, flow, status.
 *
 * To add a shape: (1) copy shape_sech.c to shape_NAME.c and write its keys, checks and formulas;
 * (2) declare th_shape_NAME in shapes.h; (3) add it to the table below; (4) add its closed forms to
 * tests/test_flow.c. The case reader and the manual pages read the table.
 * Proved by tests/test_flow.c. */
#include "shapes.h"

#include <gsl/gsl_math.h>
#include <string.h>

#include "inside.h"

/* A speed that the winding of a ring fixes may be given to this relative precision. */
#define RING_SPEED_TOLERANCE 1e-9

static const th_shape *const table[] = {&th_shape_step, &th_shape_tanh, &th_shape_sech,
                                        &th_shape_well, &th_shape_barriers};

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

/* The value of one key, by the rules of th_shape_key. */
static th_status read_value(const th_flow_setup *setup, int i, double *value, th_error *err)
{
    const th_shape_key *key = &setup->shape->key[i];
    bool fixed = key->fixed_by_ring && setup->ends.kind == TH_ENDS_RING;
    double around = fixed ? 2 * M_PI * setup->ends.winding / setup->ends.circumference : 0;

    if (setup->given[i])
        *value = setup->value[i];
    else if (fixed)
        *value = around;
    else if (key->optional || key->si_only)
        *value = key->fallback;
    else
        return th_fail_key(err, TH_EINVAL, key->key, "%s is missing, shape %s needs it", key->key,
                           setup->shape->name);
    if (!isfinite(*value) || !(*value > key->above) || !(*value < key->below)) {
        if (key->below < HUGE_VAL)
            return th_fail_key(err, TH_EINVAL, key->key, "%s = %.15g, want > %g and < %g", key->key,
                               *value, key->above, key->below);
        return th_fail_key(err, TH_EINVAL, key->key, "%s = %.15g, want a finite number > %g",
                           key->key, *value, key->above);
    }
    if (fixed && !(fabs(*value - around) <= RING_SPEED_TOLERANCE * around))
        return th_fail_key(err, TH_EINVAL, key->key,
                           "%s = %.12g, but winding %d on circumference %.12g makes it %.12g",
                           key->key, *value, setup->ends.winding, setup->ends.circumference,
                           around);
    if (fixed)
        *value = around;
    return TH_OK;
}

th_status th_flow_build(const th_flow_setup *setup, th_flow **out, th_error *err)
{
    double value[TH_SHAPE_KEYS_MAX] = {0};
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
    for (int i = 0; i < setup->shape->keys; i++) {
        st = read_value(setup, i, &value[i], err);
        if (st != TH_OK)
            return st;
    }
    return setup->shape->build(value, setup->given, setup->density, &setup->ends, out, err);
}
