/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * twinhorizon-case(5), made from the tables that the case reader reads with, so that no key is
 * missing: roff with the man macros on standard output, for `make`. */
#include <math.h>
#include <string.h>
#include <twinhorizon/version.h>

#include "cli.h"

/* Text in roff: backslashes and hyphens are escaped, a dot or quote may not begin a line. */
static void put(const char *text)
{
    if (*text == '.' || *text == '\'')
        fputs("\\&", stdout);
    for (; *text != '\0'; text++)
        if (*text == '\\')
            fputs("\\e", stdout);
        else if (*text == '-')
            fputs("\\-", stdout);
        else
            putchar(*text);
}

static void entry(const char *key, const char *doc)
{
    fputs(".TP\n.B ", stdout);
    put(key);
    putchar('\n');
    put(doc);
    putchar('\n');
}

static const char *measures(th_dimension dimension)
{
    static const char *const name[] = {
        [TH_DIM_NUMBER] = "a number",
        [TH_DIM_LENGTH] = "a length (m, mm, um, nm, a0)",
        [TH_DIM_SPEED] = "a speed (m/s, mm/s, um/s, um/ms)",
        [TH_DIM_SPEED_SQUARED] = "a squared speed (m^2/s^2, mm^2/s^2)",
        [TH_DIM_TIME] = "a time (s, ms, us)",
        [TH_DIM_RATE] = "a rate (Hz = 2 pi/s, kHz, /s, /ms, rad/s)",
        [TH_DIM_LINE_DENSITY] = "a line density (/m, /mm, /um)",
        [TH_DIM_ENERGY] = "an energy",
        [TH_DIM_MASS] = "a mass (kg, u)",
        [TH_DIM_TEMPERATURE] = "a temperature (K, mK, uK, nK)",
    };

    return name[dimension];
}

static void shape_key(const th_shape_key *key)
{
    char text[64];

    fputs(".TP\n.B ", stdout);
    put(key->key);
    putchar('\n');
    put(key->doc);
    fputs("; ", stdout);
    if (key->file) {
        fputs("the path of a table", stdout);
    } else if (key->word != NULL) {
        fputs("one of", stdout);
        for (int i = 0; key->word[i] != NULL; i++) {
            fputs(i > 0 ? ", " : " ", stdout);
            put(key->word[i]);
        }
    } else {
        fputs(measures(key->dimension), stdout);
        th_number_write(key->above, text, sizeof text);
        printf(", %s %s", key->zero ? ">=" : ">", text);
        if (isfinite(key->below)) {
            th_number_write(key->below, text, sizeof text);
            printf(" and < %s", text);
        }
    }
    if (key->si_only)
        fputs("; SI cases only", stdout);
    else if (key->optional && key->word == NULL && !key->file && isfinite(key->fallback)) {
        th_number_write(key->fallback, text, sizeof text);
        printf("; optional, default %s in reduced units", text);
    } else if (key->optional)
        fputs("; optional", stdout);
    if (key->fixed_by_ring)
        fputs("; on a ring the winding fixes it", stdout);
    puts(".");
}

static void section(const char *name)
{
    int count;
    const th_case_key *key = th_case_keys(&count);

    printf(".SS [%s]\n", name);
    for (int i = 0; i < count; i++)
        if (strcmp(key[i].section, name) == 0)
            entry(key[i].key, key[i].doc);
}

void cli_print_case_manual(void)
{
    printf(".TH TWINHORIZON-CASE 5 \"\" \"twinhorizon %s\" \"File formats\"\n", th_version());
    puts(
        ".SH NAME\ntwinhorizon\\-case \\- a flow, its ends, a sweep and a plan in one file\n"
        ".SH DESCRIPTION\n"
        "A case file is UTF\\-8 text of at most 1 MiB with lines of at most 196 bytes: sections "
        "in\n"
        "brackets, and in them lines `key = value`. Comments start with ; or # at the start of a\n"
        "line, or with a blank and ; after a value. A value that ends in a comma goes on in the\n"
        "next line. A section or key that stands twice, or that is not listed here, is an error.\n"
        ".PP\n"
        "In a reduced case hbar = m = 1 and numbers are bare. In an SI case every number but Mach\n"
        "numbers, counts and the accuracy carries its unit; the sound speed upstream is the unit "
        "of\n"
        "speed inside. A number may be in %.\n.SH SECTIONS");
    section("units");
    section("atom");
    section("flow");
    puts(".PP\nFurther keys belong to the shape, see SHAPES.");
    section("ends");
    section("solve");
    section("sweep");
    section("plan");
    puts(".SH SHAPES");
    for (int i = 0; i < th_shape_count(); i++) {
        const th_shape *shape = th_shape_at(i);

        fputs(".SS shape = ", stdout);
        put(shape->name);
        putchar('\n');
        put(shape->doc);
        putchar('\n');
        for (int k = 0; k < shape->keys; k++)
            shape_key(&shape->key[k]);
    }
    puts(".SH EXAMPLE\n.nf\n[units]\nsystem = SI\n[atom]\nspecies = K\\-39\n[flow]\nshape = step\n"
         "speed = 0.9 mm/s\nsound_upstream = 1.35 mm/s\nsound_pocket = 0.45 mm/s\n"
         "sound_downstream = 1.3 mm/s\ngap = 11 um\n[sweep]\ngap = 2 um to 24 um in 23\n.fi\n"
         ".SH SEE ALSO\n.BR twinhorizon (1)");
}
