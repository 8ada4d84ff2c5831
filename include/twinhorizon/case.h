/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The case file: reads INI text, checks every key, converts units, and hands out one
 * configuration and the axes of a sweep. Depends on flow, units, status.
 *
 * The text: UTF-8, at most 1 MiB, lines of at most 196 bytes, `key = value` in [section]s.
 * Comments start with ; or # at the start of a line, with a blank and ; after a value. A value that
 * ends in a comma goes on in the next line. A section or a key that stands twice is an error.
 * Units: bare numbers in a reduced case; in an SI case every number but Mach numbers, counts and
 * the accuracy carries its unit. The SI unit of speed is [flow] sound_upstream, or speed in a
 * shape that has no sound_upstream.
 * [sweep]: `KEY = a, b, c` or `KEY = A to B in N` (2 <= N <= 1e7, both ends included, at most 1e9
 * configurations in all); values in % are relative to [flow] KEY. All values of an axis differ.
 * A key that names a table takes its path, relative to the folder of the case file (to the current
 * folder when --set gives it). The unit of speed of an SI case whose shape has neither
 * sound_upstream nor speed, or leaves them out, is the median of the table's sound speeds.
 * KEY is a number of [flow], or winding, circumference (rings) or padding (walls) of [ends].
 * A key that is swept may be absent in [flow]: the first value of its axis is then its base value.
 * Only the base configuration is built here; rules between keys may still fail at other points. */
#ifndef TWINHORIZON_CASE_H
#define TWINHORIZON_CASE_H

#include <stdbool.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/status.h>
#include <twinhorizon/units.h>

#ifdef __cplusplus
extern "C" {
#endif

/* One axis of a sweep: a numeric key of [flow] or of [ends] and its values. */
typedef struct {
    int key;          /* index into shape->key; from TH_AXIS_ENDS on keys of [ends] */
    const char *name; /* as in the case file */
    int count;        /* >= 1 */
    double *value;    /* [count] reduced units */
} th_axis;

enum { TH_AXIS_ENDS = TH_SHAPE_KEYS_MAX };

/** What an axis measures and the bounds of its values: the shape's key, or winding, circumference,
 * padding in the same form. */
const th_shape_key *th_axis_key(const th_shape *shape, int key);

/** Put a value of an axis into a setup. */
void th_axis_set(int key, double value, th_flow_setup *setup);

/* Contrast that counts as visible unless told; common practice, no source. */
#define TH_VISIBILITY 0.1

/* [plan], in reduced units; 0 when absent. */
typedef struct {
    bool present; /* a [plan] section or key was given, the section may be empty */
    double hold_time, lifetime, temperature; /* reduced units (temperature: k_B T) */
    bool has_ramp;
    double ramp_from, ramp_to, ramp_time; /* gap_ramp, reduced units */
    bool has_range;
    double range_from, range_to; /* gap_range, reduced units, from < to */
    double resolution;           /* smallest period that the imaging resolves, reduced length */
    double visibility;           /* rms density contrast that can be seen; TH_VISIBILITY when
                                    not given */
    double transverse;           /* transverse_frequency, reduced (angular) */
    int samples;                 /* of the tolerances; 0 when not given */
    int seed;                    /* of the samples */
    double tolerance[TH_SHAPE_KEYS_MAX]; /* relative, by shape key; 0 when absent */
} th_plan_request;

typedef struct {
    char *path; /* as given */
    char *text; /* the case in canonical form: every key in force, one a line, with
                   overrides applied; embedded in metadata. Of a table it holds the file's
                   name without folders, and how many rows with which hash */
    th_scale scale;
    th_flow_setup setup; /* base configuration, checked: th_flow_build succeeds */
    th_data *data;       /* the table that a key of the shape names, in reduced units; or NULL */
    bool density_given;  /* [flow] density was given; else densities are relative */
    double loss_rate;    /* [flow], dn/dt = -loss_rate n, reduced; 0 when not given */
    double accuracy;     /* [solve] accuracy, relative to omega_max (see modes.h) */
    int axes;            /* [sweep]; 0 when absent; first axis slowest */
    th_axis *axis;       /* [axes] */
    th_plan_request plan;
} th_case;

/**
 * Read and check a case file.
 *
 * @param[in]  path       file to read
 * @param[in]  override   [overrides] "section.key=value" strings, later ones win; may be NULL
 * @param[out] out        owned by the caller; NULL on failure
 * @retval TH_EIO    the file cannot be read
 * @retval TH_ECASE  a rule is broken; the text starts with "FILE:LINE: [section] key" (or
 *                   "--set section.key=value" when an override is to blame) and names the rule
 *                   and the value
 */
TH_MUST_USE th_status th_case_read(const char *path, const char *const *override, int overrides,
                                   th_case **out, th_error *err);

/** As th_case_read, from text in memory; `name` stands for the file in messages. */
TH_MUST_USE th_status th_case_read_text(const char *name, const char *text,
                                        const char *const *override, int overrides, th_case **out,
                                        th_error *err);

/** Release a case; NULL is allowed. */
void th_case_destroy(th_case *c);

/* A documented key of a section other than the shape's own [flow] keys. */
typedef struct {
    const char *section;
    const char *key;
    const char *doc; /* one line: meaning, default, range */
} th_case_key;

/** The table of keys that are not a shape's; the shapes' keys are in th_shape.key. */
const th_case_key *th_case_keys(int *count);

#ifdef __cplusplus
}
#endif
#endif
