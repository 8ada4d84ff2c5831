/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * What a growing mode looks like in a picture of the density, and whether it can be told from the
 * static undulation of the white-hole horizon. What goes in: a flow and a mode. What comes out:
 * wave numbers, speeds, three yes-or-no answers. Depends on profile, flow, status. Reduced units.
 */
#ifndef TWINHORIZON_PATTERN_H
#define TWINHORIZON_PATTERN_H

#include <stdbool.h>
#include <twinhorizon/flow.h>
#include <twinhorizon/modes.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/* The wave that a mode sends out beyond one end. */
typedef struct {
    bool known;        /* the end is open and subsonic */
    double wavenumber; /* Re k of eta ~ e^{i k x}; 0 for a purely growing mode without waves */
    double decay;      /* length on which it falls by e outwards, 1/|Im k| */
    double loudness;   /* largest |eta| beyond that horizon over the largest in the pocket */
} th_pattern_side;

/* The density ripple of a mode. Speeds of the pattern are Re omega/k in the laboratory. */
typedef struct {
    int pocket;        /* of the flow, the one that holds most of Int |eta|^2 */
    double wavenumber; /* where |Int eta e^{-i k x} dx| over the pocket is largest; < 0: the
                          pattern moves against the flow when Re omega > 0 */
    double resolution; /* 2 pi/length of the pocket: waves closer than that are one */
    double share;      /* of Int |eta|^2 in the pocket that a single wave of that wave number
                          holds, 0..1: well below 1/2 the ripple is no single wave */
    double undulation; /* wave number of the static undulation there, 2 sqrt(v^2 - c^2) */
    double place;      /* where |eta| is largest */
    th_pattern_side upstream, downstream;
} th_pattern;

/**
 * Pattern of the mode at a frequency.
 * @param[in]  options   as for th_solve
 * @param[in]  omega_re, omega_im  a growing mode of the flow, as th_solve gives it
 * @retval TH_ENONE  the flow has no pocket, or as th_mode_profile
 * @retval TH_EINVAL, TH_EUNDECIDED, TH_ENOMEM, TH_ECONVERGE  as th_mode_profile
 * Cost: that of th_mode_profile. Tests: tests/test_pattern.c.
 */
TH_MUST_USE th_status th_pattern_find(const th_flow *flow, const th_solve_options *options,
                                      double omega_re, double omega_im, th_pattern *out,
                                      th_error *err);

/* What tells a growing mode from a static undulation. All rules are common practice, no source. */
typedef struct {
    bool imaged;    /* the ripple's period is at least the resolution of the imaging, or no
                       resolution was given */
    bool frequency; /* at least one whole oscillation within the hold */
    bool
        wavenumber; /* imaged, as is the undulation, and wave numbers more than 2 pi/length apart */
    bool growth;    /* the contrast grows by e or more between half the hold and its end */
} th_pattern_tell;

/**
 * The three answers for a hold.
 * @param[in] hold        > 0
 * @param[in] resolution  smallest period that the imaging resolves; 0: not given, taken as fine
 */
th_pattern_tell th_pattern_judge(const th_pattern *pattern, double omega_re, double omega_im,
                                 double hold, double resolution);

#ifdef __cplusplus
}
#endif
#endif
