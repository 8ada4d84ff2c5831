/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * How the sections of a case share their reading of values, private to src/case.
 * What goes in: entries. What comes out: numbers, axes, the members of a th_case.
 * "Raw" numbers are as written: reduced in a reduced case, the SI unit in an SI case; a raw number
 * divided by th_scale_factor is reduced. Proved by tests/test_case.c and tests/broken. */
#ifndef TH_CASE_INSIDE_H
#define TH_CASE_INSIDE_H

#include "source.h"

/** Read a raw number: bare in a reduced case, with its unit in an SI case (plain numbers: bare in
 * both). TH_EINVAL with a sentence that does not repeat the value. */
TH_MUST_USE th_status th_case_raw(th_system system, const char *text, th_dimension dimension,
                                  double *raw, th_error *err);

/** Write a reduced value as the user would: with the SI unit in an SI case. */
void th_case_show(const th_scale *scale, th_dimension dimension, double value, char *buffer,
                  size_t size);

/** TH_EINVAL when a reduced value breaks the bounds of its key. */
TH_MUST_USE th_status th_case_in_bounds(const th_scale *scale, const th_shape_key *key,
                                        double value, th_error *err);

/** Read a key of the table that holds a quantity, in reduced units; *value is left alone when the
 * key is absent. TH_ECASE when it is not > 0 (not >= 0 where zero is allowed). */
TH_MUST_USE th_status th_case_quantity(const th_case_source *source, const th_scale *scale,
                                       th_case_key_id id, bool zero, double *value, th_error *err);

/** Which of a few words an entry holds; TH_ECASE with the list and the nearest. */
TH_MUST_USE th_status th_case_word(const th_case_source *source, const th_case_entry *entry,
                                   const char *const *word, int words, int *which, th_error *err);

/** Split "A to B in N": false when `text` has no word "to"; otherwise the three parts, of which
 * those that are missing are "". */
enum { TH_PART_MAX = 64 };
bool th_case_split(const char *text, char a[TH_PART_MAX], char b[TH_PART_MAX], char n[TH_PART_MAX]);

/* [sweep] as written: raw values, or parts of the value in [flow]. */
typedef struct {
    const th_case_entry *entry;
    int key; /* of the shape */
    bool relative;
    int count;
    double *value; /* [count] */
} th_case_axis;

/** The th_axis.key of a name; -1 when it is no number that can be swept. */
int th_case_axis_find(const th_shape *shape, const char *key);

/** Read all axes; on failure as on success the caller frees them with th_case_axes_free. */
TH_MUST_USE th_status th_case_axes_read(const th_case_source *source, const th_shape *shape,
                                        th_system system, th_case_axis **axis, int *axes,
                                        th_error *err);
void th_case_axes_free(th_case_axis *axis, int axes);

/** Turn the axes into those of the case, whose scale and setup are complete; values move over. */
TH_MUST_USE th_status th_case_axes_finish(const th_case_source *source, th_case_axis *axis,
                                          int axes, th_case *out, th_error *err);

/* What is known of the shape's keys while they are read. */
typedef struct {
    const th_case_entry *entry[TH_SHAPE_KEYS_MAX]; /* [flow], else [sweep]; NULL: absent */
    double raw[TH_SHAPE_KEYS_MAX];                 /* of a word its place in the list */
} th_case_flow;

/** The shape's keys as raw values: from [flow], else the first value of the key's axis; and the
 * table that one of them may name, which the caller owns. */
TH_MUST_USE th_status th_case_flow_read(const th_case_source *source, th_system system,
                                        const th_case_axis *axis, int axes,
                                        const th_flow_setup *setup, th_data **data,
                                        th_case_flow *out, th_error *err);

/** The scale: 1 throughout, or from the mass in kg and the speed that is the unit. */
TH_MUST_USE th_status th_case_scale_read(const th_case_source *source, th_system system,
                                         double mass, const th_shape *shape, const th_data *data,
                                         const th_case_flow *values, th_scale *out, th_error *err);

/** The base configuration in reduced units, each value within its own bounds. */
TH_MUST_USE th_status th_case_base_read(const th_case_source *source, const th_case_flow *values,
                                        th_case *out, th_error *err);

/** Build the base flow once: rules between keys. The key that the flow names is found in the case.
 */
TH_MUST_USE th_status th_case_flow_check(const th_case_source *source, const th_case *c,
                                         const th_case_flow *values, th_error *err);

/** Read [plan] into a case whose scale and setup are complete. */
TH_MUST_USE th_status th_case_plan_read(const th_case_source *source, th_case *out, th_error *err);

/** Write the canonical text of the case. */
TH_MUST_USE th_status th_case_text_write(const th_case_source *source, th_case *out, th_error *err);

#endif
