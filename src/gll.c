/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Gauss-Lobatto-Legendre rules: the nodes are +-1 and the zeros of P'_p. In: the order p. Out:
 * nodes, weights, derivative matrix, transform to Legendre coefficients. Calls nobody.
 * Symbols: p order, z node, P_p Legendre polynomial. Proof: tests/test_mesh.c. */
#include "gll.h"

#include <gsl/gsl_math.h>
#include <stddef.h>

/* P_p(z) and P_{p-1}(z) by the three-term recurrence, p >= 1. */
static void legendre(int p, double z, double *top, double *below)
{
    double previous = 1.0, current = z;

    for (int l = 1; l < p; l++) {
        double next = ((2 * l + 1) * z * current - l * previous) / (l + 1);

        previous = current;
        current = next;
    }
    *top = current;
    *below = previous;
}

/* Zero of P'_p by Newton's method: (1 - z^2) P'_p = p (P_{p-1} - z P_p) and
 * ((1 - z^2) P'_p)' = -p (p + 1) P_p. */
static double interior_node(int p, double z)
{
    const int steps = 50; /* quadratic from a Chebyshev-Lobatto start: under ten are needed */

    for (int s = 0; s < steps; s++) {
        double top, below, move;

        legendre(p, z, &top, &below);
        move = (below - z * top) / ((p + 1) * top);
        z += move;
        if (fabs(move) < 1e-16)
            break;
    }
    return z;
}

th_status th_gll_make(int order, th_gll *rule, th_error *err)
{
    const int p = order;
    double at_node[TH_GLL_ORDER_MAX + 1]; /* P_p(z_i) */

    if (rule == NULL || p < 2 || p > TH_GLL_ORDER_MAX)
        return th_fail(err, TH_EINVAL, "quadrature rule: order %d, want 2 to %d", p,
                       TH_GLL_ORDER_MAX);
    rule->order = p;
    for (int i = 0; 2 * i <= p; i++) {
        double z = i == 0 ? -1.0 : 2 * i == p ? 0.0 : interior_node(p, -cos(M_PI * i / p));

        rule->node[i] = z;
        rule->node[p - i] = -z;
    }
    for (int i = 0; i <= p; i++) {
        double below;

        legendre(p, rule->node[i], &at_node[i], &below);
        rule->weight[i] = 2.0 / (p * (p + 1) * at_node[i] * at_node[i]);
    }
    for (int i = 0; i <= p; i++) {
        double sum = 0.0; /* a constant has slope zero: the diagonal is minus the row's sum */

        for (int j = 0; j <= p; j++) {
            if (j == i)
                continue;
            rule->slope[i][j] = at_node[i] / (at_node[j] * (rule->node[i] - rule->node[j]));
            sum += rule->slope[i][j];
        }
        rule->slope[i][i] = -sum;
    }
    /* Discrete Legendre transform; the norm of P_p under the rule is 2/p, not 2/(2p + 1). */
    for (int l = 0; l <= p; l++) {
        double norm = l < p ? 2.0 / (2 * l + 1) : 2.0 / p;

        for (int j = 0; j <= p; j++) {
            double value = 1.0, below;

            if (l > 0)
                legendre(l, rule->node[j], &value, &below);
            rule->to_legendre[l][j] = value * rule->weight[j] / norm;
        }
    }
    return TH_OK;
}

double th_gll_interpolate(const th_gll *rule, const double *value, double z)
{
    double over = 0.0, under = 0.0;

    for (int j = 0; j <= rule->order; j++) {
        double gap = z - rule->node[j], factor;

        if (gap == 0.0)
            return value[j];
        /* barycentric weights of these nodes: (-1)^j sqrt(w_j) up to a common factor */
        factor = (j % 2 == 0 ? 1.0 : -1.0) * sqrt(rule->weight[j]) / gap;
        over += factor * value[j];
        under += factor;
    }
    return over / under;
}
