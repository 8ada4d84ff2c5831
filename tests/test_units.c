/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Units: numbers, quantities, scale, species. Constants and masses are compared with other
 * sources by tests/check_masses.py. */
#define _XOPEN_SOURCE 700

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include <math.h>
#include <string.h>
#include <twinhorizon/units.h>

#include "comma_locale.h"

/* Two roundings of double precision: a product of a number and a factor. */
#define ROUNDING 4.5e-16

static void assert_close(double have, double want, double tolerance)
{
    if (!(fabs(have - want) <= tolerance * fabs(want)))
        fail_msg("have %.17g, want %.17g to %g", have, want, tolerance);
}

/* Numbers that are read: the values are the C constants of the same spelling. */
static void test_numbers(void **state)
{
    static const struct {
        const char *text;
        double value;
    } good[] = {
        {"0", 0.0},         {"-0", 0.0},
        {"6", 6.0},         {"+10", 10.0},
        {"-2.385", -2.385}, {".5", 0.5},
        {"1.", 1.0},        {"1e-9", 1e-9},
        {"1E+3", 1e3},      {"  7\t", 7.0},
        {"0.1", 0.1},       {"1e308", 1e308},
        {"00012", 12.0},    {"9007199254740993", 9007199254740993.0},
        {"1e-300", 1e-300},
    };
    static const struct {
        const char *text, *message;
    } bad[] = {
        {"", "\"\" is not a number"},
        {"   ", "\"\" is not a number"},
        {"abc", "\"abc\" is not a number"},
        {"nan", "\"nan\" is not a number"},
        {"NAN(1)", "\"NAN(1)\" is not a number"},
        {"inf", "\"inf\" is not a number"},
        {"-Infinity", "\"-Infinity\" is not a number"},
        {".", "\".\" is not a number"},
        {"-", "\"-\" is not a number"},
        {"e5", "\"e5\" is not a number"},
        {"0x1p3", "\"0x1p3\" is not a decimal number"},
        {"1e400", "\"1e400\" is too large a number"},
        {"-1e400", "\"-1e400\" is too large a number"},
        {"1e-400", "\"1e-400\" is too small a number"},
        {"0,5", "\",5\" follows the number, which takes a decimal point, not a comma"},
        {"5 6", "\"6\" follows the number"},
        {"1e", "\"e\" follows the number"},
        {"1.2.3", "\".3\" follows the number"},
        {"5\x01", "\"\\x01\" follows the number"},
        {"5\xFFz", "\"\\xFFz\" follows the number"},
    };

    (void)state;
    for (size_t i = 0; i < sizeof good / sizeof good[0]; ++i) {
        double value = -1.0;

        assert_int_equal(th_number_read(good[i].text, &value, NULL), TH_OK);
        assert_true(value == good[i].value);
    }
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; ++i) {
        double value = -1.0;
        th_error err;

        assert_int_equal(th_number_read(bad[i].text, &value, &err), TH_EINVAL);
        assert_string_equal(err.text, bad[i].message);
        assert_true(value == -1.0);
    }
}

/* Every unit by its definition in the SI; constants are those of the header. */
static void test_quantities(void **state)
{
    const double pi = 3.14159265358979323846;
    const double h = 6.62607015e-34; /* J s, exact */
    const struct {
        const char *text;
        th_dimension dimension;
        double value;
    } good[] = {
        {"3 %", TH_DIM_NUMBER, 0.03},
        {"-10%", TH_DIM_NUMBER, -0.1},
        {"0.6", TH_DIM_NUMBER, 0.6},
        {"2.5 m", TH_DIM_LENGTH, 2.5},
        {"2.5mm", TH_DIM_LENGTH, 2.5e-3},
        {" 6 um ", TH_DIM_LENGTH, 6e-6},
        {"6 \xC2\xB5m", TH_DIM_LENGTH, 6e-6},
        {"6 \xCE\xBCm", TH_DIM_LENGTH, 6e-6},
        {"650 nm", TH_DIM_LENGTH, 650e-9},
        {"100 a0", TH_DIM_LENGTH, 100 * TH_BOHR_RADIUS},
        {"1e-3 m/s", TH_DIM_SPEED, 1e-3},
        {"0.9 mm/s", TH_DIM_SPEED, 0.9e-3},
        {"900 um/s", TH_DIM_SPEED, 900e-6},
        {"0.9 um/ms", TH_DIM_SPEED, 0.9e-3},
        {"0.9 \xC2\xB5m/ms", TH_DIM_SPEED, 0.9e-3},
        {"2 m^2/s^2", TH_DIM_SPEED_SQUARED, 2},
        {"2 m2/s2", TH_DIM_SPEED_SQUARED, 2},
        {"2 m\xC2\xB2/s\xC2\xB2", TH_DIM_SPEED_SQUARED, 2},
        {"2 mm^2/s^2", TH_DIM_SPEED_SQUARED, 2e-6},
        {"2 mm2/s2", TH_DIM_SPEED_SQUARED, 2e-6},
        {"3 s", TH_DIM_TIME, 3},
        {"60 ms", TH_DIM_TIME, 60e-3},
        {"60 us", TH_DIM_TIME, 60e-6},
        {"10 Hz", TH_DIM_RATE, 20 * pi},
        {"1.5 kHz", TH_DIM_RATE, 3000 * pi},
        {"7 /s", TH_DIM_RATE, 7},
        {"7 1/s", TH_DIM_RATE, 7},
        {"7 rad/s", TH_DIM_RATE, 7},
        {"5 /m", TH_DIM_LINE_DENSITY, 5},
        {"5 1/m", TH_DIM_LINE_DENSITY, 5},
        {"5 /mm", TH_DIM_LINE_DENSITY, 5e3},
        {"5 1/mm", TH_DIM_LINE_DENSITY, 5e3},
        {"30 /um", TH_DIM_LINE_DENSITY, 30e6},
        {"30 1/um", TH_DIM_LINE_DENSITY, 30e6},
        {"30 /\xC2\xB5m", TH_DIM_LINE_DENSITY, 30e6},
        {"4 J", TH_DIM_ENERGY, 4},
        {"4 nK", TH_DIM_ENERGY, 4e-9 * TH_BOLTZMANN},
        {"4 uK", TH_DIM_ENERGY, 4e-6 * TH_BOLTZMANN},
        {"4 Hz", TH_DIM_ENERGY, 4 * h},
        {"4 kHz", TH_DIM_ENERGY, 4e3 * h},
        {"2 kg", TH_DIM_MASS, 2},
        {"39 u", TH_DIM_MASS, 39 * TH_ATOMIC_MASS_UNIT},
        {"2 K", TH_DIM_TEMPERATURE, 2},
        {"2 mK", TH_DIM_TEMPERATURE, 2e-3},
        {"2 uK", TH_DIM_TEMPERATURE, 2e-6},
        {"2 nK", TH_DIM_TEMPERATURE, 2e-9},
    };
    static const struct {
        const char *text;
        th_dimension dimension;
        const char *message;
    } bad[] = {
        {"6", TH_DIM_LENGTH, "the number has no unit; a length takes one of m, mm, um, nm, a0"},
        {"", TH_DIM_LENGTH, "\"\" is not a number"},
        {"um", TH_DIM_LENGTH, "\"um\" is not a number"},
        {"inf um", TH_DIM_LENGTH, "\"inf um\" is not a number"},
        {"6 UM", TH_DIM_LENGTH,
         "the unit \"UM\" is unknown; a length takes one of m, mm, um, nm, a0"},
        {"6 um um", TH_DIM_LENGTH,
         "the unit \"um um\" is unknown; a length takes one of m, mm, um, nm, a0"},
        {"6 umumumumumumumumumumumumumumumumumumumumumumumumumumumumumumumumumum", TH_DIM_LENGTH,
         "the unit \"umumumumumumumumumumumumumumumumumumumumumumumumumumumumumum...\" is unknown; "
         "a length takes one of m, mm, um, nm, a0"},
        {"6 ms", TH_DIM_SPEED, "ms is a unit of time; a speed takes one of m/s, mm/s, um/s, um/ms"},
        {"6 m/s", TH_DIM_SPEED_SQUARED,
         "m/s is a unit of speed; a squared speed takes one of m^2/s^2, mm^2/s^2"},
        {"6 m", TH_DIM_TIME, "m is a unit of length; a time takes one of s, ms, us"},
        {"6", TH_DIM_RATE, "the number has no unit; a rate takes one of Hz, kHz, /s, /ms, rad/s"},
        {"6 um", TH_DIM_LINE_DENSITY,
         "um is a unit of length; a line density takes one of /m, /mm, /um"},
        {"6 m^2/s^2", TH_DIM_ENERGY,
         "m^2/s^2 is a unit of squared speed; an energy takes one of J, nK, uK, Hz, kHz"},
        {"6 nK", TH_DIM_MASS, "nK is a unit of temperature; a mass takes one of kg, u"},
        {"6 kg", TH_DIM_TEMPERATURE,
         "kg is a unit of mass; a temperature takes one of K, mK, uK, nK"},
        {"6 um", TH_DIM_NUMBER, "um is a unit of length; a number takes one of %"},
        {"1,5 um", TH_DIM_LENGTH,
         "\",5 um\" follows the number, which takes a decimal point, not a comma"},
        {"1e308 kHz", TH_DIM_RATE, "the number is too large for the unit kHz"},
    };

    (void)state;
    for (size_t i = 0; i < sizeof good / sizeof good[0]; ++i) {
        double value = NAN;
        th_error err = {.status = TH_OK};

        if (th_quantity_read(good[i].text, good[i].dimension, &value, &err) != TH_OK)
            fail_msg("%s: %s", good[i].text, err.text);
        assert_close(value, good[i].value, ROUNDING);
    }
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; ++i) {
        double value = -1.0;
        th_error err;

        assert_int_equal(th_quantity_read(bad[i].text, bad[i].dimension, &value, &err), TH_EINVAL);
        assert_string_equal(err.text, bad[i].message);
        assert_true(value == -1.0);
        assert_int_equal(th_quantity_read(bad[i].text, bad[i].dimension, &value, NULL), TH_EINVAL);
    }
}

/* Fifteen digits, as "%.15g" writes them in the C locale (C11, 7.21.6.1). */
static void test_writing(void **state)
{
    static const struct {
        double value;
        const char *text;
    } row[] = {{0.5, "0.5"},        {-2.385, "-2.385"},
               {1e-9, "1e-09"},     {1.0 / 3.0, "0.333333333333333"},
               {1e22, "1e+22"},     {-0.0, "-0"},
               {NAN, "nan"},        {INFINITY, "inf"},
               {-INFINITY, "-inf"}, {123456.789, "123456.789"}};
    char buffer[32], tiny[4] = "xxx";

    (void)state;
    for (size_t i = 0; i < sizeof row / sizeof row[0]; ++i) {
        th_number_write(row[i].value, buffer, sizeof buffer);
        assert_string_equal(buffer, row[i].text);
    }
    th_number_write(123456.0, tiny, sizeof tiny); /* cut, not overrun */
    assert_string_equal(tiny, "123");
}

/* Written and read again: 17 digits would be exact, 15 leave half a unit of the 15th. */
static void test_round_trip(void **state)
{
    uint64_t seed = 20240601; /* 64-bit linear congruential generator, constants from memory */

    (void)state;
    for (int i = 0; i < 2000; ++i) {
        char buffer[32];
        double value, again = 0.0;

        seed = seed * 6364136223846793005u + 1442695040888963407u;
        value = ldexp((double)(seed >> 11), (int)(seed % 401) - 253);
        th_number_write(value, buffer, sizeof buffer);
        assert_int_equal(th_number_read(buffer, &again, NULL), TH_OK);
        assert_close(again, value, 5e-15);
    }
}

static void test_comma_locale(void **state)
{
    char buffer[32];
    double value = 0.0;

    (void)state;
    if (!use_comma_locale()) {
        (void)setlocale(LC_ALL, "C");
        print_message("no locale with a decimal comma can be had here\n");
        skip();
    }
    assert_int_equal(th_number_read("2.385", &value, NULL), TH_OK);
    assert_true(value == 2.385);
    assert_int_equal(th_number_read("2,385", &value, NULL), TH_EINVAL);
    assert_int_equal(th_quantity_read("0.9 mm/s", TH_DIM_SPEED, &value, NULL), TH_OK);
    assert_close(value, 0.9e-3, ROUNDING);
    th_number_write(-2.385e-7, buffer, sizeof buffer);
    assert_string_equal(buffer, "-2.385e-07");
    (void)snprintf(buffer, sizeof buffer, "%.1f", 0.5); /* the locale is as it was */
    assert_string_equal(buffer, "0,5");
    (void)setlocale(LC_ALL, "C");
}

static const th_dimension every[] = {
    TH_DIM_NUMBER, TH_DIM_LENGTH,       TH_DIM_SPEED,  TH_DIM_SPEED_SQUARED, TH_DIM_TIME,
    TH_DIM_RATE,   TH_DIM_LINE_DENSITY, TH_DIM_ENERGY, TH_DIM_MASS,          TH_DIM_TEMPERATURE};

enum { DIMENSIONS = sizeof every / sizeof every[0] };

static void test_scale(void **state)
{
    static const char *const unit[] = {"1", "m", "m/s", "m2/s2", "s", "1/s", "1/m", "J", "kg", "K"};
    const double m = 87 * TH_ATOMIC_MASS_UNIT, v = 1.35e-3;
    /* hbar = m = 1: length hbar/(m v), time hbar/(m v^2), energy m v^2, k_B T = energy */
    const double factor[] = {1,
                             TH_PLANCK_HBAR / (m * v),
                             v,
                             v * v,
                             TH_PLANCK_HBAR / (m * v * v),
                             m * v * v / TH_PLANCK_HBAR,
                             m * v / TH_PLANCK_HBAR,
                             m * v * v,
                             m,
                             m * v * v / TH_BOLTZMANN};
    static const struct {
        double mass, speed;
        const char *message;
    } bad[] = {
        {0, 1, "mass = 0 kg, want a finite mass > 0"},
        {-1, 1, "mass = -1 kg, want a finite mass > 0"},
        {NAN, 1, "mass = nan kg, want a finite mass > 0"},
        {INFINITY, 1, "mass = inf kg, want a finite mass > 0"},
        {1, 0, "speed = 0 m/s, want a finite speed > 0"},
        {1, NAN, "speed = nan m/s, want a finite speed > 0"},
        {1, INFINITY, "speed = inf m/s, want a finite speed > 0"},
        {1e-200, 1e-200, "mass = 1e-200 kg and speed = 1e-200 m/s give no usable scale"},
        {1e300, 1e3, "mass = 1e+300 kg and speed = 1000 m/s give no usable scale"},
    };
    th_scale scale = th_scale_reduced();
    th_error err;

    (void)state;
    assert_int_equal(scale.system, TH_SYSTEM_REDUCED);
    for (int i = 0; i < DIMENSIONS; ++i)
        assert_true(th_scale_factor(&scale, every[i]) == 1.0);
    assert_int_equal(th_scale_si(m, v, &scale, NULL), TH_OK);
    assert_int_equal(scale.system, TH_SYSTEM_SI);
    for (int i = 0; i < DIMENSIONS; ++i) {
        assert_close(th_scale_factor(&scale, every[i]), factor[i], 1e-15); /* a few roundings */
        assert_string_equal(th_dimension_unit(every[i]), unit[i]);
    }
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; ++i) {
        assert_int_equal(th_scale_si(bad[i].mass, bad[i].speed, &scale, &err), TH_EINVAL);
        assert_string_equal(err.text, bad[i].message);
    }
}

/* Healing length hbar/(m c) of Rb-87 at c = 1 mm/s, 0.7307 um (hbar and mass of the header by
 * hand: 1.0545718e-34 / (86.909180529 * 1.66053907e-27 * 1e-3)). */
static void test_species(void **state)
{
    double mass = 0.0;
    th_scale scale;
    th_error err;

    (void)state;
    assert_int_equal(th_species_mass("Rb-87", &mass, NULL), TH_OK);
    assert_close(mass, 86.909180529 * TH_ATOMIC_MASS_UNIT, ROUNDING);
    assert_int_equal(th_scale_si(mass, 1e-3, &scale, NULL), TH_OK);
    assert_close(scale.length, 0.73074e-6, 1e-5);
    assert_int_equal(th_species_mass("K-39", &mass, NULL), TH_OK);
    assert_close(mass, 38.963706485 * TH_ATOMIC_MASS_UNIT, ROUNDING);
    assert_int_equal(th_species_mass("Xx-1\n", &mass, &err), TH_EINVAL);
    assert_non_null(strstr(err.text, "species \"Xx-1\\x0A\" is unknown; known are H-1, He-4, "));
    assert_non_null(strstr(err.text, "Yb-176, any other atom takes its mass"));
    assert_int_equal(th_species_mass("rb-87", &mass, NULL), TH_EINVAL);
    assert_int_equal(th_species_mass("", &mass, NULL), TH_EINVAL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_numbers),      cmocka_unit_test(test_quantities),
        cmocka_unit_test(test_writing),      cmocka_unit_test(test_round_trip),
        cmocka_unit_test(test_comma_locale), cmocka_unit_test(test_scale),
        cmocka_unit_test(test_species),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
