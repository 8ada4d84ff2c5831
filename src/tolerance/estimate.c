/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Estimates and their errors. In: the answers of all samples. Out: probabilities, quantiles, shares
 * of the variance. Calls GSL's sorting and statistics.
 *
 * A value comes from all samples with an answer; its error is the scatter of the same statistic
 * among the shifts, over the root of their number: points of one sequence are not independent,
 * shifts are.
 *
 * Share of a key with coordinate u: Var(E[y | u])/Var(y), y the growth rate. u is cut into bins b;
 * with the sums S_sb = Sum (y - mean) and counts n_sb of shift s,
 *     Var(E[y | u]) ~ Sum_b w_b Sum_{s != t} S_sb S_tb / Sum_{s != t} n_sb n_tb,
 * w_b the part of the samples in b. Only products of different shifts enter: what one finite shift
 * makes of the other keys averages to zero, and no bias has to be taken off. Symbols: s, t shifts,
 * b bin, y growth rate. Proof: tests/test_tolerance.c, tests/check_tolerance.py. */
#include "tolerance/inside.h"

#include <gsl/gsl_sort_double.h>
#include <gsl/gsl_statistics_double.h>
#include <math.h>
#include <stdlib.h>

#include "alloc.h"

/* BINS: a straight dependence loses 1/BINS^2 = 0.4 % of its share inside the bins; at the usual
 * number of samples 8 of each shift fall into a bin. */
enum { SHIFTS = TH_TOLERANCE_SHIFTS, BINS = 16, QUANTILES = 3 };

static const double quantile[QUANTILES] = {0.05, 0.5, 0.95};

double th_draw_coordinate(const th_draw *draw, int sample, int k)
{
    const double u =
        draw->point[(sample % draw->each) * draw->keys + k] + draw->shift[sample / draw->each][k];

    return u < 1.0 ? u : u - 1.0;
}

static bool answered(const th_sample *sample)
{
    return sample->state == TH_POINT_OK;
}

/* The value from everything, its error from the parts: [count >= 2], one of each shift. */
static th_estimate scatter(double value, const double *part, int count)
{
    return (th_estimate){value, gsl_stats_sd(part, 1, (size_t)count) / sqrt(count)};
}

/* Samples that a statistic is about. */
typedef bool (*chooser)(const th_sample *sample);

static bool grows(const th_sample *sample)
{
    return sample->unstable > 0;
}

static bool can_be_seen(const th_sample *sample)
{
    return sample->visible;
}

/* The part of the answered samples that are chosen. Some shifts (two at least) have answers. Whole
 * samples are counted: all shifts may agree and yet be off by the same rounding. Each of N shifts
 * of n samples rounds by 1/n, a uniform error of variance 1/(12 n^2); its mean over shifts is
 * added. */
static th_estimate probability(const th_draw *draw, chooser choose)
{
    double part[SHIFTS], rounding;
    int parts = 0;
    long all = 0, chosen = 0;
    th_estimate out;

    for (int s = 0; s < SHIFTS; s++) {
        long count = 0, good = 0;

        for (int i = s * draw->each; i < (s + 1) * draw->each; i++) {
            count += answered(&draw->sample[i]);
            good += answered(&draw->sample[i]) && choose(&draw->sample[i]);
        }
        if (count > 0)
            part[parts++] = (double)good / (double)count;
        all += count;
        chosen += good;
    }
    out = scatter((double)chosen / (double)all, part, parts);
    rounding = sqrt(parts / 12.0) / (double)all; /* 1/(sqrt(12) n sqrt(N)), n = all/N */
    out.error = hypot(out.error, rounding);
    return out;
}

typedef enum { GROWTH, FREQUENCY } quantity;

/* Quantiles over samples from <= i < to; false when there is none. */
static bool quantiles(const th_draw *draw, quantity what, int from, int to, double *work,
                      double *out)
{
    size_t count = 0;

    for (int i = from; i < to; i++) {
        const th_sample *sample = &draw->sample[i];

        if (answered(sample) && (what == GROWTH || grows(sample)))
            work[count++] = what == GROWTH ? sample->growth : sample->frequency;
    }
    if (count == 0)
        return false;
    gsl_sort(work, 1, count);
    for (int q = 0; q < QUANTILES; q++)
        out[q] = gsl_stats_quantile_from_sorted_data(work, 1, count, quantile[q]);
    return true;
}

/* False when fewer than two shifts have samples to take quantiles of. work: [samples] */
static bool spread(const th_draw *draw, quantity what, double *work, th_spread *out)
{
    double all[QUANTILES] = {0}, part[QUANTILES][SHIFTS], one[QUANTILES];
    int parts = 0;

    if (!quantiles(draw, what, 0, draw->samples, work, all))
        return false;
    for (int s = 0; s < SHIFTS; s++)
        if (quantiles(draw, what, s * draw->each, (s + 1) * draw->each, work, one)) {
            for (int q = 0; q < QUANTILES; q++)
                part[q][parts] = one[q];
            parts++;
        }
    if (parts < 2)
        return false;
    out->low = scatter(all[0], part[0], parts);
    out->median = scatter(all[1], part[1], parts);
    out->high = scatter(all[2], part[2], parts);
    return true;
}

/* Sums over the samples of one shift in one bin. */
typedef struct {
    double count, sum, square; /* of y less the mean over all samples */
} bin;

/* Share from all shifts but one (-1: from all); 0 when nothing varies. */
static double share_without(bin (*table)[BINS], int left_out)
{
    double count = 0, sum = 0, square = 0, total, mean, between = 0;

    for (int s = 0; s < SHIFTS; s++)
        for (int b = 0; s != left_out && b < BINS; b++) {
            count += table[s][b].count;
            sum += table[s][b].sum;
            square += table[s][b].square;
        }
    if (!(count > 0))
        return 0;
    mean = sum / count;
    total = square / count - mean * mean;
    if (!(total > 0))
        return 0;
    for (int b = 0; b < BINS; b++) {
        double counts = 0, sums = 0, pairs = 0, products = 0;

        for (int s = 0; s < SHIFTS; s++)
            if (s != left_out) {
                const double n = table[s][b].count, y = table[s][b].sum - mean * n;

                counts += n;
                sums += y;
                pairs -= n * n;
                products -= y * y;
            }
        pairs += counts * counts; /* sums over s != t */
        products += sums * sums;
        if (pairs > 0)
            between += counts / count * products / pairs;
    }
    return fmin(fmax(between / total, 0), 1);
}

/* Share of the k-th key; its error by leaving out one shift after the other (jackknife). */
static void share(const th_draw *draw, int k, double mean, th_tolerance_key *out)
{
    bin table[SHIFTS][BINS] = {{{0, 0, 0}}};
    double without[SHIFTS];

    for (int i = 0; i < draw->samples; i++) {
        const th_sample *sample = &draw->sample[i];
        const double y = sample->growth - mean;
        bin *place = &table[i / draw->each][(int)(BINS * th_draw_coordinate(draw, i, k))];

        if (!answered(sample))
            continue;
        place->count += 1;
        place->sum += y;
        place->square += y * y;
    }
    for (int s = 0; s < SHIFTS; s++)
        without[s] = share_without(table, s);
    out->share = share_without(table, -1);
    /* (N - 1)/N Sum (x - mean)^2, and sd^2 is the same sum over N - 1 */
    out->share_error = (SHIFTS - 1) / sqrt(SHIFTS) * gsl_stats_sd(without, 1, SHIFTS);
}

th_status th_draw_estimate(const th_draw *draw, th_tolerance *out, th_error *err)
{
    double *work = th_alloc((size_t)draw->samples, sizeof *work);
    double sum = 0, least = HUGE_VAL, most = 0, blur = 0;
    int count = 0;

    if (work == NULL)
        return th_fail(err, TH_ENOMEM, "tolerance: %d numbers", draw->samples);
    out->samples = draw->samples;
    for (int i = 0; i < draw->samples; i++) {
        const th_sample *sample = &draw->sample[i];

        out->failed += sample->state == TH_POINT_FAILED;
        out->undecided += sample->state == TH_POINT_UNDECIDED;
        if (!answered(sample))
            continue;
        if (count == 0 || sample->unstable < out->unstable_least)
            out->unstable_least = sample->unstable;
        if (count == 0 || sample->unstable > out->unstable_most)
            out->unstable_most = sample->unstable;
        count++;
        sum += sample->growth;
        least = fmin(least, sample->growth);
        most = fmax(most, sample->growth);
        blur = fmax(blur, sample->error);
    }
    if (!spread(draw, GROWTH, work, &out->growth)) {
        free(work);
        return th_fail(err, TH_ENONE, "tolerance: %d of %d samples have an answer", count,
                       draw->samples);
    }
    out->frequency_known = spread(draw, FREQUENCY, work, &out->frequency);
    out->growing = probability(draw, grows);
    if (out->visible_known)
        out->visible = probability(draw, can_be_seen);
    /* Growth rates that agree within their bars do not vary: their roundings belong to no key. */
    for (int k = 0; k < draw->keys && most - least > blur; k++)
        share(draw, k, sum / count, &out->key[k]);
    free(work);
    return TH_OK;
}
