/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Quantities with units: the one table of unit words.
 * In: text such as "0.9 mm/s" and what it must measure. Out: the value in the SI unit of that
 * dimension, or a sentence that lists the units that fit. Calls number.c and status.
 * Symbols: k_B Boltzmann constant, h Planck constant, a0 Bohr radius, u atomic mass unit.
 * To add a unit: one row in `unit`; messages and documents follow.
 * Proved by tests/test_units.c, constants by tests/check_masses.py. */
#include "text.h"

#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <string.h>

#define PLANCK   6.62607015e-34       /* J s, exact by the definition of the SI (2019) */
#define FULL_ROT 6.283185307179586477 /* 2 pi: radians in one cycle, so that Hz becomes rad/s */

typedef struct {
    const char *word;
    th_dimension dimension;
    double factor; /* SI units per unit */
    bool listed;   /* named in messages; the others are further spellings of a listed one */
} unit_row;

/* In the order in which messages list them. */
static const unit_row unit[] = {
    {"%", TH_DIM_NUMBER, 0.01, true},
    {"m", TH_DIM_LENGTH, 1.0, true},
    {"mm", TH_DIM_LENGTH, 1e-3, true},
    {"um", TH_DIM_LENGTH, 1e-6, true},
    {"nm", TH_DIM_LENGTH, 1e-9, true},
    {"a0", TH_DIM_LENGTH, TH_BOHR_RADIUS, true},
    {"m/s", TH_DIM_SPEED, 1.0, true},
    {"mm/s", TH_DIM_SPEED, 1e-3, true},
    {"um/s", TH_DIM_SPEED, 1e-6, true},
    {"um/ms", TH_DIM_SPEED, 1e-3, true},
    {"m^2/s^2", TH_DIM_SPEED_SQUARED, 1.0, true},
    {"mm^2/s^2", TH_DIM_SPEED_SQUARED, 1e-6, true},
    {"m2/s2", TH_DIM_SPEED_SQUARED, 1.0, false},
    {"mm2/s2", TH_DIM_SPEED_SQUARED, 1e-6, false},
    {"s", TH_DIM_TIME, 1.0, true},
    {"ms", TH_DIM_TIME, 1e-3, true},
    {"us", TH_DIM_TIME, 1e-6, true},
    {"Hz", TH_DIM_RATE, FULL_ROT, true},
    {"kHz", TH_DIM_RATE, 1e3 * FULL_ROT, true},
    {"/s", TH_DIM_RATE, 1.0, true},
    {"/ms", TH_DIM_RATE, 1e3, true},
    {"rad/s", TH_DIM_RATE, 1.0, true},
    {"1/s", TH_DIM_RATE, 1.0, false},
    {"/m", TH_DIM_LINE_DENSITY, 1.0, true},
    {"/mm", TH_DIM_LINE_DENSITY, 1e3, true},
    {"/um", TH_DIM_LINE_DENSITY, 1e6, true},
    {"1/m", TH_DIM_LINE_DENSITY, 1.0, false},
    {"1/mm", TH_DIM_LINE_DENSITY, 1e3, false},
    {"1/um", TH_DIM_LINE_DENSITY, 1e6, false},
    {"J", TH_DIM_ENERGY, 1.0, true},
    {"nK", TH_DIM_ENERGY, 1e-9 * TH_BOLTZMANN, true},
    {"uK", TH_DIM_ENERGY, 1e-6 * TH_BOLTZMANN, true},
    {"Hz", TH_DIM_ENERGY, PLANCK, true},
    {"kHz", TH_DIM_ENERGY, 1e3 * PLANCK, true},
    {"kg", TH_DIM_MASS, 1.0, true},
    {"u", TH_DIM_MASS, TH_ATOMIC_MASS_UNIT, true},
    {"K", TH_DIM_TEMPERATURE, 1.0, true},
    {"mK", TH_DIM_TEMPERATURE, 1e-3, true},
    {"uK", TH_DIM_TEMPERATURE, 1e-6, true},
    {"nK", TH_DIM_TEMPERATURE, 1e-9, true},
};

enum { UNITS = sizeof unit / sizeof unit[0] };

/* Characters that people write where the table has plain letters. */
static const struct {
    const char *written, *plain;
} spelling[] = {
    {"\xC2\xB5", "u"}, /* U+00B5 micro sign */
    {"\xCE\xBC", "u"}, /* U+03BC small mu */
    {"\xC2\xB2", "2"}, /* U+00B2 superscript two */
};

/* Longest unit text that is looked up, well above the longest word of the table. */
enum { UNIT_TEXT_MAX = 24 };

/* "a" or "an" before the word of a dimension. */
static const char *article(th_dimension dimension)
{
    return dimension == TH_DIM_ENERGY ? "an" : "a";
}

const char *th_dimension_word(th_dimension dimension)
{
    switch (dimension) {
    case TH_DIM_NUMBER:
        return "number";
    case TH_DIM_LENGTH:
        return "length";
    case TH_DIM_SPEED:
        return "speed";
    case TH_DIM_SPEED_SQUARED:
        return "squared speed";
    case TH_DIM_TIME:
        return "time";
    case TH_DIM_RATE:
        return "rate";
    case TH_DIM_LINE_DENSITY:
        return "line density";
    case TH_DIM_ENERGY:
        return "energy";
    case TH_DIM_MASS:
        return "mass";
    case TH_DIM_TEMPERATURE:
        return "temperature";
    }
    return "quantity";
}

void th_dimension_list(th_dimension dimension, char *buffer, size_t size)
{
    size_t used = 0;

    buffer[0] = '\0';
    for (int i = 0; i < UNITS; ++i)
        if (unit[i].dimension == dimension && unit[i].listed && used < size)
            used += (size_t)snprintf(buffer + used, size - used, "%s%s", used > 0 ? ", " : "",
                                     unit[i].word);
}

/* Copy a unit in the spelling of the table, without blanks at its end; what is too long is cut:
 * it is in no table. */
static void spell(const char *text, char plain[UNIT_TEXT_MAX])
{
    size_t used = 0;

    while (*text != '\0' && used + 1 < UNIT_TEXT_MAX) {
        size_t step = 1;
        char c = *text;

        for (size_t i = 0; i < sizeof spelling / sizeof spelling[0]; ++i)
            if (strncmp(text, spelling[i].written, strlen(spelling[i].written)) == 0) {
                step = strlen(spelling[i].written);
                c = spelling[i].plain[0];
            }
        plain[used++] = c;
        text += step;
    }
    while (used > 0 && (plain[used - 1] == ' ' || plain[used - 1] == '\t'))
        --used;
    plain[used] = '\0';
}

th_status th_quantity_read(const char *text, th_dimension dimension, double *value, th_error *err)
{
    char plain[UNIT_TEXT_MAX], shown[TH_QUOTE_MAX], fits[128];
    const char *end = NULL;
    const unit_row *other = NULL;
    double number = 0.0;
    th_status st = th_number_scan(text, &end, &number, err);

    if (st != TH_OK)
        return st;
    while (*end == ' ' || *end == '\t')
        ++end;
    spell(end, plain);
    if (plain[0] == '\0' && dimension == TH_DIM_NUMBER) { /* the one that needs no unit */
        *value = number;
        return TH_OK;
    }
    th_dimension_list(dimension, fits, sizeof fits);
    if (plain[0] == '\0')
        return th_fail(err, TH_EINVAL, "the number has no unit; %s %s takes one of %s",
                       article(dimension), th_dimension_word(dimension), fits);
    th_quote(end, shown, sizeof shown);
    if (plain[0] == ',')
        return th_fail(err, TH_EINVAL,
                       "\"%s\" follows the number, which takes a decimal point, not a comma",
                       shown);
    for (int i = 0; i < UNITS; ++i) {
        if (strcmp(unit[i].word, plain) != 0)
            continue;
        if (unit[i].dimension == dimension) {
            number *= unit[i].factor;
            if (!isfinite(number))
                return th_fail(err, TH_EINVAL, "the number is too large for the unit %s", shown);
            *value = number;
            return TH_OK;
        }
        other = &unit[i];
    }
    if (other != NULL)
        return th_fail(err, TH_EINVAL, "%s is a unit of %s; %s %s takes one of %s", shown,
                       th_dimension_word(other->dimension), article(dimension),
                       th_dimension_word(dimension), fits);
    return th_fail(err, TH_EINVAL, "the unit \"%s\" is unknown; %s %s takes one of %s", shown,
                   article(dimension), th_dimension_word(dimension), fits);
}
