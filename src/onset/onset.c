/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Switch-on lengths of one setup: the rules of the options, the list. In: a setup.
 * Out: a list, from open.c or closed.c as the ends demand. May call: these, case, flow, status.
 * Proved by tests/test_onset.c. */
#include "twinhorizon/onset.h"

#include <math.h>
#include <stdlib.h>

#include "onset/inside.h"

/* A search without any hint goes to this multiple of the base value: a pocket that grows one mode
 * then shows a handful. */
#define UPTO_TIMES 4
/* The list grows by doubling from here. */
enum { LIST_FIRST = 8 };

const char *th_onset_kind_text(th_onset_kind kind)
{
    return kind == TH_ONSET_PAIR ? "pair" : "growing";
}

double th_onset_upto(const th_case *c)
{
    const int key = c != NULL ? th_shape_length(c->setup.shape) : -1;
    double upto = 0;

    if (key < 0)
        return 0;
    for (int a = 0; a < c->axes; a++)
        for (int i = 0; c->axis[a].key == key && i < c->axis[a].count; i++)
            upto = fmax(upto, c->axis[a].value[i]);
    return upto > 0 ? upto : UPTO_TIMES * c->setup.value[key];
}

th_onset *th_onset_add(th_onset_list *list)
{
    /* Full when the count is LIST_FIRST times a power of two. */
    const int n = list->count;

    if (n == 0 || (n >= LIST_FIRST && (n & (n - 1)) == 0)) {
        const size_t room = n == 0 ? LIST_FIRST : 2 * (size_t)n;
        th_onset *more = realloc(list->onset, room * sizeof *more);

        if (more == NULL)
            return NULL;
        list->onset = more;
    }
    list->onset[n] = (th_onset){0};
    list->count++;
    return &list->onset[n];
}

void th_onset_clear(th_onset_list *list)
{
    free(list->onset);
    *list = (th_onset_list){0};
}

th_flow_setup th_onset_setup(const th_flow_setup *setup, int key, double length)
{
    th_flow_setup at = *setup;

    at.value[key] = length;
    at.given[key] = true;
    return at;
}

th_status th_onset_check(const th_shape *shape, const th_onset_options *options, th_error *err)
{
    if (th_shape_length(shape) < 0)
        return th_fail(err, TH_EINVAL, "onset: shape %s has no key that is a pocket's length",
                       shape != NULL ? shape->name : "NULL");
    if (!(options->upto > 0) || !isfinite(options->upto))
        return th_fail(err, TH_EINVAL, "onset: upto = %.15g, want a finite length > 0",
                       options->upto);
    if (options->orders < 0)
        return th_fail(err, TH_EINVAL, "onset: orders = %d, want >= 0", options->orders);
    if (options->samples < 0 || options->samples == 1)
        return th_fail(err, TH_EINVAL, "onset: samples = %d, want 0 or >= 2", options->samples);
    if (options->threads < 1)
        return th_fail(err, TH_EINVAL, "onset: threads = %d, want >= 1", options->threads);
    return TH_OK;
}

th_status th_onset_find(const th_flow_setup *setup, const th_onset_options *options,
                        th_onset_list *out, th_error *err)
{
    th_status st;

    if (setup == NULL || options == NULL || out == NULL)
        return th_fail(err, TH_EINVAL, "onset: want a setup, options and a place for the result");
    st = th_onset_check(setup->shape, options, err);
    if (st != TH_OK)
        return st;
    if (setup->ends.kind == TH_ENDS_OPEN)
        return th_onset_open(setup, options, 0, NULL, out, err);
    return th_onset_closed(setup, options, out, err);
}
