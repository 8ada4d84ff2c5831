/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The one table of sections and keys of a case file, private to src/case.
 * What goes in: names. What comes out: rows of the table and nearest names for messages.
 * To add a key: one row here, and the place that reads it; the parser's check of names, the
 * suggestions and the documents (th_case_keys) follow. Proved by tests/test_case.c. */
#ifndef TH_CASE_KEYS_H
#define TH_CASE_KEYS_H

#include "twinhorizon/case.h"

/* Sections in canonical order. */
#define TH_CASE_SECTION_LIST(X)                                                                    \
    X(UNITS, "units")                                                                              \
    X(ATOM, "atom")                                                                                \
    X(FLOW, "flow")                                                                                \
    X(ENDS, "ends")                                                                                \
    X(SOLVE, "solve")                                                                              \
    X(SWEEP, "sweep")                                                                              \
    X(PLAN, "plan")

/* Keys that are not a shape's: name, section, key, what it measures, one line of documentation.
 * A key with KEY in it stands for every key of the shape. */
#define TH_CASE_KEY_LIST(X)                                                                        \
    X(SYSTEM, "units", "system", TH_DIM_NUMBER,                                                    \
      "required: reduced (hbar = m = 1, bare numbers) or SI (every number with its unit)")         \
    X(SPECIES, "atom", "species", TH_DIM_NUMBER,                                                   \
      "SI only, this or mass: the isotope, such as K-39, whose mass fixes the scale")              \
    X(MASS, "atom", "mass", TH_DIM_MASS,                                                           \
      "SI only, this or species: mass of one atom, such as 38.9637 u; > 0")                        \
    X(SHAPE, "flow", "shape", TH_DIM_NUMBER, "required: the shape of the flow, see its own keys")  \
    X(DENSITY, "flow", "density", TH_DIM_LINE_DENSITY,                                             \
      "upstream line density, default: densities relative to upstream; > 0")                       \
    X(LOSS_RATE, "flow", "loss_rate", TH_DIM_RATE,                                                 \
      "rate at which atoms are lost, dn/dt = -loss_rate n, default 0; >= 0")                       \
    X(KIND, "ends", "kind", TH_DIM_NUMBER,                                                         \
      "open (default): the flow goes on for ever; ring: it closes on itself; walls: a hard box")   \
    X(CIRCUMFERENCE, "ends", "circumference", TH_DIM_LENGTH,                                       \
      "ring only, required: its length; > 0")                                                      \
    X(WINDING, "ends", "winding", TH_DIM_NUMBER,                                                   \
      "ring only, required: closed integral of v dx over 2 pi hbar/m; whole number >= 1")          \
    X(PADDING, "ends", "padding", TH_DIM_LENGTH,                                                   \
      "walls only, required: uniform length added beyond each end of the flow; >= 0")              \
    X(ACCURACY, "solve", "accuracy", TH_DIM_NUMBER,                                                \
      "wanted error of a frequency relative to the top of the negative-energy band, default "      \
      "1e-9; 1e-12 to 1e-3")                                                                       \
    X(SWEEP_AXIS, "sweep", "KEY", TH_DIM_NUMBER,                                                   \
      "axis over a number of the shape or of [ends]: `a, b, c`, or `A to B in N` with both ends "  \
      "included; `-10 % to 10 % in N` is relative to the value in [flow]; first axis slowest")     \
    X(HOLD_TIME, "plan", "hold_time", TH_DIM_TIME, "time for which the flow is held; > 0")         \
    X(LIFETIME, "plan", "lifetime", TH_DIM_TIME, "1/e lifetime of the cloud; > 0")                 \
    X(TEMPERATURE, "plan", "temperature", TH_DIM_TEMPERATURE,                                      \
      "temperature of the cloud (reduced: k_B T); > 0")                                            \
    X(GAP_RAMP, "plan", "gap_ramp", TH_DIM_LENGTH,                                                 \
      "`A to B in T`: the length of the pocket (gap; width, stretch) goes from A to B in a time "  \
      "T")                                                                                         \
    X(GAP_RANGE, "plan", "gap_range", TH_DIM_LENGTH,                                               \
      "`A to B`: lengths among which the best one is looked for, default: the axis of [sweep] "    \
      "over it, else from half to twice the value in [flow]")                                      \
    X(RESOLUTION, "plan", "resolution", TH_DIM_LENGTH,                                             \
      "smallest period of a density ripple that the imaging resolves; > 0")                        \
    X(VISIBILITY, "plan", "visibility", TH_DIM_NUMBER,                                             \
      "rms density contrast that can be told from noise, default 0.1; > 0 and < 1, may be in %")   \
    X(TRANSVERSE, "plan", "transverse_frequency", TH_DIM_RATE,                                     \
      "frequency of the transverse trap, for the checks of one dimension; > 0")                    \
    X(SAMPLES, "plan", "samples", TH_DIM_NUMBER,                                                   \
      "how many flows are tried within the tolerances, default 1024; a multiple of 8, 64 to "      \
      "1000000")                                                                                   \
    X(SEED, "plan", "seed", TH_DIM_NUMBER,                                                         \
      "of the samples: same seed, same numbers; default 1, a whole number >= 0")                   \
    X(TOLERANCE, "plan", "tolerance.KEY", TH_DIM_NUMBER,                                           \
      "how far a key of the shape may drift, in % of its value; above 0 % and below 100 %")

typedef enum {
#define TH_CASE_SECTION_ENUM(id, name) TH_SECTION_##id,
    TH_CASE_SECTION_LIST(TH_CASE_SECTION_ENUM)
#undef TH_CASE_SECTION_ENUM
        TH_SECTIONS
} th_case_section;

typedef enum {
#define TH_CASE_KEY_ENUM(id, section, key, dimension, doc) TH_KEY_##id,
    TH_CASE_KEY_LIST(TH_CASE_KEY_ENUM)
#undef TH_CASE_KEY_ENUM
        TH_KEYS
} th_case_key_id;

/* What tolerance keys begin with; the rest is a key of the shape. */
#define TH_TOLERANCE_PREFIX "tolerance."

/** Index of a section; TH_SECTIONS when there is none of that name. */
th_case_section th_case_section_find(const char *name);
const char *th_case_section_name(th_case_section section);

/** Index of a key of the table by section and name; TH_KEYS when unknown. */
th_case_key_id th_case_key_find(const char *section, const char *key);
const char *th_case_key_name(th_case_key_id id);
const char *th_case_key_section(th_case_key_id id);
th_dimension th_case_key_dimension(th_case_key_id id);

/** Index of a key of a shape; -1 when it has none of that name. */
int th_shape_key_find(const th_shape *shape, const char *key);

/** The candidate [count >= 1] with the smallest edit distance to a word, the first of equals. */
const char *th_case_nearest(const char *word, const char *const *candidate, int count);

/** The section nearest to a name. */
const char *th_case_section_nearest(const char *name);

/**
 * Check that a key may stand in a section of a case of this shape.
 * @retval TH_EINVAL  it may not; the sentence names the shapes or the section that have the key,
 *                    or the nearest valid key
 */
TH_MUST_USE th_status th_case_key_check(const th_shape *shape, const char *section, const char *key,
                                        th_error *err);

#endif
