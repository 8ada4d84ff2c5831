/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tests of th_mode_profile. What a mode must satisfy is tested from outside, on its values at
 * points: the equations of motion, continuity at jumps, plane waves of the dispersion relation far
 * away, norm zero. Frequencies: those of tests/test_modes.c, whose head says where they come from;
 * the two exceptions say so. Random points have fixed seeds. */
#include <complex.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <string.h>
#include <cmocka.h>

#include "flows.h"
#include "refuse.h"
#include "twinhorizon/profile.h"

extern void openblas_set_num_threads(int threads);

enum { CAP = 12001 };

/* Positions and the mode there. */
typedef struct {
    int count;
    double x[CAP], eta_re[CAP], eta_im[CAP], phi_re[CAP], phi_im[CAP];
} points;

static const th_solve_options usual = {.accuracy = 1e-9};

static void add(points *p, double x)
{
    assert_true(p->count < CAP);
    p->x[p->count++] = x;
}

static th_status try_fill(const th_flow *flow, double re, double im, points *p, th_error *err)
{
    return th_mode_profile(flow, &usual, re, im, p->count, p->x, p->eta_re, p->eta_im, p->phi_re,
                           p->phi_im, err);
}

static void fill(const th_flow *flow, double re, double im, points *p)
{
    th_error err = {0};

    if (try_fill(flow, re, im, p, &err) != TH_OK)
        fail_msg("omega = %g%+gi: %s", re, im, err.text);
}

static double complex eta(const points *p, int i)
{
    return p->eta_re[i] + I * p->eta_im[i];
}

static double complex phi(const points *p, int i)
{
    return p->phi_re[i] + I * p->phi_im[i];
}

/* ---- the modes that are tested -------------------------------------------------------------- */

typedef struct {
    const char *shape;
    th_ends_kind ends; /* walls: padding 6; ring: circumference 50, winding 8 */
    double value[7], re, im;
    double off; /* the matrix's frequency, which the shape has, may be this far from it */
} sample;

static const sample all[] = {
    {"step", TH_ENDS_OPEN, {0.75, 1, 0.3, 1, 2}, 0, 0.06827494164769716051, 0},
    {"step",
     TH_ENDS_OPEN,
     {0.8, 1.05, 0.35, 1.4, 9},
     0.04868824236231185274,
     0.03766453702335061746,
     0},
    {"tanh",
     TH_ENDS_OPEN,
     {1, 1.5, 0.5, 1.5, 0.5, 0.5, 8},
     0.06647747114694470596,
     0.03713458666473244461,
     0},
    {"well", TH_ENDS_OPEN, {1, 0.6, 1.5}, 0, 0.09896952583168150539, 0},
    {"well", TH_ENDS_OPEN, {1, 0.6, 1.5}, 0.6453735581719886289, 0.00243696234374789411, 0},
    /* These three are th_solve's, error bars 1e-14; nothing below takes its word. Far slower than
     * the nearest ends of the matrix resolve, and so ill-conditioned; the first-order growth rate
     * near L_0 (closed form, DEVELOPERS.md) is 1.3738846e-7. */
    {"step", TH_ENDS_OPEN, {0.75, 1, 0.3, 1, 1.1146036466253018}, 0, 1.37388392590399e-7, 1e-10},
    /* A resonance of a subsonic stretch: damped, so that it rises outwards. Off by the accuracy
     * that is asked of the matrix. */
    {"step", TH_ENDS_OPEN, {0.3, 3, 0.4, 3, 6}, 0.287681096404936, -0.0478467596104968, 1e-9},
    /* A supersonic downstream end: the absorbing layer of the matrix reflects a little. */
    {"step", TH_ENDS_OPEN, {1, 1.5, 0.5, 0.7, 6}, 0.230081205194882, 0.00636075793957105, 1e-5},
    {"step",
     TH_ENDS_WALLS,
     {0.75, 1, 0.3, 1.1, 5},
     0.08227255939210096827,
     0.05274546148103256462,
     0},
    {"tanh",
     TH_ENDS_RING,
     {0, 1.4, 0.6, 1.4, 0.5, 0.5, 10},
     0.1109274415056831485,
     0.00835332075081360569,
     0},
};
enum { SAMPLES = sizeof all / sizeof all[0] };

static th_flow *make(const sample *s)
{
    return flow_of(s->shape,
                   s->ends == TH_ENDS_OPEN    ? open_ends()
                   : s->ends == TH_ENDS_WALLS ? walls(6)
                                              : ring(50, 8),
                   s->value);
}

/* Largest speed or sound speed at an edge: the shortest wave is about this many to a length 2 pi.
 */
static double fastest(const th_flow *flow)
{
    double largest = th_flow_sound_max(flow);
    th_flow_point f;

    for (int i = 0; i < th_flow_pieces(flow); i++) {
        th_flow_eval(flow, i, th_flow_edges(flow, &(int){0})[i], &f);
        largest = fmax(largest, f.v);
    }
    return largest;
}

/* ---- equations of motion -------------------------------------------------------------------- */

/* Central differences of eighth order on nine points (standard coefficients; checked on powers in
 * test_differences). */
static const double first[5] = {0, 4.0 / 5, -1.0 / 5, 4.0 / 105, -1.0 / 280};
static const double second[5] = {-205.0 / 72, 8.0 / 5, -1.0 / 5, 8.0 / 315, -1.0 / 560};
/* One-sided first difference of sixth order on seven points. */
static const double onesided[7] = {-49.0 / 20, 6,       -15.0 / 2, 20.0 / 3,
                                   -15.0 / 4,  6.0 / 5, -1.0 / 6};

static void test_differences(void **state)
{
    (void)state;
    for (int power = 0; power <= 8; power++) {
        double d1 = 0, d2 = second[0] * (power == 0), side = 0;

        for (int j = 1; j < 5; j++) {
            d1 += first[j] * (pow(j, power) - pow(-j, power));
            d2 += second[j] * (pow(j, power) + pow(-j, power));
        }
        for (int j = 0; j < 7; j++)
            side += onesided[j] * (j == 0 ? power == 0 : pow(j, power));
        close_to("first derivative", d1, power == 1, 1e-11);
        close_to("second derivative", d2, power == 2 ? 2 : 0, 1e-11);
        if (power <= 6)
            close_to("one-sided derivative", side, power == 1, 1e-9);
    }
}

/* Derivatives at the middle of nine points from i on. */
static void derive(double complex (*field)(const points *, int), const points *p, int i, double h,
                   double complex *d1, double complex *d2)
{
    *d1 = 0;
    *d2 = second[0] * field(p, i + 4);
    for (int j = 1; j < 5; j++) {
        *d1 += first[j] * (field(p, i + 4 + j) - field(p, i + 4 - j));
        *d2 += second[j] * (field(p, i + 4 + j) + field(p, i + 4 - j));
    }
    *d1 /= h;
    *d2 /= h * h;
}

/* Random points, inside and, with open ends, as far again outside, where nine points h apart meet
 * no edge: -i omega eta = -v eta' - (1/n)(n phi')', -i omega phi = -v phi' - c^2 eta +
 * (1/(4n))(n eta')'. Tolerance: differences err by (h k)^8 k^2/3150 of the field, with |k| at most
 * twice the fastest that is 1e-10, and by 1e-13 of rounding over h^2, 1e-9; measured 1.3e-9. */
static void test_equations(void **state)
{
    enum { TRIALS = 60 };
    static points p;
    uint64_t seed = 20260101;

    (void)state;
    for (int s = 0; s < SAMPLES; s++) {
        th_flow *flow = make(&all[s]);
        const double complex omega = all[s].re + I * all[s].im;
        const double h = 0.06 / fastest(flow);
        const bool open = all[s].ends == TH_ENDS_OPEN;
        const double *edge;
        double largest = 0;
        int edges, trials = 0;

        edge = th_flow_edges(flow, &edges);
        p.count = 0;
        while (trials < TRIALS) {
            const double extent = edge[edges - 1] - edge[0], more = open ? extent : 0;
            const double x = draw(&seed, edge[0] - more, edge[edges - 1] + more);
            bool clear = true;

            for (int e = 0; e < edges; e++)
                clear = clear && fabs(x - edge[e]) > 4.5 * h;
            for (int j = -4; clear && j <= 4; j++)
                add(&p, x + j * h);
            trials += clear;
        }
        fill(flow, all[s].re, all[s].im, &p);
        for (int i = 0; i < p.count; i += 9) {
            double complex eta1, eta2, phi1, phi2, a, b;
            th_flow_point f;

            th_flow_at(flow, p.x[i + 4], &f);
            derive(eta, &p, i, h, &eta1, &eta2);
            derive(phi, &p, i, h, &phi1, &phi2);
            a = -I * omega * eta(&p, i + 4) + f.v * eta1 + phi2 + f.dn / f.n * phi1;
            b = -I * omega * phi(&p, i + 4) + f.v * phi1 + f.c * f.c * eta(&p, i + 4) -
                0.25 * (eta2 + f.dn / f.n * eta1);
            largest = fmax(largest, fmax(cabs(a), cabs(b)));
        }
        if (!(largest <= 2e-8 + all[s].off))
            fail_msg("%s, sample %d: residual %.2g", all[s].shape, s, largest);
        th_flow_destroy(flow);
    }
}

/* ---- continuity ----------------------------------------------------------------------------- */

/* n times the one-sided slope at the edge, from points i, i + 1, ... away from it. */
static double complex current(double complex (*field)(const points *, int), const points *p, int i,
                              double n, double h)
{
    double complex sum = 0;

    for (int j = 0; j < 7; j++)
        sum += onesided[j] * field(p, i + j);
    return n * sum / h;
}

/* eta, phi, n eta', n phi' from both sides of every edge of the flow, open ends and the seam of a
 * ring included. The edge itself is taken 1e-13 to each side, so that each side is asked for what
 * is its own: values then differ by 1e-13 |k| and rounding, measured 9e-13. Slopes err by (h k)^6
 * k/7, 1e-9, and by rounding over h, 1e-11; measured 1.3e-8 where |k| is 6, 3e-9 elsewhere. */
static void test_continuity(void **state)
{
    const double near = 1e-13;
    static points p;

    (void)state;
    for (int s = 0; s < SAMPLES; s++) {
        th_flow *flow = make(&all[s]);
        const double h = 0.015 / fastest(flow), tolerance = 2e-8 + 30 * all[s].off;
        const bool ring = all[s].ends == TH_ENDS_RING, wall = all[s].ends == TH_ENDS_WALLS;
        const double *edge;
        int edges;

        edge = th_flow_edges(flow, &edges);
        p.count = 0;
        for (int e = wall; e < edges - wall; e++)
            for (int side = -1; side <= 1; side += 2)
                for (int j = 0; j < 7; j++)
                    add(&p, edge[e] + side * (j > 0 ? j * h : near));
        fill(flow, all[s].re, all[s].im, &p);
        for (int i = 0, e = wall; i < p.count; i += 14, e++) {
            th_flow_point left, right;

            th_flow_eval(flow, ring && e == 0 ? th_flow_pieces(flow) - 1 : e - 1, edge[e], &left);
            th_flow_eval(flow, ring && e == edges - 1 ? 0 : e, edge[e], &right);
            close_to("jump of eta", cabs(eta(&p, i) - eta(&p, i + 7)), 0, 1e-11);
            close_to("jump of phi", cabs(phi(&p, i) - phi(&p, i + 7)), 0, 1e-11);
            close_to("jump of n eta'",
                     cabs(current(eta, &p, i, left.n, -h) - current(eta, &p, i + 7, right.n, h)), 0,
                     tolerance);
            close_to("jump of n phi'",
                     cabs(current(phi, &p, i, left.n, -h) - current(phi, &p, i + 7, right.n, h)), 0,
                     tolerance);
        }
        th_flow_destroy(flow);
    }
}

/* ---- far away ------------------------------------------------------------------------------- */

/* Beyond subsonic ends, where the evanescent wave has died, one plane wave is left: phi(x + d) =
 * phi(x) e^{ikd}, and k obeys the dispersion relation. It dies outwards when the mode grows and
 * rises when it is damped. */
static void test_far(void **state)
{
    static points p;

    (void)state;
    for (int s = 0; s < SAMPLES; s++) {
        const double complex omega = all[s].re + I * all[s].im;
        const double d = 0.1 / cabs(omega); /* a fraction of a wavelength */
        th_flow *flow;
        const double *edge;
        int edges;

        if (all[s].ends != TH_ENDS_OPEN)
            continue;
        flow = make(&all[s]);
        edge = th_flow_edges(flow, &edges);
        p.count = 0;
        for (int side = -1; side <= 1; side += 2)
            for (int j = 0; j < 2; j++)
                add(&p, side * (30 + j * d) + (side < 0 ? edge[0] : edge[edges - 1]));
        fill(flow, all[s].re, all[s].im, &p);
        for (int side = -1; side <= 1; side += 2) {
            const int i = side < 0 ? 0 : 2;
            const double complex k = clog(phi(&p, i + 1) / phi(&p, i)) / (I * (side * d));
            double complex comoving;
            th_flow_point f;

            th_flow_at(flow, p.x[i], &f);
            if (f.v > f.c)
                continue; /* two waves travel outwards here */
            comoving = omega - f.v * k;
            assert_int_equal(side * cimag(k) > 0, all[s].im > 0);
            close_to("dispersion relation",
                     cabs(comoving * comoving - f.c * f.c * k * k - k * k * k * k / 4), 0,
                     (1e-9 * cabs(omega) + 4 * all[s].off) * cabs(omega));
        }
        th_flow_destroy(flow);
    }
}

/* ---- norm ----------------------------------------------------------------------------------- */

/* A stretch of the axis, mapped from 0 <= t <= 1. */
typedef struct {
    int piece;
    double from, to;
    bool tail; /* x = from + (to - from) t^3: fine near the edge, where evanescent waves end */
} stretch;

static double position(const stretch *s, double t)
{
    return s->from + (s->to - s->from) * (s->tail ? t * t * t : t);
}

/* All pieces, and with open ends so much of both tails that what is left of |mode|^2 is e^{-30}: it
 * falls as e^{-2 Im omega x/(c +- v)}. */
static int stretches(const th_flow *flow, double growth, stretch *out)
{
    const int pieces = th_flow_pieces(flow);
    const double *edge;
    int edges, count = 0;

    edge = th_flow_edges(flow, &edges);
    for (int i = 0; i < pieces; i++)
        out[count++] = (stretch){i, edge[i], edge[i + 1], false};
    for (int side = -1; side <= 1 && th_flow_ends(flow).kind == TH_ENDS_OPEN; side += 2) {
        const double from = side < 0 ? edge[0] : edge[edges - 1];
        th_flow_point f;

        th_flow_eval(flow, side < 0 ? -1 : pieces, from, &f);
        out[count++] =
            (stretch){side < 0 ? -1 : pieces, from, from + side * 15 * (f.c + f.v) / growth, true};
    }
    return count;
}

/* Int 2 n Im(eta phi*) dx over Int 2 n |eta phi| dx, by Simpson's rule in t. */
static double relative_norm(const sample *s)
{
    enum { NODES = 2001 };
    static points p;
    th_flow *flow = make(s);
    stretch part[8];
    const int parts = stretches(flow, s->im, part);
    double sum = 0, size = 0;

    assert_true(parts <= 6);
    p.count = 0;
    for (int k = 0; k < parts; k++)
        for (int i = 0; i < NODES; i++)
            add(&p, position(&part[k], i / (NODES - 1.0)));
    fill(flow, s->re, s->im, &p);
    for (int k = 0; k < parts; k++)
        for (int i = 0; i < NODES; i++) {
            const int at = k * NODES + i;
            const double t = i / (NODES - 1.0), simpson = i % (NODES - 1) == 0 ? 1 : 2 + i % 2 * 2;
            const double dx = fabs(part[k].to - part[k].from) * (part[k].tail ? 3 * t * t : 1);
            const double complex product = eta(&p, at) * conj(phi(&p, at));
            th_flow_point f;

            th_flow_eval(flow, part[k].piece, p.x[at], &f);
            sum += simpson * dx * 2 * f.n * cimag(product);
            size += simpson * dx * 2 * f.n * cabs(product);
        }
    th_flow_destroy(flow);
    return sum / size;
}

/* A growing mode has norm zero over the whole axis, a neutral one has not. What is left is e^{-30}
 * and the error of Simpson's rule; measured 8e-11. Supersonic ends are left out: two waves beat in
 * their tail. */
static void test_norm(void **state)
{
    sample neutral = all[SAMPLES - 1];
    int tested = 0;

    (void)state;
    for (int s = 0; s < SAMPLES; s++)
        if (all[s].im > 1e-3 && all[s].off < 1e-6) {
            close_to("norm", relative_norm(&all[s]), 0, 1e-9);
            tested++;
        }
    assert_int_equal(tested, 7);
    /* same ring: a mode of negative energy that finds no partner (test_modes.c) */
    neutral.re = 0.19692730039258645303;
    neutral.im = 0;
    assert_true(relative_norm(&neutral) < -0.5);
}

/* ---- scale, phase, places ------------------------------------------------------------------- */

/* Largest |eta| is 1; eta is real and positive at the first place where |eta| is largest. */
static void expect_scale(const points *p)
{
    double largest = 0;
    int at = 0;

    for (int i = 0; i < p->count; i++)
        if (cabs(eta(p, i)) > largest * (1 + 1e-6)) {
            largest = cabs(eta(p, i));
            at = i;
        }
    close_to("largest |eta|", largest, 1, 1e-6);
    close_to("Im eta there", p->eta_im[at], 0, 1e-15);
    assert_true(p->eta_re[at] > 0);
}

/* Both ways along the axis. A neutral mode of a ring that is its own mirror image has two largest
 * |eta|, alike to rounding: each way the first one counts. */
static void test_scale(void **state)
{
    static points p, back;
    sample mode[SAMPLES + 1];

    (void)state;
    memcpy(mode, all, sizeof all);
    mode[SAMPLES] = all[SAMPLES - 1];
    mode[SAMPLES].re = 0.0857411553380839; /* th_solve's; matrix and matching function agree */
    mode[SAMPLES].im = 0;
    for (int s = 0; s <= SAMPLES; s++) {
        th_flow *flow = make(&mode[s]);

        p.count = back.count = 0;
        for (int i = 0; i <= 400; i++)
            add(&p, (i - 200) * 0.045);
        for (int i = 400; i >= 0; i--)
            add(&back, p.x[i]);
        fill(flow, mode[s].re, mode[s].im, &p);
        fill(flow, mode[s].re, mode[s].im, &back);
        expect_scale(&p);
        expect_scale(&back);
        for (int i = 0; i <= 400; i++) {
            close_to("|eta|", cabs(eta(&back, 400 - i)), cabs(eta(&p, i)), 1e-12);
            close_to("phi/eta",
                     cabs(phi(&back, 400 - i) * eta(&p, i) - phi(&p, i) * eta(&back, 400 - i)), 0,
                     1e-11 * (1 + cabs(phi(&p, i))));
        }
        th_flow_destroy(flow);
    }
}

/* Beyond walls there is nothing; a ring comes back to the same. */
static void test_places(void **state)
{
    const double circumference = 50;
    static points p;

    (void)state;
    for (int s = SAMPLES - 2; s < SAMPLES; s++) {
        th_flow *flow = make(&all[s]);

        p.count = 0;
        for (int i = 0; i < 100; i++)
            add(&p, -8.3 + 0.17 * i);
        for (int i = 0; i < 100; i++)
            add(&p, p.x[i] + (i % 2 ? 1 : -3) * circumference);
        fill(flow, all[s].re, all[s].im, &p);
        for (int i = 0; i < 100; i++) {
            const bool ring = all[s].ends == TH_ENDS_RING;

            close_to("eta", cabs(eta(&p, i + 100) - ring * eta(&p, i)), 0, 1e-12);
            close_to("phi", cabs(phi(&p, i + 100) - ring * phi(&p, i)), 0, 1e-12);
        }
        th_flow_destroy(flow);
    }
}

/* ---- errors --------------------------------------------------------------------------------- */

static void test_errors(void **state)
{
    static points p;
    th_flow *flow = make(&all[0]);
    const th_solve_options loose = {.accuracy = 0.1};
    th_error err;

    (void)state;
    p.count = 0;
    add(&p, 0.3);
    assert_int_equal(try_fill(NULL, 0, 0.0683, &p, &err), TH_EINVAL);
    assert_int_equal(try_fill(flow, 0, 0, &p, &err), TH_EINVAL);
    assert_string_equal(err.text, "profile: omega = 0+0i, want a finite one, not zero");
    assert_int_equal(try_fill(flow, 0, INFINITY, &p, NULL), TH_EINVAL);
    assert_int_equal(try_fill(flow, NAN, 0.0683, &p, NULL), TH_EINVAL);
    p.x[0] = NAN;
    assert_int_equal(try_fill(flow, 0, 0.0683, &p, &err), TH_EINVAL);
    assert_string_equal(err.text, "profile: x[0] = nan, want a finite position");
    p.x[0] = 0.3;
    p.count = 0;
    assert_int_equal(try_fill(flow, 0, 0.0683, &p, &err), TH_EINVAL);
    assert_int_equal(th_mode_profile(flow, &loose, 0, 0.0683, 1, p.x, p.eta_re, p.eta_im, p.phi_re,
                                     p.phi_im, &err),
                     TH_EINVAL);
    assert_string_equal(err.text, "profile: accuracy = 0.1, want 1e-12 to 1e-3");
    assert_int_equal(
        th_mode_profile(flow, &usual, 0, 0.0683, 1, p.x, p.eta_re, p.eta_im, p.phi_re, NULL, &err),
        TH_EINVAL);
    p.count = 1;
    /* near enough is enough, a hundredth off is another frequency */
    assert_int_equal(try_fill(flow, 0, 0.0683, &p, &err), TH_OK);
    assert_int_equal(try_fill(flow, 0, 0.069, &p, &err), TH_ENONE);
    assert_non_null(strstr(err.text, "no mode at omega = 0+0.069i"));
    /* a real root of the matching function (test_modes.c) that rotated ends do not uncover */
    th_flow_destroy(flow);
    flow = step_flow(0.75, 1, 0.3, 1, 1);
    assert_int_equal(try_fill(flow, 0, -0.0166079473127458, &p, &err), TH_ENONE);
    th_flow_destroy(flow);
    /* e^{0.0478 x/3.3} overflows; |x| = 1e4 does not */
    flow = make(&all[6]);
    p.x[0] = 1e4;
    assert_int_equal(try_fill(flow, all[6].re, all[6].im, &p, &err), TH_OK);
    p.x[0] = 1e5;
    assert_int_equal(try_fill(flow, all[6].re, all[6].im, &p, &err), TH_ENONE);
    assert_string_equal(err.text, "profile: the mode at x = 100000 is beyond the range of numbers");
    th_flow_destroy(flow);
    /* walls: nothing there */
    flow = make(&all[8]);
    assert_int_equal(try_fill(flow, all[8].re, all[8].im, &p, &err), TH_ENONE);
    assert_string_equal(err.text, "profile: the mode is zero on all 1 positions");
    th_flow_destroy(flow);
}

/* Every allocation refused in turn. */
static void test_refused(void **state)
{
    static points p;
    th_flow *flow = make(&all[7]);
    int refused = 0;

    (void)state;
    p.count = 0;
    add(&p, 0.3);
    add(&p, 30); /* beyond the supersonic end */
    for (long k = 0;; k++) {
        th_error err = {0};
        th_status st;

        refuse_from(k);
        st = try_fill(flow, all[7].re, all[7].im, &p, &err);
        if (refuse_stop()) {
            assert_int_equal(st, TH_OK);
            break;
        }
        assert_int_equal(st, TH_ENOMEM);
        assert_true(err.text[0] != '\0');
        refused++;
    }
    assert_true(refused >= 10);
    th_flow_destroy(flow);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_differences), cmocka_unit_test(test_equations),
        cmocka_unit_test(test_continuity),  cmocka_unit_test(test_far),
        cmocka_unit_test(test_norm),        cmocka_unit_test(test_scale),
        cmocka_unit_test(test_places),      cmocka_unit_test(test_errors),
        cmocka_unit_test(test_refused),
    };

    openblas_set_num_threads(1); /* small matrices: more threads only wait for each other */
    return cmocka_run_group_tests(tests, NULL, NULL);
}
