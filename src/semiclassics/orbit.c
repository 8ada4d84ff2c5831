/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Integrals over an orbit. In: a pocket, a frequency. Out: action, round-trip time, integrals of
 * wave numbers. Calls valley, waves, GSL (points of Gauss-Legendre quadrature), flow.
 *
 * Symbols: k_s and k_l differ by the square root of the distance from a turning point. With
 * x = middle + half sin u all integrands are smooth in u, -pi/2 < u < pi/2; panels in u are doubled
 * until nothing changes. To add an integral: one more component of an integrand. Proof:
 * tests/test_semiclassics.c. */
#include "inside.h"

#include <gsl/gsl_integration.h>
#include <gsl/gsl_math.h>

enum { PARTS = 3 };
/* Points of a panel: GSL keeps this rule as a table of constants. */
enum { POINTS = 10 };
/* Panels: the fewest, and what is given up after: 2^14 panels of ten points resolve a
 * hundred-thousandth of the pocket in its middle and far less near turning points. */
enum { PANELS = 4, PANELS_MAX = 1 << 14 };
/* Wanted of each integral, relative. Turning points are known to rounding, and the round trip
 * changes with the square root of that. */
#define TOLERANCE 1e-9

typedef void integrand(const th_flow *flow, double omega, double x, double part[PARTS]);

static void trapped(const th_flow *flow, double omega, double x, double part[PARTS])
{
    th_flow_point p;
    th_trapped w;

    th_flow_at(flow, x, &p);
    th_trapped_waves(omega, &p, &w);
    part[0] = w.k_l - w.k_s;
    /* At a turning point up to rounding the weight of u vanishes faster than time grows. */
    part[1] = w.speed_s > 0 && w.speed_l < 0 ? 1 / w.speed_s - 1 / w.speed_l : 0;
    part[2] = w.k_l + w.k_s;
}

static void partner(const th_flow *flow, double omega, double x, double part[PARTS])
{
    th_flow_point p;

    th_flow_at(flow, x, &p);
    part[0] = th_partner_wave(omega, &p);
    part[1] = part[2] = 0;
}

static void at_rest(const th_flow *flow, double omega, double x, double part[PARTS])
{
    th_flow_point p;

    (void)omega;
    th_flow_at(flow, x, &p);
    part[0] = 2 * sqrt(fmax(0, (p.v - p.c) * (p.v + p.c)));
    part[1] = part[2] = 0;
}

static void add_panels(const th_flow *flow, double omega, integrand *f, double a, double b,
                       const gsl_integration_glfixed_table *rule, int panels, double sum[PARTS])
{
    const double middle = (a + b) / 2, half = (b - a) / 2, step = M_PI / panels;

    for (int j = 0; j < PARTS; j++)
        sum[j] = 0;
    for (int i = 0; i < panels; i++)
        for (size_t q = 0; q < POINTS; q++) {
            double u, w, part[PARTS];

            gsl_integration_glfixed_point(-M_PI_2 + i * step, -M_PI_2 + (i + 1) * step, q, &u, &w,
                                          rule);
            f(flow, omega, middle + half * sin(u), part);
            for (int j = 0; j < PARTS; j++)
                sum[j] += w * half * cos(u) * part[j];
        }
}

static th_status integrate(const th_flow *flow, double omega, integrand *f, double a, double b,
                           double sum[PARTS], th_error *err)
{
    th_status st = TH_EBUG;
    gsl_integration_glfixed_table *rule = gsl_integration_glfixed_table_alloc(POINTS);
    bool settled = false;

    if (rule == NULL)
        return th_fail(err, TH_ENOMEM, "semiclassics: quadrature of %d points", POINTS);
    add_panels(flow, omega, f, a, b, rule, PANELS, sum);
    for (int panels = 2 * PANELS; panels <= PANELS_MAX && !settled; panels *= 2) {
        double last[PARTS];

        settled = true;
        for (int j = 0; j < PARTS; j++)
            last[j] = sum[j];
        add_panels(flow, omega, f, a, b, rule, panels, sum);
        for (int j = 0; j < PARTS; j++)
            settled = settled && fabs(sum[j] - last[j]) <= TOLERANCE * fabs(sum[j]);
    }
    st = settled ? TH_OK
                 : th_fail(err, TH_ECONVERGE,
                           "semiclassics: integral from x = %g to %g at omega = %g does not settle",
                           a, b, omega);
    gsl_integration_glfixed_table_free(rule);
    return st;
}

th_status th_orbit_follow(const th_valley *valley, double omega, th_orbit *out, th_error *err)
{
    double sum[PARTS];
    th_status st;

    *out = (th_orbit){.left = 0};
    th_valley_turns(valley, omega, &out->left, &out->right);
    st = integrate(valley->flow, omega, trapped, out->left, out->right, sum, err);
    if (st != TH_OK)
        return st;
    out->action = sum[0];
    out->round_trip = sum[1];
    out->sum = sum[2];
    return TH_OK;
}

th_status th_orbit_static(const th_valley *valley, double *action, th_error *err)
{
    double sum[PARTS];
    const th_status st = integrate(valley->flow, 0, at_rest, valley->left, valley->right, sum, err);

    *action = sum[0];
    return st;
}

th_status th_orbit_partner(const th_valley *valley, double omega, double *integral, th_error *err)
{
    double sum[PARTS];
    const th_status st =
        integrate(valley->flow, omega, partner, valley->left, valley->right, sum, err);

    *integral = sum[0];
    return st;
}
