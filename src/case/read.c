/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A case from a file or a text: the order of the checks, and the sections but [sweep] and [plan].
 * In: path or text, overrides. Out: a th_case whose base flow can be built, or a sentence that
 * says which rule was broken where. Calls source, keys, value, sweep, plan, canon, flow, units.
 * Symbols: hbar = m = 1 in reduced units; the unit of speed of an SI case is sound_upstream, or
 * speed where a shape has no sound_upstream, or the median of the table's sound speeds.
 * To add a section: keys.h, and a function here, called from read_sections.
 * Proved by tests/test_case.c and tests/broken. */
#define _POSIX_C_SOURCE 200809L

#include "inside.h"

#include "../alloc.h"
#include "../units/text.h"

#include <errno.h>
#include <limits.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

/* [solve] accuracy: the default and its range. Below 1e-12 rounding of the matrix spectrum takes
 * over; above 1e-3 the checks of one method by another would prove nothing. */
#define ACCURACY_DEFAULT 1e-9
#define ACCURACY_MIN     1e-12
#define ACCURACY_MAX     1e-3

/* More shapes than there will be: room for their names in a message. */
enum { SHAPES_MAX = 32 };

static th_status read_system(const th_case_source *source, th_system *system, th_error *err)
{
    static const char *const word[] = {"reduced", "SI"};
    const th_case_entry *entry = th_case_source_key(source, TH_KEY_SYSTEM);
    int which = 0;
    th_status st;

    if (entry == NULL)
        return th_case_blame_missing(err, source, th_case_key_section(TH_KEY_SYSTEM),
                                     th_case_key_name(TH_KEY_SYSTEM), "want reduced or SI");
    st = th_case_word(source, entry, word, 2, &which, err);
    *system = which == 0 ? TH_SYSTEM_REDUCED : TH_SYSTEM_SI;
    return st;
}

static th_status read_shape(const th_case_source *source, const th_shape **shape, th_error *err)
{
    const th_case_entry *entry = th_case_source_key(source, TH_KEY_SHAPE);
    const char *name[SHAPES_MAX];
    int shapes = th_shape_count() < SHAPES_MAX ? th_shape_count() : SHAPES_MAX, which = 0;
    th_status st;

    for (int i = 0; i < shapes; ++i)
        name[i] = th_shape_at(i)->name;
    if (entry == NULL)
        return th_case_blame_missing(err, source, th_case_key_section(TH_KEY_SHAPE),
                                     th_case_key_name(TH_KEY_SHAPE),
                                     "want the shape of the flow, such as %s", name[0]);
    st = th_case_word(source, entry, name, shapes, &which, err);
    *shape = st == TH_OK ? th_shape_at(which) : NULL;
    return st;
}

static th_status check_names(const th_case_source *source, const th_shape *shape, th_error *err)
{
    for (int i = 0; i < source->entries; ++i) {
        const th_case_entry *entry = &source->entry[i];
        th_error why;

        if (th_case_key_check(shape, entry->section, entry->key, &why) != TH_OK)
            return th_case_blame(err, source, entry, "%s", why.text);
    }
    return TH_OK;
}

/* [atom]: the mass in kg, in an SI case only. */
static th_status read_atom(const th_case_source *source, th_system system, double *mass,
                           th_error *err)
{
    const th_case_entry *species = th_case_source_key(source, TH_KEY_SPECIES);
    const th_case_entry *given = th_case_source_key(source, TH_KEY_MASS);
    th_error why;
    th_status st;

    if (system == TH_SYSTEM_REDUCED) {
        if (species == NULL && given == NULL)
            return TH_OK;
        return th_case_blame(err, source, species != NULL ? species : given,
                             "in a reduced case the mass is 1; an atom needs [units] system = SI");
    }
    if (species != NULL && given != NULL)
        return th_case_blame(err, source, given, "give species or mass, not both");
    if (species != NULL) {
        st = th_species_mass(species->value, mass, &why);
        return st == TH_OK ? st : th_case_blame(err, source, species, "%s", why.text);
    }
    if (given == NULL)
        return th_case_blame_missing(err, source, th_case_key_section(TH_KEY_SPECIES),
                                     th_case_key_name(TH_KEY_SPECIES),
                                     "an SI case needs it or mass for its scale");
    st = th_case_raw(system, given->value, TH_DIM_MASS, mass, &why);
    if (st != TH_OK)
        return th_case_blame(err, source, given, "%s", why.text);
    return *mass > 0.0 ? TH_OK : th_case_blame(err, source, given, "mass must be > 0");
}

/* [ends] kind and the keys that go with it; lengths wait for the scale. */
static th_status read_ends(const th_case_source *source, th_ends *ends, th_error *err)
{
    static const char *const word[] = {"open", "ring", "walls"};
    static const struct {
        th_case_key_id id;
        th_ends_kind kind;
    } rule[] = {{TH_KEY_CIRCUMFERENCE, TH_ENDS_RING},
                {TH_KEY_WINDING, TH_ENDS_RING},
                {TH_KEY_PADDING, TH_ENDS_WALLS}};
    static const th_ends_kind kind[] = {TH_ENDS_OPEN, TH_ENDS_RING, TH_ENDS_WALLS};
    const th_case_entry *entry = th_case_source_key(source, TH_KEY_KIND);
    double number = 0.0;
    int which = 0;
    th_error why;
    th_status st;

    if (entry != NULL) {
        st = th_case_word(source, entry, word, 3, &which, err);
        if (st != TH_OK)
            return st;
    }
    ends->kind = kind[which];
    for (size_t i = 0; i < sizeof rule / sizeof rule[0]; ++i) {
        const char *name = rule[i].kind == TH_ENDS_RING ? "ring" : "walls";

        entry = th_case_source_key(source, rule[i].id);
        if (entry != NULL && rule[i].kind != ends->kind)
            return th_case_blame(err, source, entry, "only kind = %s takes it, not %s", name,
                                 word[which]);
        if (entry == NULL && rule[i].kind == ends->kind)
            return th_case_blame_missing(err, source, th_case_key_section(rule[i].id),
                                         th_case_key_name(rule[i].id), "kind = %s needs it", name);
    }
    entry = th_case_source_key(source, TH_KEY_WINDING);
    if (entry == NULL)
        return TH_OK;
    st = th_number_read(entry->value, &number, &why);
    if (st != TH_OK)
        return th_case_blame(err, source, entry, "%s", why.text);
    if (!(number >= 1.0 && number <= INT_MAX && number == floor(number)))
        return th_case_blame(err, source, entry, "winding must be a whole number >= 1");
    ends->winding = (int)number;
    return TH_OK;
}

static th_status read_solve(const th_case_source *source, th_case *out, th_error *err)
{
    const th_case_entry *entry = th_case_source_key(source, TH_KEY_ACCURACY);
    th_error why;

    out->accuracy = ACCURACY_DEFAULT;
    if (entry == NULL)
        return TH_OK;
    if (th_number_read(entry->value, &out->accuracy, &why) != TH_OK)
        return th_case_blame(err, source, entry, "%s", why.text);
    if (!(out->accuracy >= ACCURACY_MIN && out->accuracy <= ACCURACY_MAX))
        return th_case_blame(err, source, entry, "accuracy must be from 1e-12 to 1e-3");
    return TH_OK;
}

static th_status read_sections(const th_case_source *source, th_case *out, th_error *err)
{
    th_case_axis *axis = NULL;
    th_case_flow values = {.entry = {NULL}};
    th_system system = TH_SYSTEM_REDUCED;
    double mass = 1.0;
    int axes = 0;
    th_status st;

    st = read_system(source, &system, err);
    if (st == TH_OK)
        st = read_shape(source, &out->setup.shape, err);
    if (st == TH_OK)
        st = check_names(source, out->setup.shape, err);
    if (st == TH_OK)
        st = read_atom(source, system, &mass, err);
    if (st == TH_OK)
        st = read_ends(source, &out->setup.ends, err);
    if (st == TH_OK)
        st = th_case_axes_read(source, out->setup.shape, system, &axis, &axes, err);
    if (st == TH_OK)
        st = th_case_flow_read(source, system, axis, axes, &out->setup, &out->data, &values, err);
    if (st == TH_OK)
        st = th_case_scale_read(source, system, mass, out->setup.shape, out->data, &values,
                                &out->scale, err);
    if (st == TH_OK)
        st = th_case_base_read(source, &values, out, err);
    if (st == TH_OK)
        st = read_solve(source, out, err);
    if (st == TH_OK)
        st = th_case_axes_finish(source, axis, axes, out, err);
    if (st == TH_OK)
        st = th_case_plan_read(source, out, err);
    if (st == TH_OK)
        st = th_case_flow_check(source, out, &values, err);
    if (st == TH_OK)
        st = th_case_text_write(source, out, err);
    th_case_axes_free(axis, axes);
    return st;
}

th_status th_case_read_text(const char *name, const char *text, const char *const *override,
                            int overrides, th_case **out, th_error *err)
{
    th_case_source source = {.name = name};
    th_case *c = NULL;
    th_status st = TH_EBUG;

    if (out == NULL)
        return th_fail(err, TH_EINVAL, "case: no place for the result");
    *out = NULL;
    if (name == NULL || text == NULL || overrides < 0 || (overrides > 0 && override == NULL))
        return th_fail(err, TH_EINVAL, "case: want a name, a text and %d overrides", overrides);
    c = th_alloc(1, sizeof *c);
    if (c != NULL)
        c->path = th_alloc(strlen(name) + 1, 1);
    if (c == NULL || c->path == NULL) {
        st = th_fail(err, TH_ENOMEM, "no memory for a case");
        goto done;
    }
    memcpy(c->path, name, strlen(name) + 1);
    st = th_case_source_read(name, text, override, overrides, &source, err);
    if (st == TH_OK)
        st = read_sections(&source, c, err);
done:
    th_case_source_clear(&source);
    if (st == TH_OK)
        *out = c;
    else
        th_case_destroy(c);
    return st;
}

/* The whole file as text; TH_EIO with the system's reason, TH_ECASE for what is no text. */
static th_status load(const char *path, char **text, th_error *err)
{
    char shown[128], reason[128] = "";
    char *buffer = th_alloc(TH_CASE_BYTES_MAX + 2, 1); /* one more shows that there is more */
    FILE *file = NULL;
    size_t size = 0;
    int line = 1, trouble = 0;
    th_status st = TH_OK;

    if (buffer == NULL)
        return th_fail(err, TH_ENOMEM, "no memory for the text of a case");
    errno = 0;
    file = fopen(path, "rb");
    if (file != NULL)
        size = fread(buffer, 1, TH_CASE_BYTES_MAX + 1, file);
    if (file == NULL || ferror(file)) {
        trouble = errno;
        th_quote_path(path, shown, sizeof shown);
        if (strerror_r(trouble, reason, sizeof reason) != 0)
            (void)snprintf(reason, sizeof reason, "error %d", trouble);
        st = th_fail(err, TH_EIO, "%s: cannot be read: %s", shown, reason);
        goto done;
    }
    for (size_t i = 0; i < size && buffer[i] != '\0'; ++i)
        line += buffer[i] == '\n';
    if (strlen(buffer) < size)
        st = th_case_blame_line(err, path, line, "the line holds a zero byte, so this is no text");
done:
    if (file != NULL)
        (void)fclose(file);
    if (st == TH_OK)
        *text = buffer;
    else
        free(buffer);
    return st;
}

th_status th_case_read(const char *path, const char *const *override, int overrides, th_case **out,
                       th_error *err)
{
    char *text = NULL;
    th_status st;

    if (path == NULL || out == NULL)
        return th_fail(err, TH_EINVAL, "case: want a path and a place for the result");
    *out = NULL;
    st = load(path, &text, err);
    if (st == TH_OK)
        st = th_case_read_text(path, text, override, overrides, out, err);
    free(text);
    return st;
}

void th_case_destroy(th_case *c)
{
    if (c == NULL)
        return;
    for (int i = 0; i < c->axes; ++i)
        free(c->axis[i].value);
    free(c->axis);
    th_data_destroy(c->data);
    free(c->path);
    free(c->text);
    free(c);
}
