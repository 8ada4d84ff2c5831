/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The scale between SI and reduced units, and the table of atomic masses.
 * In: the atom's mass and one speed of the flow, or the name of an isotope. Out: factors from
 * reduced to SI values, or a mass. Calls status and the quoting of number.c.
 * Symbols: m atomic mass, v the speed taken as unit, hbar/(m v) length, hbar/(m v^2) time.
 * To add a species: one row in `species`, mass in u from the evaluation named there.
 * Proved by tests/test_units.c; masses and constants by tests/check_masses.py. */
#include "text.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

th_scale th_scale_reduced(void)
{
    return (th_scale){
        .system = TH_SYSTEM_REDUCED, .mass = 1.0, .speed = 1.0, .length = 1.0, .time = 1.0};
}

th_status th_scale_si(double mass, double speed, th_scale *out, th_error *err)
{
    th_scale scale = {.system = TH_SYSTEM_SI, .mass = mass, .speed = speed};
    char number[32];

    if (!(isfinite(mass) && mass > 0.0)) {
        th_number_write(mass, number, sizeof number);
        return th_fail(err, TH_EINVAL, "mass = %s kg, want a finite mass > 0", number);
    }
    if (!(isfinite(speed) && speed > 0.0)) {
        th_number_write(speed, number, sizeof number);
        return th_fail(err, TH_EINVAL, "speed = %s m/s, want a finite speed > 0", number);
    }
    scale.length = TH_PLANCK_HBAR / (mass * speed); /* from hbar = m = 1 */
    scale.time = scale.length / speed;
    if (!isnormal(scale.length) || !isnormal(scale.time) || !isnormal(mass * speed * speed)) {
        char other[32];

        th_number_write(mass, number, sizeof number);
        th_number_write(speed, other, sizeof other);
        return th_fail(err, TH_EINVAL, "mass = %s kg and speed = %s m/s give no usable scale",
                       number, other);
    }
    *out = scale;
    return TH_OK;
}

double th_scale_factor(const th_scale *scale, th_dimension dimension)
{
    if (scale->system == TH_SYSTEM_REDUCED)
        return 1.0;
    switch (dimension) {
    case TH_DIM_NUMBER:
        return 1.0;
    case TH_DIM_LENGTH:
        return scale->length;
    case TH_DIM_SPEED:
        return scale->speed;
    case TH_DIM_SPEED_SQUARED:
        return scale->speed * scale->speed;
    case TH_DIM_TIME:
        return scale->time;
    case TH_DIM_RATE:
        return 1.0 / scale->time;
    case TH_DIM_LINE_DENSITY:
        return 1.0 / scale->length;
    case TH_DIM_ENERGY:
        return scale->mass * scale->speed * scale->speed;
    case TH_DIM_MASS:
        return scale->mass;
    case TH_DIM_TEMPERATURE:
        return TH_PLANCK_HBAR / (TH_BOLTZMANN * scale->time); /* k_B T = hbar / time */
    }
    return 1.0;
}

const char *th_dimension_unit(th_dimension dimension)
{
    switch (dimension) {
    case TH_DIM_NUMBER:
        return "1";
    case TH_DIM_LENGTH:
        return "m";
    case TH_DIM_SPEED:
        return "m/s";
    case TH_DIM_SPEED_SQUARED:
        return "m2/s2";
    case TH_DIM_TIME:
        return "s";
    case TH_DIM_RATE:
        return "1/s";
    case TH_DIM_LINE_DENSITY:
        return "1/m";
    case TH_DIM_ENERGY:
        return "J";
    case TH_DIM_MASS:
        return "kg";
    case TH_DIM_TEMPERATURE:
        return "K";
    }
    return "1";
}

/* Bosonic isotopes that have been condensed, or are the atoms of choice for it. Masses of neutral
 * atoms in u: "The AME 2020 atomic mass evaluation", Chin. Phys. C 45, 030003 (2021), digits from
 * memory; tests/check_masses.py compares each with the 2012 evaluation to 1.1e-8 (Cr-52: 4e-8, the
 * evaluations differ), far below what any experiment with a condensate can tell. */
static const struct {
    const char *name;
    double mass; /* u */
} species[] = {
    {"H-1", 1.007825031898},   {"He-4", 4.002603254130},  {"Li-7", 7.016003434},
    {"Na-23", 22.989769282},   {"K-39", 38.963706485},    {"K-41", 40.961825256},
    {"Ca-40", 39.962590850},   {"Cr-52", 51.940504714},   {"Rb-85", 84.911789736},
    {"Rb-87", 86.909180529},   {"Sr-84", 83.913419118},   {"Sr-86", 85.909260725},
    {"Sr-88", 87.905612253},   {"Cs-133", 132.905451958}, {"Eu-151", 150.919856606},
    {"Dy-160", 159.925203244}, {"Dy-162", 161.926804507}, {"Dy-164", 163.929180819},
    {"Er-166", 165.930301067}, {"Er-168", 167.932376192}, {"Yb-168", 167.933891297},
    {"Yb-170", 169.934767242}, {"Yb-174", 173.938867546}, {"Yb-176", 175.942574706},
};

enum { SPECIES = sizeof species / sizeof species[0] };

th_status th_species_mass(const char *name, double *kilogram, th_error *err)
{
    char shown[TH_QUOTE_MAX], known[256];
    size_t used = 0;

    for (int i = 0; i < SPECIES; ++i)
        if (strcmp(species[i].name, name) == 0) {
            *kilogram = species[i].mass * TH_ATOMIC_MASS_UNIT;
            return TH_OK;
        }
    th_quote(name, shown, sizeof shown);
    for (int i = 0; i < SPECIES; ++i)
        used += (size_t)snprintf(known + used, sizeof known - used, "%s%s", i > 0 ? ", " : "",
                                 species[i].name);
    return th_fail(err, TH_EINVAL,
                   "species \"%s\" is unknown; known are %s, any other atom takes its mass", shown,
                   known);
}
