/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The case reader on good cases, on what is odd but allowed, and on random bytes. What it refuses,
 * and in which words, is in tests/test_broken.c. Reference values are the numbers of the cases
 * themselves and the conversions hbar = m = 1. */
#define _XOPEN_SOURCE 700

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include <math.h>
#include <string.h>
#include <unistd.h>
#include <twinhorizon/case.h>

#include "comma_locale.h"
#include "refuse.h"

#define STEP                                                                                       \
    "[units]\nsystem = reduced\n[flow]\nshape = step\nspeed = 1\nsound_upstream = 1.5\n"           \
    "sound_pocket = 0.5\nsound_downstream = 1.5\ngap = 6\n"

#define RING                                                                                       \
    "[units]\nsystem = reduced\n[flow]\nshape = step\nsound_upstream = 1.5\nsound_pocket = 0.5\n"  \
    "sound_downstream = 1.5\ngap = 6\n[ends]\nkind = ring\ncircumference = 50\nwinding = 8\n"

#define STEP_SI                                                                                    \
    "[units]\nsystem = SI\n[atom]\nspecies = Rb-87\n[flow]\nshape = step\nspeed = 0.9 mm/s\n"      \
    "sound_upstream = 1.35 mm/s\nsound_pocket = 0.5 mm/s\nsound_downstream = 1300 um/s\n"          \
    "gap = 6 um\n"

static void assert_close(double have, double want, double tolerance)
{
    if (!(fabs(have - want) <= tolerance * fabs(want)))
        fail_msg("have %.17g, want %.17g to %g", have, want, tolerance);
}

static th_case *read_with(const char *text, const char *const *override, int overrides)
{
    th_case *c = NULL;
    th_error err = {.status = TH_OK};

    if (th_case_read_text("test.ini", text, override, overrides, &c, &err) != TH_OK)
        fail_msg("%s", err.text);
    assert_non_null(c);
    return c;
}

static th_case *read_good(const char *text)
{
    return read_with(text, NULL, 0);
}

static void assert_refused(const char *text, const char *message)
{
    th_case *c = (th_case *)(void *)&text; /* must become NULL */
    th_error err;

    assert_int_equal(th_case_read_text("test.ini", text, NULL, 0, &c, &err), TH_ECASE);
    assert_null(c);
    assert_string_equal(err.text, message);
}

/* Value of a shape's key. */
static double value_of(const th_case *c, const char *key)
{
    for (int i = 0; i < c->setup.shape->keys; ++i)
        if (strcmp(c->setup.shape->key[i].key, key) == 0)
            return c->setup.value[i];
    fail_msg("no key %s", key);
    return NAN;
}

static bool given(const th_case *c, const char *key)
{
    for (int i = 0; i < c->setup.shape->keys; ++i)
        if (strcmp(c->setup.shape->key[i].key, key) == 0)
            return c->setup.given[i];
    fail_msg("no key %s", key);
    return false;
}

static void test_reduced(void **state)
{
    th_case *c = read_good(STEP);

    (void)state;
    assert_string_equal(c->path, "test.ini");
    assert_int_equal(c->scale.system, TH_SYSTEM_REDUCED);
    assert_string_equal(c->setup.shape->name, "step");
    assert_true(value_of(c, "speed") == 1.0 && given(c, "speed"));
    assert_true(value_of(c, "sound_upstream") == 1.5);
    assert_true(value_of(c, "sound_pocket") == 0.5);
    assert_true(value_of(c, "sound_downstream") == 1.5);
    assert_true(value_of(c, "gap") == 6.0);
    assert_int_equal(c->setup.ends.kind, TH_ENDS_OPEN);
    assert_true(c->setup.density == 1.0 && !c->density_given);
    assert_true(c->accuracy == 1e-9);
    assert_int_equal(c->axes, 0);
    assert_false(c->plan.present || c->plan.has_ramp || c->plan.has_range);
    assert_true(c->plan.visibility == TH_VISIBILITY && c->plan.seed == 1 && c->plan.samples == 0);
    th_case_destroy(c);
    th_case_destroy(NULL);

    c = read_good(STEP "density = 2.385\n[solve]\naccuracy = 1e-12\n[ends]\n");
    assert_true(c->density_given && c->setup.density == 2.385);
    assert_true(c->accuracy == 1e-12);
    th_case_destroy(c);
    c = read_good(STEP "[solve]\naccuracy = 1e-3\n");
    assert_true(c->accuracy == 1e-3);
    th_case_destroy(c);
}

/* What is allowed in an INI file: byte order mark, CRLF, indentation, comments, ':', no blanks, no
 * newline at the end. */
static void test_grammar(void **state)
{
    th_case *c = read_good("\xEF\xBB\xBF; \xC2\xB5 comment\r\n[units] ; a comment\r\n"
                           "   system=reduced\r\n\t# another = one\r\n\r\n"
                           "[flow] # also\r\n  shape   =   step ; = step\r\nspeed: 1\r\n"
                           "   sound_upstream = 1.5\r\nsound_pocket =\t0.5\r\n"
                           "sound_downstream = 1.5\r\ngap = 6");

    (void)state;
    assert_true(value_of(c, "gap") == 6.0);
    assert_true(value_of(c, "sound_pocket") == 0.5);
    th_case_destroy(c);
    assert_refused("\xEF\xBB\xBF[units]\nsystem = reduced\n[units]\n",
                   "test.ini:3: section [units] stands twice, first in line 1");
}

static void test_si(void **state)
{
    const double m = 86.909180529 * TH_ATOMIC_MASS_UNIT, v = 1.35e-3;
    const double length = TH_PLANCK_HBAR / (m * v), time = length / v;
    th_case *c = read_good(STEP_SI "density = 30 /um\n[plan]\nhold_time = 100 ms\n"
                                   "lifetime = 2 s\ntemperature = 2 nK\n"
                                   "gap_ramp = 5 um to 20 um in 60 ms\n"
                                   "gap_range = 2 um to 14 um\nresolution = 1.5 um\n"
                                   "visibility = 25 %\ntransverse_frequency = 2 kHz\n"
                                   "samples = 128\nseed = 7\n"
                                   "tolerance.sound_pocket = 3 %\ntolerance.gap = 0.5%\n");

    (void)state;
    assert_int_equal(c->scale.system, TH_SYSTEM_SI);
    assert_close(c->scale.speed, v, 1e-15); /* sound_upstream is the unit of speed */
    assert_close(c->scale.length, length, 1e-15);
    assert_close(c->scale.time, time, 1e-15);
    assert_true(value_of(c, "sound_upstream") == 1.0);
    assert_close(value_of(c, "speed"), 0.9 / 1.35, 1e-15);
    assert_close(value_of(c, "sound_downstream"), 1.3 / 1.35, 1e-15);
    assert_close(value_of(c, "gap"), 6e-6 / length, 1e-15);
    assert_close(c->setup.density, 30e6 * length, 1e-15);
    assert_true(c->plan.present && c->plan.has_ramp);
    assert_close(c->plan.hold_time, 0.1 / time, 1e-15);
    assert_close(c->plan.lifetime, 2 / time, 1e-15);
    assert_close(c->plan.temperature, TH_BOLTZMANN * 2e-9 * time / TH_PLANCK_HBAR, 1e-15);
    assert_close(c->plan.ramp_from, 5e-6 / length, 1e-15);
    assert_close(c->plan.ramp_to, 20e-6 / length, 1e-15);
    assert_close(c->plan.ramp_time, 60e-3 / time, 1e-15);
    assert_true(c->plan.has_range);
    assert_close(c->plan.range_from, 2e-6 / length, 1e-15);
    assert_close(c->plan.range_to, 14e-6 / length, 1e-15);
    assert_close(c->plan.resolution, 1.5e-6 / length, 1e-15);
    assert_close(c->plan.visibility, 0.25, 1e-15);
    assert_close(c->plan.transverse, 2 * 3.14159265358979323846 * 2000 * time, 1e-14);
    assert_int_equal(c->plan.samples, 128);
    assert_int_equal(c->plan.seed, 7);
    for (int i = 0; i < c->setup.shape->keys; ++i) {
        const char *key = c->setup.shape->key[i].key;
        double want = strcmp(key, "sound_pocket") == 0 ? 0.03
                      : strcmp(key, "gap") == 0        ? 0.005
                                                       : 0.0;

        assert_close(c->plan.tolerance[i], want, 1e-15);
    }
    th_case_destroy(c);

    /* mass instead of species; well: sound_upstream is required in SI and is 1 in reduced units */
    c = read_good("[units]\nsystem = SI\n[atom]\nmass = 39 u\n[flow]\nshape = well\n"
                  "sound_upstream = 1 mm/s\nmach = 0.6\ngap = 3 \xC2\xB5m\n");
    assert_close(c->scale.mass, 39 * TH_ATOMIC_MASS_UNIT, 1e-15);
    assert_true(value_of(c, "sound_upstream") == 1.0 && value_of(c, "mach") == 0.6);
    th_case_destroy(c);
    c = read_good("[units]\nsystem = reduced\n[flow]\nshape = well\nmach = 0.6\ngap = 1.5\n");
    assert_true(value_of(c, "sound_upstream") == 1.0 && !given(c, "sound_upstream"));
    th_case_destroy(c);
}

/* One configuration written in both systems: all that is computed from it is the same to 1e-13,
 * some roundings of the conversion. */
static void test_si_equals_reduced(void **state)
{
    const double m = 38.963706485 * TH_ATOMIC_MASS_UNIT, v = 1.27e-3;
    const double length = TH_PLANCK_HBAR / (m * v);
    char text[1024];
    th_case *si,
        *reduced = read_good(
            "[units]\nsystem = reduced\n[flow]\nshape = tanh\nspeed = 0.7\nsound_upstream = 1\n"
            "sound_pocket = 0.41\nsound_downstream = 1.13\nwidth_black = 0.5\nwidth_white = 0.7\n"
            "gap = 8.3\n[ends]\nkind = walls\npadding = 11.1\n[sweep]\ngap = 2 to 9 in 8\n");

    (void)state;
    (void)snprintf(text, sizeof text,
                   "[units]\nsystem = SI\n[atom]\nspecies = K-39\n[flow]\nshape = tanh\n"
                   "speed = %.17g m/s\nsound_upstream = 1.27 mm/s\nsound_pocket = %.17g mm/s\n"
                   "sound_downstream = %.17g um/ms\nwidth_black = %.17g um\n"
                   "width_white = %.17g nm\ngap = %.17g m\n[ends]\nkind = walls\n"
                   "padding = %.17g mm\n[sweep]\ngap = %.17g m to %.17g um in 8\n",
                   0.7 * v, 0.41e3 * v, 1.13e3 * v, 0.5e6 * length, 0.7e9 * length, 8.3 * length,
                   11.1e3 * length, 2 * length, 9e6 * length);
    si = read_good(text);
    for (int i = 0; i < reduced->setup.shape->keys; ++i)
        assert_close(si->setup.value[i], reduced->setup.value[i], 1e-13);
    assert_close(si->setup.ends.padding, 11.1, 1e-13);
    assert_int_equal(si->axis[0].count, 8);
    for (int i = 0; i < 8; ++i)
        assert_close(si->axis[0].value[i], reduced->axis[0].value[i], 1e-13);
    th_case_destroy(si);
    th_case_destroy(reduced);
}

static void test_ends(void **state)
{
    /* ring of circumference 50 and winding 8: the speed is 2 pi 8/50 and may be left out */
    th_case *c = read_good("[units]\nsystem = reduced\n[flow]\nshape = tanh\nsound_upstream = 1.4\n"
                           "sound_pocket = 0.6\nsound_downstream = 1.4\nwidth_black = 0.5\n"
                           "width_white = 0.5\ngap = 9\n[ends]\nkind = ring\ncircumference = 50\n"
                           "winding = 8\n");

    (void)state;
    assert_int_equal(c->setup.ends.kind, TH_ENDS_RING);
    assert_true(c->setup.ends.circumference == 50.0);
    assert_int_equal(c->setup.ends.winding, 8);
    assert_false(given(c, "speed"));
    th_case_destroy(c);
    c = read_good(STEP "[ends]\nkind = walls\npadding = 0\n");
    assert_int_equal(c->setup.ends.kind, TH_ENDS_WALLS);
    assert_true(c->setup.ends.padding == 0.0);
    th_case_destroy(c);
    c = read_good(STEP "[ends]\nkind = open\n");
    assert_int_equal(c->setup.ends.kind, TH_ENDS_OPEN);
    th_case_destroy(c);
    c = read_good("[units]\nsystem = SI\n[atom]\nspecies = K-39\n[flow]\nshape = step\n"
                  "sound_upstream = 1.4 mm/s\nsound_pocket = 0.6 mm/s\n"
                  "sound_downstream = 1.4 mm/s\ngap = 9 um\n[ends]\nkind = ring\n"
                  "circumference = 60 um\nwinding = 5\n");
    assert_close(c->setup.ends.circumference, 60e-6 / c->scale.length, 1e-15);
    th_case_destroy(c);
}

static void test_sweep(void **state)
{
    static const double list[] = {0.6, 0.4, 0.5};
    th_case *c = read_good(STEP "[sweep]\nsound_pocket = 0.6, 0.4,0.5\ngap = 0.5 to 12 in 231\n"
                                "speed = -10 % to +10 % in 5\n");

    (void)state;
    assert_int_equal(c->axes, 3); /* in the order of the file */
    assert_string_equal(c->axis[0].name, "sound_pocket");
    assert_string_equal(c->axis[1].name, "gap");
    assert_string_equal(c->axis[2].name, "speed");
    for (int i = 0; i < 3; ++i)
        assert_string_equal(c->setup.shape->key[c->axis[i].key].key, c->axis[i].name);
    assert_int_equal(c->axis[0].count, 3);
    for (int i = 0; i < 3; ++i)
        assert_true(c->axis[0].value[i] == list[i]);
    assert_int_equal(c->axis[1].count, 231);
    assert_true(c->axis[1].value[0] == 0.5 && c->axis[1].value[230] == 12.0);
    for (int i = 0; i < 231; ++i)
        assert_close(c->axis[1].value[i], 0.5 + 0.05 * i, 1e-15);
    for (int i = 0; i < 5; ++i) /* relative to [flow] speed = 1 */
        assert_close(c->axis[2].value[i], 0.9 + 0.05 * i, 1e-15);
    assert_true(value_of(c, "gap") == 6.0); /* [flow] stays the base */
    th_case_destroy(c);

    /* numbers of [ends]: rings of one case with different winding */
    c = read_good(RING "[sweep]\nwinding = 6, 7\ncircumference = -10 % to 10 % in 3\n");
    assert_int_equal(c->axes, 2);
    assert_string_equal(c->axis[0].name, "winding");
    assert_int_equal(th_axis_key(c->setup.shape, c->axis[1].key)->dimension, TH_DIM_LENGTH);
    assert_close(c->axis[1].value[0], 45.0, 1e-15);
    {
        th_flow_setup setup = c->setup;

        th_axis_set(c->axis[0].key, c->axis[0].value[1], &setup);
        th_axis_set(c->axis[1].key, c->axis[1].value[2], &setup);
        assert_int_equal(setup.ends.winding, 7);
        assert_close(setup.ends.circumference, 55.0, 1e-15);
        assert_int_equal(c->setup.ends.winding, 8); /* the base stays */
    }
    th_case_destroy(c);

    /* a list over several lines, with comments and blank lines between them */
    c = read_good(STEP "[sweep]\ngap = 1, 2, ; two\n   3,\n; none here\n\n4,\n\t5 ; the last\n"
                       "speed = 1\n");
    assert_int_equal(c->axes, 2);
    assert_int_equal(c->axis[0].count, 5);
    for (int i = 0; i < 5; ++i)
        assert_true(c->axis[0].value[i] == i + 1.0);
    assert_int_equal(c->axis[1].count, 1);
    th_case_destroy(c);

    /* a key that only the sweep gives: its first value stands in [flow]; falling range */
    c = read_good("[units]\nsystem = reduced\n[flow]\nshape = step\nspeed = 1\n"
                  "sound_upstream = 1.5\nsound_pocket = 0.5\nsound_downstream = 1.5\n"
                  "[sweep]\ngap = 12 to 2 in 3\n");
    assert_true(value_of(c, "gap") == 12.0 && given(c, "gap"));
    assert_true(c->axis[0].value[0] == 12.0 && c->axis[0].value[1] == 7.0 &&
                c->axis[0].value[2] == 2.0);
    th_case_destroy(c);

    /* SI: units on each value; the unit of speed may itself come from the sweep */
    c = read_good("[units]\nsystem = SI\n[atom]\nspecies = K-39\n[flow]\nshape = step\n"
                  "speed = 1 mm/s\nsound_pocket = 0.5 mm/s\nsound_downstream = 1.5 mm/s\n"
                  "gap = 6 um\n[sweep]\nsound_upstream = 1.5 mm/s, 2 mm/s\n"
                  "gap = -50 %, 0 %, 50 %\n");
    assert_close(c->scale.speed, 1.5e-3, 1e-15);
    assert_true(value_of(c, "sound_upstream") == 1.0);
    assert_close(c->axis[0].value[1], 2 / 1.5, 1e-15);
    assert_close(c->axis[1].value[0], 3e-6 / c->scale.length, 1e-15);
    assert_close(c->axis[1].value[2], 9e-6 / c->scale.length, 1e-15);
    th_case_destroy(c);

    c = read_good(STEP "[sweep]\ngap = 1 to 2 in 200000\n");
    assert_int_equal(c->axis[0].count, 200000);
    assert_true(c->axis[0].value[199999] == 2.0);
    th_case_destroy(c);

    /* values so close that rounding makes some equal */
    assert_refused(STEP "[sweep]\ngap = 1 to 1.0000000000000004 in 9\n",
                   "test.ini:11: [sweep] gap = 1 to 1.0000000000000004 in 9: the values of an "
                   "axis must differ, and 1 stands twice");
}

static void test_overrides(void **state)
{
    static const char *const set[] = {
        "flow.gap=7",          "flow.gap= 8 ",        "flow.density=2",
        "solve.accuracy=1e-6", "sweep.speed=1, 1.1",  "plan.hold_time=30",
        "ends.kind=walls",     " ends . padding = 3", "plan.tolerance.gap=2 %"};
    static const char *const repair[] = {"flow.gap=9"};
    th_case *c = read_with(STEP "[sweep]\ngap = 1, 2\n", set, 9);

    (void)state;
    assert_true(value_of(c, "gap") == 8.0); /* the later one wins */
    assert_true(c->setup.density == 2.0 && c->density_given);
    assert_true(c->accuracy == 1e-6);
    assert_int_equal(c->axes, 2); /* an added axis comes last, the fastest */
    assert_string_equal(c->axis[0].name, "gap");
    assert_string_equal(c->axis[1].name, "speed");
    assert_true(c->plan.present && c->plan.hold_time == 30.0);
    assert_int_equal(c->setup.ends.kind, TH_ENDS_WALLS);
    assert_true(c->setup.ends.padding == 3.0);
    assert_string_equal(c->text, "[units]\nsystem = reduced\n\n[flow]\nshape = step\n"
                                 "density = 2\nspeed = 1\nsound_upstream = 1.5\n"
                                 "sound_pocket = 0.5\nsound_downstream = 1.5\ngap = 8\n\n"
                                 "[ends]\nkind = walls\npadding = 3\n\n[solve]\n"
                                 "accuracy = 1e-6\n\n[sweep]\ngap = 1, 2\nspeed = 1, 1.1\n\n"
                                 "[plan]\nhold_time = 30\ntolerance.gap = 2 %\n");
    th_case_destroy(c);

    /* a value that an override replaces is not in force, so it need not be right */
    c = read_with("[units]\nsystem = reduced\n[flow]\nshape = step\nspeed = 1\n"
                  "sound_upstream = 1.5\nsound_pocket = 0.5\nsound_downstream = 1.5\n"
                  "gap = ? ;\n",
                  repair, 1);
    assert_true(value_of(c, "gap") == 9.0);
    th_case_destroy(c);
}

/* The canonical text is the same whatever the order, and reads as the same case. */
static void test_canonical(void **state)
{
    const char *want = "[units]\nsystem = SI\n\n[atom]\nspecies = Rb-87\n\n[flow]\nshape = step\n"
                       "speed = 0.9 mm/s\nsound_upstream = 1.35 mm/s\nsound_pocket = 0.5 mm/s\n"
                       "sound_downstream = 1300 um/s\ngap = 6 um\n\n[sweep]\n"
                       "speed = 0.9 mm/s, 1 mm/s\n"
                       "gap = 1 um, 2 um, 3 um, 4 um, 5 um, 6 um, 7 um, 8 um, 9 um, 10 um, 11 um, "
                       "12 um, 13 um, 14 um,\n    15 um, 16 um\n\n[plan]\n";
    static const char *const other =
        "[plan]\n[sweep]\nspeed=0.9 mm/s,1 mm/s\n"
        "gap = 1 um,2 um, 3 um,\n4 um,  5 um,6 um, 7 um, 8 um,\n9 um, 10 um, 11 um,12 um, 13 um,"
        "14 um, 15 um, 16 um\n"
        "[flow]\ngap = 6   um\nsound_downstream = 1300 um/s\nsound_pocket = 0.5 mm/s ; slow\n"
        "sound_upstream = 1.35 mm/s\nspeed = 0.9 mm/s\nshape = step\n"
        "[atom]\nspecies = Rb-87\n[units]\nsystem = SI\n";
    th_case *c = read_good(other), *again = read_good(c->text);

    (void)state;
    assert_string_equal(c->text, want);
    assert_string_equal(again->text, want);
    assert_memory_equal(c->setup.value, again->setup.value, sizeof c->setup.value);
    assert_true(again->plan.present);
    assert_int_equal(again->axes, 2);
    assert_int_equal(again->axis[1].count, 16);
    for (int i = 0; i < 16; ++i)
        assert_true(c->axis[1].value[i] == again->axis[1].value[i]);
    th_case_destroy(c);
    th_case_destroy(again);
}

static void test_comma_locale(void **state)
{
    th_case *c;

    (void)state;
    if (!use_comma_locale()) {
        (void)setlocale(LC_ALL, "C");
        print_message("no locale with a decimal comma can be had here\n");
        skip();
    }
    c = read_good(STEP_SI "[sweep]\ngap = 1.5 um to 2.5 um in 3\n");
    assert_close(value_of(c, "speed"), 0.9 / 1.35, 1e-15);
    assert_close(c->axis[0].value[1], 2e-6 / c->scale.length, 1e-15);
    th_case_destroy(c);
    assert_refused(STEP "[sweep]\ngap = -1.5, 2\n",
                   "test.ini:11: [sweep] gap = -1.5, 2: gap must be > 0, not -1.5");
    (void)setlocale(LC_ALL, "C");
}

static void test_keys(void **state)
{
    int count = 0;
    const th_case_key *key = th_case_keys(&count);

    (void)state;
    assert_true(count >= 16);
    for (int i = 0; i < count; ++i) {
        assert_true(key[i].section[0] != '\0' && key[i].key[0] != '\0' && key[i].doc[0] != '\0');
        assert_null(strchr(key[i].doc, '\n'));
        for (int j = 0; j < i; ++j)
            assert_false(strcmp(key[i].section, key[j].section) == 0 &&
                         strcmp(key[i].key, key[j].key) == 0);
    }
}

static void test_files(void **state)
{
    char path[] = "/tmp/twinhorizon-case-XXXXXX", want[160];
    int handle = mkstemp(path);
    FILE *file = handle >= 0 ? fdopen(handle, "wb") : NULL;
    th_case *c = NULL;
    th_error err;

    (void)state;
    assert_non_null(file);
    (void)fputs(STEP, file);
    (void)fflush(file);
    assert_int_equal(th_case_read(path, NULL, 0, &c, NULL), TH_OK);
    assert_string_equal(c->path, path);
    th_case_destroy(c);
    for (int i = 0; i < (1 << 20) / 16; ++i) /* 16 bytes a line: over 1 MiB with what is there */
        (void)fputs("; fifteen chars\n", file);
    (void)fclose(file);
    assert_int_equal(th_case_read(path, NULL, 0, &c, &err), TH_ECASE);
    assert_null(c);
    (void)snprintf(want, sizeof want, "%s: the file is larger than 1048576 bytes", path);
    assert_string_equal(err.text, want);
    (void)remove(path);
    assert_int_equal(th_case_read(path, NULL, 0, &c, &err), TH_EIO);
    (void)snprintf(want, sizeof want, "%s: cannot be read: No such file or directory", path);
    assert_string_equal(err.text, want);
}

/* Names in messages: the end of a long path is kept, control characters are shown as numbers. */
static void test_names(void **state)
{
    char name[400], want[400];
    th_case *c = NULL;
    th_error err;

    (void)state;
    memset(name, 'd', sizeof name - 1);
    memcpy(name + sizeof name - 10, "/case.ini", 10);
    assert_int_equal(th_case_read_text(name, "[units]\nx\n", NULL, 0, &c, &err), TH_ECASE);
    (void)snprintf(want, sizeof want,
                   "...%s:2: want key = value, [section] or a comment, not \"x\"",
                   name + sizeof name - 1 - 116);
    assert_string_equal(err.text, want);
    assert_int_equal(th_case_read_text(name,
                                       "[units]\nsystem = SI\n[flow]\nshape = step\n[atom]\n"
                                       "species = an atom of which nobody has ever heard, let "
                                       "alone weighed it to ten digits\n",
                                       NULL, 0, &c, &err),
                     TH_ECASE);
    assert_string_equal(err.text + strlen(err.text) - 8, "its mass"); /* the longest one fits */
    assert_int_equal(th_case_read_text("a\n\x1b.ini", "[units]\nx\n", NULL, 0, &c, &err), TH_ECASE);
    assert_string_equal(err.text,
                        "a\\x0A\\x1B.ini:2: want key = value, [section] or a comment, not "
                        "\"x\"");
    assert_int_equal(th_case_read_text("test.ini", STEP "gap = 7\n", NULL, 0, &c, &err), TH_ECASE);
    assert_string_equal(err.key, "gap");
}

static void test_arguments(void **state)
{
    th_case *c = NULL;

    (void)state;
    assert_int_equal(th_case_read(NULL, NULL, 0, &c, NULL), TH_EINVAL);
    assert_int_equal(th_case_read("x", NULL, 0, NULL, NULL), TH_EINVAL);
    assert_int_equal(th_case_read_text("x", NULL, NULL, 0, &c, NULL), TH_EINVAL);
    assert_int_equal(th_case_read_text(NULL, "", NULL, 0, &c, NULL), TH_EINVAL);
    assert_int_equal(th_case_read_text("x", "", NULL, 1, &c, NULL), TH_EINVAL);
    assert_int_equal(th_case_read_text("x", "", NULL, -1, &c, NULL), TH_EINVAL);
    assert_int_equal(th_case_read_text("x", "", NULL, 0, NULL, NULL), TH_EINVAL);
}

/* Every allocation refused in turn: no memory is the answer, nothing leaks, nothing is handed out.
 */
static void test_memory(void **state)
{
    static const char *const set[] = {"flow.gap=7 um", "sweep.speed=1 mm/s, 0.9 mm/s, 1.1 mm/s"};
    long k = 0;

    (void)state;
    for (;; ++k) {
        th_case *c = NULL;
        th_error err = {.status = TH_OK};
        th_status st;
        bool enough;

        refuse_from(k);
        st = th_case_read_text("test.ini", STEP_SI "[sweep]\ngap = 1 um,\n3 um, 2 um\n[plan]\n",
                               set, 2, &c, &err);
        enough = refuse_stop();
        assert_int_equal(st, enough ? TH_OK : TH_ENOMEM);
        assert_int_equal(err.status, st);
        assert_true((c != NULL) == enough);
        th_case_destroy(c);
        if (enough)
            break;
    }
    assert_true(k > 50); /* about three a key */
}

/* 64-bit linear congruential generator (constants from memory), upper bits. */
static unsigned next_random(uint64_t *seed, unsigned below)
{
    *seed = *seed * 6364136223846793005u + 1442695040888963407u;
    return (unsigned)(*seed >> 40) % below;
}

/* Whatever comes in, an answer comes out: a case that builds, or one line that can be shown. */
static void assert_answered(const char *text, const char *const *override, int overrides)
{
    th_case *c = NULL;
    th_error err = {.status = TH_OK};
    th_status st = th_case_read_text("test.ini", text, override, overrides, &c, &err);

    if (st == TH_OK) {
        th_case *again = read_good(c->text);

        assert_string_equal(again->text, c->text);
        th_case_destroy(again);
        th_case_destroy(c);
        return;
    }
    assert_null(c);
    assert_int_equal(st, TH_ECASE);
    assert_true(strncmp(err.text, "test.ini:", 9) == 0 || strncmp(err.text, "--set ", 6) == 0);
    for (const char *p = err.text; *p != '\0'; ++p)
        assert_true((unsigned char)*p >= 0x20 && *p != 0x7F);
}

static void test_byte_soup(void **state)
{
    static const char *const piece[] = {"[units]\n",
                                        "system = SI\n",
                                        "system = reduced\n",
                                        "[flow]\n",
                                        "[sweep]\n",
                                        "[plan]\n",
                                        "[ends]\n",
                                        "shape = step\n",
                                        "shape = well\n",
                                        "gap = ",
                                        "gap_ramp = ",
                                        "speed = ",
                                        "sound_pocket = ",
                                        "kind = ring\n",
                                        "6",
                                        " um",
                                        " to ",
                                        " in ",
                                        ",",
                                        "%",
                                        "\n",
                                        ";",
                                        "=",
                                        "[",
                                        "]",
                                        "\xC2\xB5m",
                                        "1e9",
                                        "-",
                                        ".",
                                        "\xFF"};
    static const char good[] = STEP_SI
        "[ends]\nkind = walls\npadding = 2 um\n[sweep]\ngap = 1 um, 2 um,\n 3 um\n"
        "sound_pocket = -10 % to 10 % in 3\n[plan]\nhold_time = 3 ms\ntolerance.gap = 3 %\n";
    uint64_t seed = 20240602;

    (void)state;
    for (int round = 0; round < 3000; ++round) {
        char text[600];
        const char *override[1] = {text};
        size_t used = 0;

        for (unsigned n = next_random(&seed, 400); n > 0; --n) /* bytes, no zero */
            text[used++] = (char)(1 + next_random(&seed, 255));
        text[used] = '\0';
        assert_answered(text, NULL, 0);
        assert_answered(STEP, override, 1);

        used = 0; /* words of the grammar in any order */
        for (unsigned n = next_random(&seed, 30); n > 0; --n) {
            const char *word = piece[next_random(&seed, sizeof piece / sizeof piece[0])];

            memcpy(text + used, word, strlen(word));
            used += strlen(word);
        }
        text[used] = '\0';
        assert_answered(text, NULL, 0);

        memcpy(text, good, sizeof good); /* a good case with one to three bytes changed */
        for (unsigned n = 1 + next_random(&seed, 3); n > 0; --n)
            text[next_random(&seed, sizeof good - 1)] = (char)(1 + next_random(&seed, 127));
        assert_answered(text, NULL, 0);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_reduced),      cmocka_unit_test(test_grammar),
        cmocka_unit_test(test_si),           cmocka_unit_test(test_si_equals_reduced),
        cmocka_unit_test(test_ends),         cmocka_unit_test(test_sweep),
        cmocka_unit_test(test_overrides),    cmocka_unit_test(test_canonical),
        cmocka_unit_test(test_comma_locale), cmocka_unit_test(test_keys),
        cmocka_unit_test(test_files),        cmocka_unit_test(test_names),
        cmocka_unit_test(test_arguments),    cmocka_unit_test(test_memory),
        cmocka_unit_test(test_byte_soup),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
