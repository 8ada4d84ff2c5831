/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Where the model stops applying: a list of dimensionless numbers, each with its limit and what
 * fails beyond it. What goes in: a flow and what is known of the experiment. What comes out: the
 * list. Depends on flow, status. Reduced units. */
#ifndef TWINHORIZON_VALIDITY_H
#define TWINHORIZON_VALIDITY_H

#include <stdbool.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/* 0 where a quantity is not known: its checks are then not `known`. */
typedef struct {
    double density;     /* atoms per reduced length far upstream */
    double transverse;  /* frequency of the transverse trap, angular */
    double temperature; /* k_B T */
    double hold;        /* time for which the flow is held */
    double loss_rate;   /* dn/dt = -loss_rate n; of a lifetime its inverse */
    double resolution;  /* smallest period that the imaging resolves */
    double contrast;    /* expected rms contrast of the growing ripple at the end of the hold */
} th_experiment;

typedef enum {
    TH_CHECK_STATE,      /* sqrt(1 + 4 a n) - 1: by how much c^2 proportional to n is wrong */
    TH_CHECK_TRANSVERSE, /* mu/(hbar omega_perp), mu = hbar omega_perp sqrt(1 + 4 a n) */
    TH_CHECK_MEAN_FIELD, /* atoms per healing length, the fewest along the flow */
    TH_CHECK_KAPPA,      /* largest surface gravity over c^2 at its horizon */
    TH_CHECK_RIPPLE,     /* period of the static undulation over the imaging resolution */
    TH_CHECK_HEALING,    /* shortest healing length at a horizon over the imaging resolution */
    TH_CHECK_THERMAL,    /* k_B T over m c^2 far upstream */
    TH_CHECK_COHERENCE,  /* thermal phase coherence length 2 n/T over the horizon distance */
    TH_CHECK_LOSS,       /* share of the atoms lost during the hold */
    TH_CHECK_LINEAR,     /* contrast at the end of the hold */
    TH_CHECKS
} th_check_id;

typedef struct {
    th_check_id id;
    const char *name;  /* one word, as in tables */
    const char *title; /* what the number is */
    bool known;        /* everything that it needs was given and exists */
    double value, limit;
    bool above;        /* value must be above the limit; else below */
    bool holds;        /* known, and on the right side */
    const char *fails; /* what fails beyond the limit */
} th_check;

/**
 * All checks in the order of the enumeration.
 *
 * a n comes from the transverse frequency and the largest sound speed, c^2 = omega_perp 2 a n/
 * sqrt(1 + 4 a n); where the flow has a scattering length and the density is known, from these.
 * @param[out] check  [TH_CHECKS]
 * @retval TH_EINVAL  flow, experiment or check is NULL, a quantity is negative or not finite
 * Limits are common practice, no source, but for: the transverse equation of state, "Effective
 * mean-field equations for cigar-shaped and disk-shaped Bose-Einstein condensates", Phys. Rev. A
 * 77, 013617 (2008); the coherence length, "Regimes of quantum degeneracy in trapped 1D gases",
 * Phys. Rev. Lett. 85, 3745 (2000) (from memory). Tests: tests/test_validity.c.
 */
TH_MUST_USE th_status th_validity_check(const th_flow *flow, const th_experiment *experiment,
                                        th_check check[TH_CHECKS], th_error *err);

#ifdef __cplusplus
}
#endif
#endif
