/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The library by itself: a flow given by a callback (invented: uniform density and speed, the sound
 * speed dips as a Gaussian), its growing modes. Against an installed copy:
 *     cc pocket.c $(pkg-config --cflags --libs twinhorizon) -lm -o pocket && ./pocket */
#include <math.h>
#include <stdio.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/modes.h>

/* hbar = m = 1; n = v = 1; c = 1.4 - 0.9 exp(-(x/width)^2). Pure, so any thread may call it. */
static void eval(const void *ctx, int piece, double x, th_flow_point *p)
{
    const double width = *(const double *)ctx, dip = 0.9 * exp(-(x / width) * (x / width));

    (void)piece;
    *p = (th_flow_point){
        .n = 1.0, .v = 1.0, .c = 1.4 - dip, .dc = 2.0 * x / (width * width) * dip};
}

int main(void)
{
    static const double width = 4.0, edge[2] = {-26.0, 26.0}; /* uniform to rounding beyond */
    const th_feature feature = {0.0, width};
    const th_flow_spec spec = {.eval = eval,
                               .ctx = (void *)&width,
                               .pieces = 1,
                               .edge = edge,
                               .features = 1,
                               .feature = &feature};
    th_flow *flow = NULL;
    th_solution *s = NULL;
    th_error err = {0};
    th_status st = th_flow_create(&spec, &(th_ends){.kind = TH_ENDS_OPEN}, &flow, &err);

    if (st == TH_OK)
        st = th_solve(flow, &(th_solve_options){.accuracy = 1e-9}, &s, &err);
    if (st != TH_OK)
        fprintf(stderr, "%s\n", err.text);
    for (int i = 0; s != NULL && i < s->count; i++)
        if (s->mode[i].label == TH_LABEL_UNSTABLE)
            printf("%.10f + %.10f i, +- %.0e\n", s->mode[i].omega_re, s->mode[i].omega_im,
                   s->mode[i].omega_error);
    if (s != NULL)
        printf("%d growing modes; %d by census, %d by static index%s%s\n", s->unstable, s->census,
               s->index, s->verdict == TH_VERDICT_UNDECIDED ? "; undecided: " : "", s->reason);
    th_solution_destroy(s);
    th_flow_destroy(flow);
    return st != TH_OK;
}
