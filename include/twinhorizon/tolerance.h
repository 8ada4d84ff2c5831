/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Tolerances: what the answer becomes when keys of the flow drift. What goes in: a configuration
 * with its solution, a relative tolerance for some keys. What comes out: quantiles of growth rate
 * and frequency, probabilities, a ranking of keys. Depends on point, sensitivity, parallel,
 * flow, status. Reduced units. */
#ifndef TWINHORIZON_TOLERANCE_H
#define TWINHORIZON_TOLERANCE_H

#include <stdbool.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/modes.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/* Independent shifts of the point set: their scatter is the error of every estimate. */
enum { TH_TOLERANCE_SHIFTS = 8, TH_TOLERANCE_SAMPLES = 1024 };

typedef struct {
    const double *tolerance; /* [shape->keys] relative, 0 <= . < 1, 0: the key is held; each key is
                                uniform within value (1 +- tolerance), independently. Only numbers
                                that are given, not zero, not fixed by a ring's winding */
    int samples;        /* a multiple of TH_TOLERANCE_SHIFTS, 64 or more; 0: TH_TOLERANCE_SAMPLES */
    unsigned long seed; /* of the shifts */
    double accuracy;    /* as th_solve_options */
    int threads;        /* >= 1; no result depends on it */
    /* Visibility; hold = 0: not asked. */
    double hold;             /* time, reduced */
    double threshold;        /* contrast that can be seen, > 0 */
    const double *amplitude; /* [solution->count] rms contrast at time 0 of each growing mode of the
                                solution, 0: unknown and left out. A mode of a sample has that of
                                the one that, moved to first order, comes nearest */
} th_tolerance_options;

/* An estimate from all samples and its standard error from the scatter among the shifts; that of a
 * probability also holds the rounding to whole samples, so it is never zero. */
typedef struct {
    double value, error;
} th_estimate;

typedef struct {
    th_estimate low, median, high; /* 5, 50 and 95 % */
} th_spread;

/* How much one key matters. */
typedef struct {
    int key;
    bool slope_known; /* the base configuration has a growing mode, and th_sensitivity a slope for
                         it whose error is at most half of it, or a move below 1e-6 of |omega| */
    double slope; /* change of the fastest growth rate when the key moves by its tolerance, to first
                     order */
    double share; /* part of the variance of the growth rate that goes with this key alone
                     (first-order index), 0..1; 0 where growth rates agree within their bars */
    double share_error;
} th_tolerance_key;

typedef struct {
    int samples;           /* drawn */
    int failed, undecided; /* of them: no flow, or no certified answer; left out below */
    int unstable_least, unstable_most; /* growing modes, both signs counted */
    th_estimate growing;               /* probability that anything grows */
    th_spread growth;                  /* largest growth rate, 0 where nothing grows */
    bool frequency_known;              /* samples of at least two shifts grow */
    th_spread frequency;               /* Re omega of the fastest mode, over samples that grow */
    bool visible_known;                /* asked, and the amplitude of some growing mode is known */
    th_estimate visible; /* probability that the averaged contrast sqrt(Sum a^2 e^{2 Im omega hold})
                            reaches the threshold within the hold */
    int keys;
    th_tolerance_key *key; /* [keys] that matter most first (share, then |slope|) */
} th_tolerance;

/**
 * Sample the toleranced keys.
 *
 * Points: a Sobol sequence, TH_TOLERANCE_SHIFTS times with its own random shift modulo one. Each
 * sample is th_point_follow, given modes predicted from the base by th_sensitivity: certified by
 * the static index where there is one, else by the census. Same seed, same bytes.
 *
 * @param[in]  setup     base configuration, with open ends, ring or walls (the last two cost a
 *                       th_solve a sample)
 * @param[in]  solution  of th_solve for it
 * @param[out] out       zero before the call and after a failure; th_tolerance_clear releases
 * @retval TH_EINVAL  an option breaks its rule (err->key names the key), or no key has a tolerance
 * @retval TH_ENONE   no sample has an answer, or those of one shift only; the text ends with the
 *                    first one's
 * @retval TH_ENOMEM, TH_EBUG
 * Cost: a th_point_follow a sample, 7 ms of one core for the flow of cases/guide.ini. What success
 * does not prove: drifts of other keys and correlations between keys are outside; what happens to
 * less than about 3/samples of all drifts may not be among the samples. Source: "Distribution of
 * points in a cube and approximate evaluation of integrals", USSR Comput. Math. Math. Phys. 7, 86
 * (1967); random shifts: "Randomization of number theoretic methods for multiple integration", SIAM
 * J. Numer. Anal. 13, 904 (1976). Tests: tests/test_tolerance.c, tests/check_tolerance.py (10 000
 * solves of other random points).
 */
TH_MUST_USE th_status th_tolerance_sample(const th_flow_setup *setup, const th_solution *solution,
                                          const th_tolerance_options *options, th_tolerance *out,
                                          th_error *err);
void th_tolerance_clear(th_tolerance *tolerance);

#ifdef __cplusplus
}
#endif
#endif
