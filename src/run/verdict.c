/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/verdict.h"

#include "core/decimal.h"
#include "run/write.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

void lw_verdict_number(double value, int digits, const char *unit, char *text, size_t room)
{
    if (isnan(value))
        snprintf(text, room, "not known");
    else
        snprintf(text, room, "%.*g%s%s", digits, value, unit && *unit ? " " : "", unit ? unit : "");
}

static void caution(lw_verdict *verdict, const char *format, ...) __attribute__((format(printf, 2, 3)));
static void caution(lw_verdict *verdict, const char *format, ...)
{
    if (verdict->cautions == LW_VERDICT_CAUTIONS) return;
    va_list list;
    va_start(list, format);
    vsnprintf(verdict->caution[verdict->cautions++], sizeof verdict->caution[0], format, list);
    va_end(list);
}

static void number(lw_verdict *verdict, int k, const char *label, const char *format, ...)
    __attribute__((format(printf, 4, 5)));
static void number(lw_verdict *verdict, int k, const char *label, const char *format, ...)
{
    snprintf(verdict->number[k].label, sizeof verdict->number[k].label, "%s", label);
    va_list list;
    va_start(list, format);
    vsnprintf(verdict->number[k].value, sizeof verdict->number[k].value, format, list);
    va_end(list);
}

/* Place of the largest |value|, or -1; factor 0 (set aside) does not count. */
static int64_t largest_row(const double *value, int64_t count, const double *factor)
{
    int64_t best = -1;
    for (int64_t i = 0; value && i < count; i++)
        if (!isnan(value[i]) && !(factor && factor[i] == 0.0) &&
            (best < 0 || fabs(value[i]) > fabs(value[best])))
            best = i;
    return best;
}

static int64_t smallest_row(const double *value, int64_t count)
{
    int64_t best = -1;
    for (int64_t i = 0; value && i < count; i++)
        if (!isnan(value[i]) && (best < 0 || value[i] < value[best])) best = i;
    return best;
}

static const char *fit_words(const lw_run *run)
{
    const lw_global_test *test = &run->certainty->test;
    if (test->degrees_of_freedom <= 0.0) return "there is no redundancy: nothing checks the readings";
    if (run->weight) return "large residuals were down-weighted, so the fit is not tested";
    if (!test->applies) return "sigma was not stated, so the fit cannot be tested";
    if (!test->rejected) return "the readings agree with their stated sigmas";
    return test->too_high ? "the readings disagree by more than their stated sigmas allow"
                          : "the readings agree better than their stated sigmas allow";
}

static void network_numbers(lw_verdict *verdict, const lw_run *run)
{
    const lw_certainty *certainty = run->certainty;
    char text[96], name[LW_ROW_NAME];
    if (!isnan(certainty->test.probability) && certainty->test.probability < 1e-300)
        number(verdict, 0, "chi-square", "%.4g on %.0f degrees of freedom, two-sided probability < 1e-300",
               certainty->test.chi_square, certainty->test.degrees_of_freedom);
    else if (!isnan(certainty->test.probability))
        number(verdict, 0, "chi-square", "%.4g on %.0f degrees of freedom, two-sided probability %.3g",
               certainty->test.chi_square, certainty->test.degrees_of_freedom, certainty->test.probability);
    else
        number(verdict, 0, "chi-square", "%.4g on %.0f degrees of freedom", certainty->test.chi_square,
               certainty->test.degrees_of_freedom);
    number(verdict, 1, "variance factor", "%.3g (%s in the sigmas)", certainty->test.variance_factor,
           run->variance_estimated ? "estimated, used" : "stated 1 used");
    int64_t row = largest_row(certainty->standardized, certainty->rows, run->system->row_factor);
    if (row >= 0)
        number(verdict, 2, run->variance_estimated ? "largest |tau|" : "largest |w|",
               "%.2f at %.60s (critical %.2f)", fabs(certainty->standardized[row]),
               lw_run_row_name(run, row, name), certainty->critical);
    int64_t worst = largest_row(certainty->sigma, certainty->parameters, NULL);
    if (worst >= 0) {
        lw_verdict_number(certainty->sigma[worst], 3, run->problem->parameter_unit, text, sizeof text);
        number(verdict, 3, "largest sigma", "%s at %.60s", text,
               lw_ids_name(run->problem->parameters, worst));
    }
    row = smallest_row(certainty->redundancy, certainty->rows);
    if (row >= 0)
        number(verdict, 4, "least redundancy", "%.3f at %.60s", certainty->redundancy[row],
               lw_run_row_name(run, row, name));
}

static void damped_numbers(lw_verdict *verdict, const lw_run *run)
{
    char text[96];
    const lw_point *point = &run->estimate->point;
    if (run->damping > 0.0)
        number(verdict, 0, "damping", "%.4g (%s)", run->damping, run->damping_chosen_by);
    else
        number(verdict, 0, "damping", "none");
    double used = (double)run->system->observations_used;
    number(verdict, 1, "chi-square / m", "%.4g", point->chi_square / used);
    lw_verdict_number(run->rms, 3, run->problem->value_unit, text, sizeof text);
    number(verdict, 2, "rms residual", "%s", text);
    number(verdict, 3, "variance reduction", "%.2f %%", 100.0 * run->variance_reduction);
    if (!isnan(run->effective_parameters))
        number(verdict, 4, "effective parameters", "%.1f of %lld", run->effective_parameters,
               (long long)run->system->columns);
    else if (point->error_bound > 0.0)
        number(verdict, 4, "error bound of the model", "%.1e", point->error_bound);
}

/* What stands in the way of using the numbers as they are. */
static void certainty_cautions(lw_verdict *verdict, const lw_run *run)
{
    const lw_certainty *certainty = run->certainty;
    int64_t uncontrolled = 0, suspects = 0;
    for (int64_t i = 0; certainty->flag && i < certainty->rows; i++) {
        uncontrolled += (certainty->flag[i] & LW_FLAG_NO_REDUNDANCY) != 0;
        suspects += (certainty->flag[i] & LW_FLAG_SUSPECT) != 0;
    }
    if (suspects)
        caution(verdict,
                "%lld reading%s exceed%s the critical value %.2f: look at residuals.csv before signing.",
                (long long)suspects, suspects == 1 ? "" : "s", suspects == 1 ? "s" : "", certainty->critical);
    if (uncontrolled)
        caution(verdict, "%lld reading%s no redundancy: an error there cannot be seen.",
                (long long)uncontrolled, uncontrolled == 1 ? " has" : "s have");
    if (certainty->test.applies && certainty->test.rejected)
        caution(verdict,
                certainty->test.too_high
                    ? "The global test rejects (too high): a blunder, sigmas too small, or a wrong model."
                    : "The global test rejects (too low): sigmas too large, or correlations left out.");
    if (run->damping == 0.0 || !run->asked || !run->asked->sigma) return;
    if (run->asked->meaning == LW_MEANS_POSTERIOR)
        caution(verdict, "Sigma is posterior: it holds only if the penalty at this damping is a true prior.");
    else
        caution(verdict, "Sigma is the noise of the data only: the bias of the damping is not in it%s.",
                certainty->multiplied ? ", and it carries a variance factor that depends on the damping"
                                      : "");
}

static void estimate_cautions(lw_verdict *verdict, const lw_run *run)
{
    if (run->interrupted)
        caution(verdict, "Interrupted: this is the iterate that was reached, not the answer.");
}

static void choice_cautions(lw_verdict *verdict, const lw_run *run)
{
    for (int i = 0; run->curve && i < run->curve->choices; i++)
        if (run->curve->choice[i].warning[0])
            caution(verdict, "%s: %s", lw_criterion_name(run->curve->choice[i].criterion),
                    run->curve->choice[i].warning);
    if (run->curve && run->curve->comparison[0]) caution(verdict, "%s", run->curve->comparison);
}

static void probe_numbers(lw_verdict *verdict, const lw_run *run)
{
    const lw_probe *probe = run->probe;
    snprintf(verdict->headline, sizeof verdict->headline,
             "%d pattern%s put through %lld observations of %lld parameters%s.", probe->patterns,
             probe->patterns == 1 ? "" : "s", (long long)run->system->observations_used,
             (long long)probe->parameters, probe->noisy ? ", with noise at the stated sigma" : "");
    char text[96];
    lw_verdict_number(probe->amplitude, 3, run->problem->parameter_unit, text, sizeof text);
    if (run->damping > 0.0)
        number(verdict, 0, "damping and amplitude", "%.4g (%s); %s", run->damping, run->damping_chosen_by,
               text);
    else
        number(verdict, 0, "damping and amplitude", "none; %s", text);
    int k = 1, first = k;
    for (; k - first < probe->patterns && k < LW_VERDICT_NUMBERS; k++)
        number(verdict, k, probe->pattern[k - first].name,
               "%.0f %% of the amplitude came back, correlation %.2f",
               100.0 * probe->pattern[k - first].overall_amplitude,
               probe->pattern[k - first].overall_correlation);
    if (probe->trials && k < LW_VERDICT_NUMBERS) {
        int64_t worst = largest_row(probe->spread, probe->parameters, NULL);
        lw_verdict_number(worst >= 0 ? probe->spread[worst] : LW_UNKNOWN, 3, run->problem->parameter_unit,
                          text, sizeof text);
        number(verdict, k, probe->bootstrap ? "largest spread (bootstrap)" : "largest spread (noise)",
               "%s at %.60s, from %d trials", text,
               worst >= 0 ? lw_ids_name(run->problem->parameters, worst) : "-", probe->trials);
    }
    if (!probe->noisy) caution(verdict, "No noise was added: sigma was not stated.");
    caution(verdict, "Good recovery of small patterns does not prove that of large ones, and the test says "
                     "nothing of errors in the equations.");
    if (run->interrupted) caution(verdict, "Interrupted: not all patterns and trials were made.");
}

void lw_verdict_make(const lw_run *run, lw_verdict *out)
{
    memset(out, 0, sizeof *out);
    const lw_problem *problem = run->problem;
    const lw_certainty *certainty = run->certainty;
    if (run->probe) {
        probe_numbers(out, run);
        return;
    }
    if (!run->estimate) {
        snprintf(out->headline, sizeof out->headline,
                 "No damping was chosen for %lld parameters and %lld observations: no criterion picks one.",
                 (long long)problem->n, (long long)problem->m);
        choice_cautions(out, run);
        return;
    }
    long long held = problem->n - run->system->columns;
    char count[64] = "";
    if (held) snprintf(count, sizeof count, " (%lld held)", held);
    bool network = certainty && certainty->standardized && run->damping == 0.0;
    char aside[80] = "";
    if (run->outliers && run->outliers->set_aside)
        snprintf(aside, sizeof aside, ", %lld set aside", (long long)run->outliers->set_aside);
    snprintf(out->headline, sizeof out->headline, "%lld parameters%s estimated from %lld observations%s%s%s.",
             (long long)problem->n, count, (long long)run->system->observations_used, aside,
             network ? ": " : "", network ? fit_words(run) : "");
    if (network)
        network_numbers(out, run);
    else
        damped_numbers(out, run);
    estimate_cautions(out, run);
    if (certainty) certainty_cautions(out, run);
    choice_cautions(out, run);
    if (run->outliers && run->outliers->set_aside)
        caution(out, "%lld reading%s set aside; every step stands in outliers.csv.",
                (long long)run->outliers->set_aside, run->outliers->set_aside == 1 ? " was" : "s were");
}
