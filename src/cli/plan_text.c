/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * A plan as text: the answer, then one section for each part. */
#include <gsl/gsl_math.h>
#include <string.h>

#include "plan.h"

/* Rows of a section that a reader takes in; all of them are in the table. */
enum { ROWS = 12 };

/* "12.3", or "-" for what does not exist. */
static const char *cell(bool known, double value, char buffer[CLI_NUMBER])
{
    if (!known)
        return strcpy(buffer, "-");
    (void)snprintf(buffer, CLI_NUMBER, "%.4g", value);
    return buffer;
}

static const char *percent(bool known, double share, char buffer[CLI_NUMBER])
{
    if (!known)
        return strcpy(buffer, "-");
    (void)snprintf(buffer, CLI_NUMBER, "%.0f%%", 100.0 * share);
    return buffer;
}

static void print_rest(FILE *out, int count)
{
    if (count > ROWS)
        fprintf(out, "            and %d more: --csv has all\n", count - ROWS);
}

/* A period: of a wave number below one wave in the pocket it is only known to be longer. */
static const char *period(const cli_view *v, double wavenumber, double resolution,
                          char buffer[CLI_NUMBER])
{
    const double k = fabs(wavenumber);

    if (k < resolution)
        (void)snprintf(buffer, CLI_NUMBER, "> %.3g", 2.0 * M_PI / resolution * v->length);
    else
        (void)snprintf(buffer, CLI_NUMBER, "%.3g", 2.0 * M_PI / k * v->length);
    return buffer;
}

/* What tells a mode from the static undulation: "growth, motion, wave number". */
static const char *told_by(const cli_findings *p, const cli_plan_mode *m, char words[CLI_NUMBER])
{
    const th_pattern_tell *t = &m->tell;

    if (!m->part.known || p->c->plan.hold_time == 0.0)
        return "-";
    if (!t->imaged)
        return "nothing: too fine for the imaging";
    (void)snprintf(words, CLI_NUMBER, "%s%s%s", t->growth ? "growth, " : "",
                   t->frequency ? "motion, " : "", t->wavenumber ? "wave number, " : "");
    if (words[0] == '\0')
        return "nothing";
    words[strlen(words) - 2] = '\0';
    return words;
}

static void print_modes(FILE *out, const cli_findings *p, const cli_view *v)
{
    const th_plan_request *ask = &p->c->plan;
    const th_pocket *pocket;
    int pockets;

    if (p->growing > 0)
        fprintf(out, "\n%-11s %4s %13s %12s %8s %8s %9s %9s %9s %9s %6s  %s\n", "Modes", "mode",
                v->si ? "frequency/Hz" : "frequency", v->si ? "e-fold/ms" : "e-fold", "in hold",
                "in life", v->si ? "period/um" : "period", v->si ? "mm/s" : "speed",
                v->si ? "upstr./um" : "upstream", v->si ? "downs./um" : "downstr.", "single",
                "told apart by");
    for (int i = 0; i < p->growing && i < ROWS; i++) {
        const cli_plan_mode *m = &p->mode[i];
        const double re = m->mode->omega_re, im = m->mode->omega_im;
        const bool moves = m->part.known && re > 0.0;
        const th_pattern_side *up = &m->pattern.upstream, *down = &m->pattern.downstream;
        char hold[CLI_NUMBER], life[CLI_NUMBER], inside[CLI_NUMBER], speed[CLI_NUMBER];
        char left[CLI_NUMBER], right[CLI_NUMBER], frequency[CLI_NUMBER], words[CLI_NUMBER];
        char single[CLI_NUMBER];

        fprintf(out, "%11s %4d %13s %12.5g %8s %8s %9s %9s %9s %9s %6s  %s\n", "", i + 1,
                cli_number(re * v->frequency, m->mode->omega_error * v->frequency, frequency),
                v->time / im, cell(ask->hold_time > 0.0, im * ask->hold_time, hold),
                cell(ask->lifetime > 0.0, im * ask->lifetime, life),
                m->part.known ? period(v, m->pattern.wavenumber, m->pattern.resolution, inside)
                              : "-",
                cell(moves && fabs(m->pattern.wavenumber) >= m->pattern.resolution,
                     re / m->pattern.wavenumber * v->speed, speed),
                cell(moves && up->known, 2.0 * M_PI / fabs(up->wavenumber) * v->length, left),
                cell(moves && down->known, 2.0 * M_PI / fabs(down->wavenumber) * v->length, right),
                percent(m->part.known, m->pattern.share, single), told_by(p, m, words));
    }
    print_rest(out, p->growing);
    pocket = th_flow_pockets(p->flow, &pockets);
    for (int i = 0; i < pockets; i++)
        fprintf(out,
                "%s%-10s %4s %13s %12s %8s %8s %9.3g %9s   static undulation of the white-hole "
                "horizon%s\n",
                i == 0 && p->growing == 0 ? "\nModes       " : "            ", "", "-", "0", "-",
                "-", "-", 2.0 * M_PI / pocket[i].undulation * v->length, "0",
                pockets > 1 ? ", one pocket" : "");
    if (p->growing > 0)
        fputs(
            "            period and speed of the density ripple in the pocket, wavelengths of the "
            "sound that it sends out;\n"
            "            single: how much of the ripple in the pocket is one wave of that period "
            "(the rest beats with it);\n"
            "            told apart from the undulation by growth: by e or more from half the hold "
            "to its end; motion: a whole\n"
            "            oscillation within the hold; wave number: more than one wave in the "
            "pocket "
            "apart, and imaged\n",
            out);
}

static void print_seed(FILE *out, const cli_findings *p, const cli_view *v, const cli_plan_seed *s,
                       const char *name)
{
    if (!s->part.known) {
        fprintf(out, "            %-22s not known: %s\n", name, s->part.why);
        return;
    }
    fprintf(out, "            %-22s", name);
    for (int i = 0; i < CLI_PLAN_TIMES; i++)
        if (s->contrast[i] < 0.0)
            fprintf(out, " %9s", "huge");
        else
            fprintf(out, " %9.2g%s", s->contrast[i], s->contrast[i] >= 1.0 ? "*" : " ");
    if (s->visible)
        fprintf(out, "   %.3g after %.4g%s", p->c->plan.visibility, s->visible_time * v->time,
                v->milliseconds);
    if (s->saturates)
        fprintf(out, ", 1 after %.4g%s", s->linear_time * v->time, v->milliseconds);
    if (s->unknown > 0)
        fprintf(out, "; without %d slow %s", s->unknown, s->unknown == 1 ? "mode" : "modes");
    fputc('\n', out);
}

static void print_seeds(FILE *out, const cli_findings *p, const cli_view *v)
{
    char name[64];

    if (p->growing == 0)
        return;
    fprintf(out, "\nSeeded      %-22s", v->si ? "time/ms" : "time");
    for (int i = 0; i < CLI_PLAN_TIMES; i++)
        fprintf(out, " %9.4g ", p->time[i] * v->time);
    fputc('\n', out);
    print_seed(out, p, v, &p->vacuum, "contrast, vacuum");
    (void)snprintf(name, sizeof name, "contrast, %.3g%s", p->c->plan.temperature * v->temperature,
                   v->kelvin);
    if (p->c->plan.temperature > 0.0)
        print_seed(out, p, v, &p->thermal, name);
    fputs("            rms of delta n/n of all growing modes at the loudest place of the pocket; * "
          "above 1 linear theory has stopped;\n            a start from equilibrium of the moving "
          "cloud, the least there can be: how the flow is made adds to it\n",
          out);
}

static void print_ramp(FILE *out, const cli_findings *p, const cli_view *v)
{
    const th_plan_request *ask = &p->c->plan;
    const th_ramp *r = &p->ramp;
    const th_shape_key *key;
    double unit;

    if (!p->ramp_part.known) {
        if (ask->has_ramp)
            fprintf(out, "\nRamp        not known: %s\n", p->ramp_part.why);
        return;
    }
    key = &p->c->setup.shape->key[th_shape_length(p->c->setup.shape)];
    unit = key->dimension == TH_DIM_LENGTH ? v->length : 1.0;
    fprintf(out, "\nRamp        %s from %.4g to %.4g%s in %.4g%s: ", key->key,
            ask->ramp_from * unit, ask->ramp_to * unit,
            key->dimension == TH_DIM_LENGTH ? v->micrometres : "", ask->ramp_time * v->time,
            v->milliseconds);
    if (r->count == 0) {
        fputs("nothing grows on the way\n", out);
        return;
    }
    fprintf(out, "%.3g e-foldings%s; %s = %.4g does most\n", r->best,
            r->unanswered > 0.0 ? "" : " at most", key->key, r->dominant * unit);
    fprintf(out, "            %6s %10s %8s %22s %10s %10s %9s\n", "branch", "e-foldings", "+-",
            "between", "fastest at", v->si ? "growth*s" : "growth", "doubtful");
    for (int i = 0; i < r->count && i < ROWS; i++) {
        const th_track_gain *g = &r->gain[i];

        fprintf(out, "            %6d %10.4g %8.1g %10.4g - %9.4g %10.4g %10.4g %8.0f%%\n",
                g->branch + 1, g->gain, g->error, g->from * unit, g->to * unit, g->dominant * unit,
                g->growth * v->rate, 100.0 * g->doubtful);
    }
    print_rest(out, r->count);
    if (r->unanswered > 0.0)
        fprintf(out, "            %.2g %% of the way has no answer and counts as no growth\n",
                100.0 * r->unanswered);
    fputs("            doubtful: share of the gain where the ramp is too fast for one mode to be "
          "followed; the gain is the exponent only\n",
          out);
}

static void print_range(FILE *out, const cli_findings *p, const cli_view *v)
{
    const th_track_best *b = &p->best;
    const th_shape_key *key;
    const char *word;
    double unit;

    if (!p->best_part.known) {
        fprintf(out, "\nLengths     not known: %s\n", p->best_part.why);
        return;
    }
    key = &p->c->setup.shape->key[th_shape_length(p->c->setup.shape)];
    unit = key->dimension == TH_DIM_LENGTH ? v->length : 1.0;
    word = key->dimension == TH_DIM_LENGTH ? v->micrometres : "";
    fprintf(out, "\nLengths     %s from %.4g to %.4g%s: ", key->key, p->range_from * unit,
            p->range_to * unit, word);
    if (!b->grows) {
        fputs("nothing grows at any of them\n", out);
        return;
    }
    fprintf(out, "fastest growth %.4g%s at %.4g +- %.1g%s, frequency %.4g%s%s\n",
            b->omega_im * v->rate, v->per_second, b->length * unit, b->error * unit, word,
            b->omega_re * v->frequency, v->hertz,
            b->at_end ? "; this is an end of the range, beyond it may be faster" : "");
    for (int i = 0; i < b->clean_count && i < ROWS; i++)
        fprintf(out,
                "            a single growing mode from %s%.5g to %.5g%s%s; there fastest %.4g%s "
                "at about "
                "%.4g%s\n",
                b->clean[i].open_below ? "(start) " : "", b->clean[i].from * unit,
                b->clean[i].to * unit, b->clean[i].open_above ? " (end)" : "", word,
                b->clean[i].growth * v->rate, v->per_second, b->clean[i].fastest * unit, word);
    print_rest(out, b->clean_count);
    if (b->clean_count == 0)
        fputs("            no stretch has a single growing mode\n", out);
}

static void print_spread(FILE *out, const char *name, const char *unit, const th_spread *s,
                         double factor)
{
    fprintf(out, "            %-22s %10.4g +- %-8.1g %10.4g +- %-8.1g %10.4g +- %-8.1g %s\n", name,
            s->low.value * factor, s->low.error * factor, s->median.value * factor,
            s->median.error * factor, s->high.value * factor, s->high.error * factor, unit);
}

static void print_tolerance(FILE *out, const cli_findings *p, const cli_view *v)
{
    const th_tolerance *t = &p->tolerance;

    if (!p->tolerance_part.known) {
        fprintf(out, "\nTolerances  not known: %s\n", p->tolerance_part.why);
        return;
    }
    fprintf(out,
            "\nTolerances  %d flows, seed %d; %d to %d growing modes; %d not certified, %d without "
            "a flow or answer\n",
            t->samples, p->c->plan.seed, t->unstable_least, t->unstable_most, t->undecided,
            t->failed);
    fprintf(out, "            %-22s %10s    %-8s %10s    %-8s %10s\n", "", "5 %", "", "median", "",
            "95 %");
    print_spread(out, "growth rate", v->si ? "/s" : "", &t->growth, v->rate);
    if (t->frequency_known)
        print_spread(out, "frequency, fastest", v->si ? "Hz" : "", &t->frequency, v->frequency);
    fprintf(out, "            probability of any growth %.4g +- %.1g", t->growing.value,
            t->growing.error);
    if (t->visible_known)
        fprintf(out, ", of growth visible within the hold %.4g +- %.1g", t->visible.value,
                t->visible.error);
    fputc('\n', out);
    fprintf(out, "            %-22s %10s %18s %22s\n", "key", "tolerance", "of the variance",
            v->si ? "first order, growth*s" : "first order, growth");
    for (int i = 0; i < t->keys; i++) {
        const th_tolerance_key *k = &t->key[i];
        char slope[CLI_NUMBER];

        fprintf(out, "            %-22s %9.3g%% %11.0f +- %2.0f%% %22s\n",
                p->c->setup.shape->key[k->key].key, 100.0 * p->c->plan.tolerance[k->key],
                100.0 * k->share, 100.0 * k->share_error,
                cell(k->slope_known, k->slope * v->rate, slope));
    }
    fputs(
        "            each key even within its tolerance, independent of the others; variance: the "
        "share that goes with this key alone\n",
        out);
}

/* Up to where levels are worth something, as it was measured: semiclassics.h, from "How far to
 * trust it" on. e = omega/kappa. */
static const double e_least = 0.1, e_growth = 1.3, e_flat = 0.4, thermal_most = 3.0, matched = 0.05,
                    rough_most = 6.0;

static const char *worth(const th_semiclassics *s, int level)
{
    const th_semiclassical_mode *m = &s->mode[level];
    const double e = m->omega / fmax(s->kappa_black, s->kappa_white);

    if (e < e_least)
        return "no: far below kappa";
    if (s->thermal > thermal_most)
        return "no: edges too steep";
    if (level + 1 == s->count && s->roughness > rough_most)
        return "no: too few waves";
    if (m->level == 0)
        return "frequency only: next to the top of the band";
    if (s->impedance < matched)
        return e < e_growth ? "frequency; growth roughly" : "frequency only";
    return e < e_flat ? "frequency; growth is a lower estimate" : "frequency only";
}

static void print_pocket(FILE *out, const cli_view *v, const cli_plan_pocket *at)
{
    const th_semiclassics *s = &at->answer;

    if (!at->part.known) {
        fprintf(out, "            not known: %s\n", at->part.why);
        return;
    }
    fprintf(out,
            "            %.3g waves fit at zero frequency; kappa/omega_max %.3g (want below 1), "
            "kappa/c^2 %.3g, spread of ln(n/c) %.3g (want 0)\n",
            s->levels, s->thermal, s->steepness, s->impedance);
    if (s->count > 0)
        fprintf(out, "            %5s %10s %10s %10s %9s %22s %9s  %s\n", "level",
                v->si ? "WKB/Hz" : "WKB", v->si ? "exact/Hz" : "exact",
                v->si ? "round/ms" : "round", v->si ? "growth*s" : "growth", "between",
                v->si ? "exact*s" : "exact", "to be trusted");
    for (int i = 0; i < s->count && i < ROWS; i++) {
        const th_semiclassical_mode *m = &s->mode[i];
        const th_mode *e = at->exact[i];
        char frequency[CLI_NUMBER], growth[CLI_NUMBER];

        fprintf(out, "            %5d %10.4g %10s %10.4g %9.3g %10.3g - %9.3g %9s  %s\n", m->level,
                cli_plan_level(m) * v->frequency,
                cell(e != NULL, e != NULL ? e->omega_re * v->frequency : 0.0, frequency),
                m->round_trip * v->time, m->growth * v->rate, m->growth_low * v->rate,
                m->growth_high * v->rate,
                cell(e != NULL, e != NULL ? e->omega_im * v->rate : 0.0, growth), worth(s, i));
    }
    print_rest(out, s->count);
}

static void print_semiclassics(FILE *out, const cli_findings *p, const cli_view *v)
{
    if (p->pockets == 0)
        return;
    fputs("\nWKB         levels of the trapped wave and growth by pair creation at both horizons, "
          "beside the exact modes\n",
          out);
    for (int i = 0; i < p->pockets; i++)
        print_pocket(out, v, &p->pocket[i]);
}

static void print_validity(FILE *out, const cli_findings *p)
{
    fputs("\nValidity\n", out);
    for (int i = 0; i < TH_CHECKS; i++) {
        const th_check *k = &p->check[i];

        if (!k->known)
            continue;
        fprintf(out, "  %-9s %-11s %-58s %10.3g, want %s %g\n", k->holds ? "holds" : "FAILS",
                k->name, k->title, k->value, k->above ? ">=" : "<=", k->limit);
        if (!k->holds)
            fprintf(out, "            %s\n", k->fails);
    }
    for (int i = 0, n = 0; i < TH_CHECKS; i++) {
        if (!p->check[i].known)
            fprintf(out, "%s%s", n++ == 0 ? "  not known " : ", ", p->check[i].name);
        if (i + 1 == TH_CHECKS && n > 0)
            fputc('\n', out);
    }
    fputs(
        "\nCautions    This is a linear, one-dimensional, mean-field statement about a flow that "
        "is "
        "stationary while it is held.\n"
        "            How the ripple saturates is outside it. So are the ends of the cloud: sound "
        "that they send back is not there.\n"
        "            Whether and how an apparatus may be run is its licensed operator's matter.\n",
        out);
}

void cli_plan_print(FILE *out, const cli_findings *p)
{
    const cli_view v = cli_view_of(p->c);

    cli_plan_print_answer(out, p);
    fputc('\n', out);
    cli_print_flow(out, p->c, p->flow, false);
    print_modes(out, p, &v);
    print_seeds(out, p, &v);
    print_ramp(out, p, &v);
    print_range(out, p, &v);
    print_tolerance(out, p, &v);
    print_semiclassics(out, p, &v);
    print_validity(out, p);
}
