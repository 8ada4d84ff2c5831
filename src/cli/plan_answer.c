/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The first lines of a plan: what it means for the run, in sentences. */
#include <gsl/gsl_math.h>

#include "plan.h"

/* Probabilities from here on need no warning. */
static const double sure = 0.95;

static void print_growth(FILE *out, const cli_findings *p, const cli_view *v)
{
    const th_plan_request *ask = &p->c->plan;
    const th_solution *s = p->solution;
    const th_mode *fastest = p->growing > 0 ? p->mode[0].mode : NULL;
    char growth[CLI_NUMBER];

    if (s->verdict == TH_VERDICT_UNDECIDED)
        fprintf(out, "Undecided   %s; what follows holds for the modes that were found\n",
                s->reason);
    if (fastest == NULL && s->verdict == TH_VERDICT_UNDECIDED) {
        fputs("Growth      no growing mode was found; whether one is there is undecided\n", out);
        return;
    }
    if (fastest == NULL) {
        fputs("Growth      none: nothing will grow out of this flow as it stands\n", out);
        return;
    }
    fprintf(out,
            "Growth      %d growing %s (both signs of the frequency counted); the fastest by e in "
            "%.4g%s, %s%s",
            s->unstable, s->unstable == 1 ? "mode" : "modes", v->time / fastest->omega_im,
            v->milliseconds,
            cli_number(fastest->omega_im * v->rate, fastest->omega_error * v->rate, growth),
            v->per_second);
    if (ask->hold_time > 0.0)
        fprintf(out, ": %.3g e-foldings within the hold of %.4g%s",
                fastest->omega_im * ask->hold_time, ask->hold_time * v->time, v->milliseconds);
    fputc('\n', out);
}

static void print_visible(FILE *out, const cli_findings *p, const cli_view *v)
{
    const th_plan_request *ask = &p->c->plan;
    const cli_plan_seed *seed = cli_plan_main_seed(p);
    const double limit = ask->hold_time > 0.0 ? ask->hold_time : ask->lifetime;
    const char *name = ask->hold_time > 0.0 ? "hold" : "lifetime";

    if (p->growing == 0)
        return;
    if (!seed->part.known || !seed->visible) {
        fprintf(out, "Visible     not known: %s\n", seed->part.why);
        return;
    }
    if (seed->visible_time == 0.0) {
        fprintf(
            out,
            "Visible     no: %s alone make a contrast of %.3g at the start, above the %.3g that "
            "counts as visible; growth does not stand out from them\n",
            seed->temperature > 0.0 ? "thermal and vacuum fluctuations" : "vacuum fluctuations",
            seed->contrast[0], ask->visibility);
        return;
    }
    fprintf(out, "Visible     a contrast of %.3g is reached after %.4g%s, from %s", ask->visibility,
            seed->visible_time * v->time, v->milliseconds,
            seed->temperature > 0.0 ? "thermal and vacuum fluctuations" : "the vacuum alone");
    if (limit > 0.0 && seed->visible_time <= limit)
        fprintf(out, ": within the %s of %.4g%s", name, limit * v->time, v->milliseconds);
    else if (limit > 0.0)
        fprintf(out, ": NOT within the %s of %.4g%s", name, limit * v->time, v->milliseconds);
    if (seed->saturates && (limit == 0.0 || seed->linear_time < limit))
        fprintf(out, "; linear theory ends at %.4g%s", seed->linear_time * v->time,
                v->milliseconds);
    fputc('\n', out);
}

/* Whether the leading ripple can be told from the static undulation. */
static void print_tell(FILE *out, const cli_findings *p, const cli_view *v)
{
    const th_plan_request *ask = &p->c->plan;

    if (p->growing == 0)
        return;
    if (ask->hold_time == 0.0) {
        fputs("Told apart  not known: [plan] hold_time is not given\n", out);
        return;
    }
    for (int i = 0; i < p->growing; i++) {
        const cli_plan_mode *m = &p->mode[i];
        const th_pattern_tell *t = &m->tell;
        const int ways = t->frequency + t->wavenumber + t->growth;

        if (i == 3) {
            fprintf(out, "            and %d slower %s: see below\n", p->growing - 3,
                    p->growing == 4 ? "mode" : "modes");
            return;
        }
        fputs(i == 0 ? "Told apart  " : "            ", out);
        if (!m->part.known) {
            fprintf(out, "mode %d: not known: %s\n", i + 1, m->part.why);
            continue;
        }
        fprintf(out, "mode %d from the static undulation: %s", i + 1,
                !t->imaged ? "NO, its ripple is finer than the imaging"
                : !t->growth && t->frequency
                    ? "by its motion only, it grows by less than e in the second half of the hold"
                : !t->growth && t->wavenumber
                    ? "by its wave number only, it grows by less than e in "
                      "the second half of the hold"
                : !t->growth ? "hardly, it grows by less than e in the second half of the hold"
                : ways == 1  ? "by its growth only"
                : t->frequency && t->wavenumber ? "yes, by growth, motion and wave number"
                : t->frequency                  ? "yes, by growth and motion"
                                                : "yes, by growth and wave number");
        if (t->imaged && !t->frequency)
            fprintf(out, "; %s",
                    m->mode->omega_re == 0.0 ? "it stands still as the undulation does"
                                             : "less than one oscillation within the hold");
        if (t->imaged && !t->wavenumber)
            fprintf(
                out, "; periods in the pocket %.3g and %.3g%s %s",
                2.0 * M_PI / fmax(fabs(m->pattern.wavenumber), m->pattern.resolution) * v->length,
                2.0 * M_PI / m->pattern.undulation * v->length, v->micrometres,
                fabs(fabs(m->pattern.wavenumber) - m->pattern.undulation) > m->pattern.resolution
                    ? "differ, but the imaging does not resolve both"
                    : "are one to a pocket so short");
        fputc('\n', out);
    }
}

static void print_drift(FILE *out, const cli_findings *p, const cli_view *v)
{
    const th_tolerance *t = &p->tolerance;

    if (!p->tolerance_part.known) {
        fprintf(out, "Drift       not known: %s\n", p->tolerance_part.why);
        return;
    }
    fprintf(out,
            "Drift       within the tolerances growth is %.3g (5-95 %%: %.3g to %.3g)%s; something "
            "grows with probability %.3g +- %.1g",
            t->growth.median.value * v->rate, t->growth.low.value * v->rate,
            t->growth.high.value * v->rate, v->per_second, t->growing.value, t->growing.error);
    if (t->visible_known)
        fprintf(out, ", visibly within the hold with %.3g +- %.1g%s", t->visible.value,
                t->visible.error, t->visible.value < sure ? ": a run may show nothing" : "");
    if (t->keys > 0 && t->key[0].share > t->key[0].share_error)
        fprintf(out, "; `%s` matters most", p->c->setup.shape->key[t->key[0].key].key);
    fputc('\n', out);
}

static void print_length(FILE *out, const cli_findings *p, const cli_view *v)
{
    const th_shape_key *key;

    if (!p->best_part.known || !p->best.grows)
        return;
    key = &p->c->setup.shape->key[th_shape_length(p->c->setup.shape)];
    fprintf(out, "Best length %s = %.4g%s: growth %.4g%s%s\n", key->key,
            p->best.length * (key->dimension == TH_DIM_LENGTH ? v->length : 1.0),
            key->dimension == TH_DIM_LENGTH ? v->micrometres : "", p->best.omega_im * v->rate,
            v->per_second, p->best.at_end ? " (at the end of the range)" : "");
}

static void print_model(FILE *out, const cli_findings *p)
{
    int failed = 0, unknown = 0;

    for (int i = 0; i < TH_CHECKS; i++) {
        unknown += !p->check[i].known;
        failed += p->check[i].known && !p->check[i].holds;
    }
    fprintf(out, "Model       %d of %d limits are overstepped", failed, TH_CHECKS - unknown);
    for (int i = 0, n = 0; i < TH_CHECKS; i++)
        if (p->check[i].known && !p->check[i].holds)
            fprintf(out, "%s%s", n++ == 0 ? ": " : ", ", p->check[i].name);
    fprintf(out, "%s; %d could not be checked: see Validity\n", failed > 0 ? " (!)" : "", unknown);
}

void cli_plan_print_answer(FILE *out, const cli_findings *p)
{
    const cli_view v = cli_view_of(p->c);

    print_growth(out, p, &v);
    print_visible(out, p, &v);
    print_tell(out, p, &v);
    print_drift(out, p, &v);
    print_length(out, p, &v);
    print_model(out, p);
}
