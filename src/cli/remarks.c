/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Remarks beside the answer of `solve`: walls against open ends, loss of atoms. */
#include <math.h>
#include <twinhorizon/point.h>

#include "cli.h"

/* The flow that was solved counts as the one in the trap until c^2 has fallen by this share. */
static const double drift = 0.1;
/* Gains above exp of this are not worth a number. */
static const double most_gain = 14.0;

/* Walls: the same flow with open ends, and how far the box is from it. */
static th_status print_walls(const th_case *c, const th_solution *s, const cli_view *v,
                             th_error *err)
{
    const th_point *none[2] = {NULL, NULL};
    th_flow_setup open = c->setup;
    th_point point = {0};
    const double boxed = s->unstable > 0 ? s->mode[0].omega_im : 0.0;
    double rate;
    th_status st;

    open.ends = (th_ends){.kind = TH_ENDS_OPEN};
    st = th_point_answer(&open, c->accuracy, none, &point, err);
    if (st != TH_OK)
        return st;
    printf("Note        walls reflect sound: growth rates are those of the box. ");
    rate = point.unstable > 0 ? point.mode[0].omega_im : 0.0;
    if (point.state != TH_POINT_OK)
        printf("How far they are from open ends is not known: %s\n", point.message);
    else if (rate > 0.0 && boxed > 0.0)
        printf("With open ends %d %s at most at %.6g%s: the box has %d, the fastest is off by "
               "%+.2g %%\n",
               point.unstable, point.unstable == 1 ? "mode grows," : "modes grow,", rate * v->rate,
               v->per_second, s->unstable, 100.0 * (boxed / rate - 1.0));
    else if (rate > 0.0)
        printf("With open ends %d %s at most at %.6g%s; in the box nothing grows\n", point.unstable,
               point.unstable == 1 ? "mode grows," : "modes grow,", rate * v->rate, v->per_second);
    else
        printf("With open ends nothing grows; in the box %d %s\n", s->unstable,
               s->unstable == 1 ? "mode does" : "modes do");
    th_point_clear(&point);
    return TH_OK;
}

/* Part of the atoms left when c^2 has fallen by the share `drift`: c^2 is proportional to n for
 * contact interaction, to n/sqrt(1 + 4 a n) for the transverse equation of state; an = a n. */
static double left(double an)
{
    double low = 0.0, high = 1.0;

    for (int i = 0; i < 60; i++) {
        const double part = (low + high) / 2.0;

        if (part * sqrt((1.0 + 4.0 * an) / (1.0 + 4.0 * an * part)) < 1.0 - drift)
            low = part;
        else
            high = part;
    }
    return (low + high) / 2.0;
}

/* Uniform loss: psi gains the factor exp(-loss t/2), background and fluctuation alike, so that the
 * contrast eta is not damped; what changes is c^2. */
static void print_loss(const th_case *c, const th_flow *flow, const th_solution *s,
                       const cli_view *v)
{
    const double until = -log(left(th_flow_scattering(flow) * c->setup.density)) / c->loss_rate;
    const double gain = s->unstable > 0 ? s->mode[0].omega_im * until : 0.0;

    printf("Loss        c^2 upstream falls by a tenth in %.4g%s; the numbers above hold for times "
           "well "
           "below that",
           until * v->time, v->milliseconds);
    if (gain > most_gain)
        printf(", in which the fastest mode outgrows any linear theory");
    else if (gain > 0.0)
        printf(", in which the fastest mode grows by a factor of %.3g", exp(gain));
    printf("\n            growth is that of the density contrast; the amplitude in atoms grows "
           "slower by %.4g%s\n",
           c->loss_rate / 2.0 * v->rate, v->per_second);
}

th_status cli_print_remarks(const th_case *c, const th_flow *flow, const th_solution *s,
                            th_error *err)
{
    const cli_view v = cli_view_of(c);
    th_status st = TH_OK;

    if (c->setup.ends.kind == TH_ENDS_WALLS)
        st = print_walls(c, s, &v, err);
    if (st == TH_OK && c->loss_rate > 0.0)
        print_loss(c, flow, s, &v);
    return st;
}
