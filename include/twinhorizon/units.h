/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Physical constants, atomic masses, unit words and the scale between SI and reduced units
 * (hbar = m = 1). The only place where a unit or a constant is known. Depends on status. */
#ifndef TWINHORIZON_UNITS_H
#define TWINHORIZON_UNITS_H

#include <stddef.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/* Physical constants, CODATA 2018 (hbar and k_B exact by the definition of the SI, 2019);
 * "CODATA recommended values of the fundamental physical constants: 2018",
 * Rev. Mod. Phys. 93, 025010 (2021). */
#define TH_PLANCK_HBAR      1.054571817646156391262e-34 /* J s, h / (2 pi) with h = 6.62607015e-34 */
#define TH_BOLTZMANN        1.380649e-23                /* J/K, exact */
#define TH_ATOMIC_MASS_UNIT 1.66053906660e-27           /* kg */
#define TH_BOHR_RADIUS      5.29177210903e-11           /* m */

/* What a number measures. The SI unit in which values are held is in brackets. */
typedef enum {
    TH_DIM_NUMBER,        /* [1] */
    TH_DIM_LENGTH,        /* [m] */
    TH_DIM_SPEED,         /* [m/s] */
    TH_DIM_SPEED_SQUARED, /* [m2/s2] */
    TH_DIM_TIME,          /* [s] */
    TH_DIM_RATE,          /* [1/s], angular where a frequency is meant */
    TH_DIM_LINE_DENSITY,  /* [1/m] */
    TH_DIM_ENERGY,        /* [J] */
    TH_DIM_MASS,          /* [kg] */
    TH_DIM_TEMPERATURE    /* [K] */
} th_dimension;

typedef enum { TH_SYSTEM_REDUCED, TH_SYSTEM_SI } th_system;

/**
 * Factors from reduced to output units: value_out = value_reduced * factor. In a reduced case
 * every factor is 1. In an SI case the unit of speed is a speed of the flow, which fixes
 * length = hbar / (m speed) and time = hbar / (m speed^2).
 */
typedef struct {
    th_system system;
    double mass;   /* kg per reduced unit (the atom's mass); 1 in a reduced case */
    double speed;  /* m/s per reduced unit */
    double length; /* m per reduced unit */
    double time;   /* s per reduced unit */
} th_scale;

/** The scale of a reduced case: all factors 1. */
th_scale th_scale_reduced(void);

/**
 * The scale of an SI case.
 * @param[in]  mass   kg, finite and > 0
 * @param[in]  speed  m/s, finite and > 0
 * @retval TH_EINVAL  a value breaks its rule
 */
TH_MUST_USE th_status th_scale_si(double mass, double speed, th_scale *out, th_error *err);

/** Output units per reduced unit of a dimension (1 for all in a reduced case; the temperature
 * factor is hbar / (k_B time), the density factor 1 / length, the energy factor mass speed^2). */
double th_scale_factor(const th_scale *scale, th_dimension dimension);

/** Name of the SI unit of a dimension as written in a CSV's metadata: "m", "m/s", "1/s", "1", ...
 */
const char *th_dimension_unit(th_dimension dimension);

/**
 * Read a quantity with its unit, such as "0.9 mm/s", into SI.
 * The number is read in the C locale whatever the process locale is.
 *
 * @param[in]  text       "NUMBER UNIT" (blanks optional between the two)
 * @param[in]  dimension  what the key measures
 * @param[out] value      in the SI unit of the dimension
 * @retval TH_EINVAL  no number; not finite; unit missing, unknown or of another dimension. The
 *                    message lists the units that fit.
 */
TH_MUST_USE th_status th_quantity_read(const char *text, th_dimension dimension, double *value,
                                       th_error *err);

/** Read a bare finite number in the C locale; trailing text is an error (TH_EINVAL). */
TH_MUST_USE th_status th_number_read(const char *text, double *value, th_error *err);

/**
 * Mass of an atom by species, such as "K-39".
 * Source of the table: "The AME 2020 atomic mass evaluation", Chin. Phys. C 45, 030003 (2021).
 * @retval TH_EINVAL  unknown species; the message lists the known ones
 */
TH_MUST_USE th_status th_species_mass(const char *species, double *kilogram, th_error *err);

/**
 * Write a number in the C locale with at most 15 significant digits ("%.15g"), the form used in
 * every table.
 * @param[in]  size  of buffer, >= 32
 */
void th_number_write(double value, char *buffer, size_t size);

/** As th_number_write with the 17 digits that give the same double back. */
void th_number_write_exact(double value, char *buffer, size_t size);

#ifdef __cplusplus
}
#endif
#endif
