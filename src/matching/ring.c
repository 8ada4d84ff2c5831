/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * det(M - 1) of a ring. In: steps, omega. Out: the determinant with its derivative. Calls
 * transfer. Every number carries its omega-derivative along (dual numbers).
 * The running relation A y_0 + B y_i = 0 takes up -T y_i + y_{i+1} = 0: columns of y_i are
 * eliminated from the stacked rows, four rows remain. Proof: tests/test_matching.c. */
#include "matching/ring.h"

#include <math.h>
#include <string.h>

typedef struct {
    double complex v, d; /* value, omega-derivative */
} dual;

enum { ROWS = 8, COLUMNS = 12 }; /* columns: y_i, y_0, y_{i+1} */

void th_scaled_times(th_scaled *a, double complex value, double complex slope)
{
    double size;
    int power;

    a->slope = a->slope * value + a->value * slope;
    a->value *= value;
    size = fmax(cabs(a->value), cabs(a->slope));
    if (!(size > 0.0) || !isfinite(size))
        return;
    (void)frexp(size, &power);
    a->value *= ldexp(1.0, -power);
    a->slope *= ldexp(1.0, -power);
    a->exponent += power;
}

/* Eliminate the first `count` columns of m[rows][columns]; pivots multiply the determinant. */
static void eliminate(dual (*m)[COLUMNS], int rows, int columns, int count, th_scaled *determinant)
{
    for (int j = 0; j < count; j++) {
        int best = j;

        for (int i = j + 1; i < rows; i++)
            if (cabs(m[i][j].v) > cabs(m[best][j].v))
                best = i;
        if (best != j) {
            for (int l = 0; l < columns; l++) {
                const dual swap = m[j][l];

                m[j][l] = m[best][l];
                m[best][l] = swap;
            }
            th_scaled_times(determinant, -1.0, 0.0);
        }
        th_scaled_times(determinant, m[j][j].v, m[j][j].d);
        if (m[j][j].v == 0.0)
            return; /* an exact root; only the last pivot can be one */
        for (int i = j + 1; i < rows; i++) {
            const double complex factor = m[i][j].v / m[j][j].v;
            const double complex change = (m[i][j].d - factor * m[j][j].d) / m[j][j].v;

            if (m[i][j].v == 0.0 && m[i][j].d == 0.0)
                continue;
            for (int l = j + 1; l < columns; l++) {
                m[i][l].d -= change * m[j][l].v + factor * m[j][l].d;
                m[i][l].v -= factor * m[j][l].v;
            }
        }
    }
}

/* Take up one more transfer matrix into the relation (a, b). */
static void take_up(dual a[4][4], dual b[4][4], th_matrix4 t, th_matrix4 dt, th_scaled *determinant)
{
    dual m[ROWS][COLUMNS];

    memset(m, 0, sizeof m);
    for (int i = 0; i < 4; i++) {
        for (int j = 0; j < 4; j++) {
            m[i][j] = b[i][j];
            m[i][4 + j] = a[i][j];
            m[4 + i][j] = (dual){-t[i][j], -dt[i][j]};
        }
        m[4 + i][8 + i].v = 1.0;
    }
    eliminate(m, ROWS, COLUMNS, 4, determinant);
    for (int i = 0; i < 4; i++)
        for (int j = 0; j < 4; j++) {
            a[i][j] = m[4 + i][4 + j];
            b[i][j] = m[4 + i][8 + j];
        }
}

th_status th_ring_determinant(const th_steps *steps, double complex omega, bool slope,
                              th_scaled *out, th_error *err)
{
    dual a[4][4], b[4][4], last[4][COLUMNS];

    *out = (th_scaled){1.0, 0.0, 0};
    memset(a, 0, sizeof a);
    memset(b, 0, sizeof b);
    memset(last, 0, sizeof last);
    for (int i = 0; i < 4; i++) { /* -y_0 + y_start = 0 */
        a[i][i].v = -1.0;
        b[i][i].v = 1.0;
    }
    for (int i = 0; i < steps->count; i++) {
        th_fundamental f;
        th_matrix4 t, dt;
        th_status st = th_transfer_expand(&steps->step[i], steps->flux, omega, slope, &f, err);

        if (st != TH_OK)
            return st;
        memset(dt, 0, sizeof dt);
        th_transfer_matrix(&f, slope, t, dt);
        for (int r = 0; r < steps->step[i].repeat; r++)
            take_up(a, b, t, dt, out);
    }
    for (int i = 0; i < 4; i++)
        for (int j = 0; j < 4; j++) {
            last[i][j].v = a[i][j].v + b[i][j].v;
            last[i][j].d = a[i][j].d + b[i][j].d;
        }
    eliminate(last, 4, 4, 4, out);
    return TH_OK;
}
