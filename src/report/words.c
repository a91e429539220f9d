/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sentences of the report: what the global test says and what to do, what sigma means, and what may mislead,
 * where it is read. */
#include "report/data.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#define SENTENCE 800

bool lw_report_posterior(const lw_run *run)
{
    return run->damping > 0.0 && run->asked && run->asked->meaning == LW_MEANS_POSTERIOR;
}

const char *lw_report_sigma_meaning(const lw_run *run)
{
    if (run->certainty == NULL || run->certainty->sigma == NULL || !(run->damping > 0.0)) return NULL;
    return lw_report_posterior(run) ? "With this damping the penalty was taken as a true prior (posterior): "
                                      "the uncertainties hold only if it is one."
                                    : "With this damping the uncertainties carry the noise of the data only; "
                                      "the bias of the damping is not in them, and more damping makes "
                                      "them smaller, not the model truer.";
}

static void sentence(lw_json *json, const char *format, ...) __attribute__((format(printf, 2, 3)));
static void sentence(lw_json *json, const char *format, ...)
{
    char text[SENTENCE];
    va_list list;
    va_start(list, format);
    vsnprintf(text, sizeof text, format, list);
    va_end(list);
    lw_json_text_value(json, NULL, text);
}

/* The group that stands out most: largest (or smallest) factor with at least one degree of freedom. */
static const lw_group_factor *driving_group(const lw_certainty *c, bool high)
{
    const lw_group_factor *best = NULL;
    for (int k = 0; k < c->group_count; k++) {
        const lw_group_factor *g = &c->groups[k];
        if (isnan(g->factor) || g->redundancy < 1.0) continue;
        if (best == NULL || (high ? g->factor > best->factor : g->factor < best->factor)) best = g;
    }
    return c->group_count > 1 ? best : NULL;
}

static const char *group_name(const lw_run *run, int32_t group)
{
    return group >= 0    ? lw_ids_name(run->problem->group_names, group)
           : group == -1 ? "weighted priors"
                         : "observations without a group";
}

static void advise(lw_json *json, const lw_run *run)
{
    const lw_certainty *c = run->certainty;
    const lw_group_factor *g = driving_group(c, c->test.too_high);
    if (c->test.too_high)
        lw_json_text_value(
            json, NULL,
            "Too high: look first for a blunder among the largest standardised residuals and set aside one "
            "reading at a time; if "
            "none stands out, the standard deviations are too small, or the equations leave something out.");
    else
        lw_json_text_value(json, NULL,
                           "Too low: the standard deviations are larger than the readings deserve, or "
                           "readings that are not independent "
                           "were entered as if they were. The results are not wrong for it, but their "
                           "uncertainties are overstated.");
    if (g)
        sentence(json,
                 "The group that drives it most is %.200s: variance factor %.3g over %lld observations.",
                 group_name(run, g->group), g->factor, (long long)g->observations);
}

void lw_report_test_words(lw_json *json, const lw_run *run)
{
    const lw_certainty *c = run->certainty;
    lw_json_array(json, "test_words");
    if (c && run->damping > 0.0 && !c->test.applies)
        lw_json_text_value(json, NULL,
                           "With damping the residuals are not those of a free fit, so the global test does "
                           "not hold; the variance factor below depends on "
                           "the damping.");
    else if (c && !(c->test.degrees_of_freedom > 0.0))
        lw_json_text_value(
            json, NULL,
            "There is no redundancy: the readings fit whatever they say, and nothing here checks them.");
    else if (c && !c->test.applies)
        sentence(json,
                 "The standard deviations of the readings were not stated, so there is nothing to test the "
                 "fit against; the variance factor %.3g was "
                 "estimated from the residuals.",
                 c->test.variance_factor);
    else if (c) {
        const lw_global_test *t = &c->test;
        sentence(json,
                 "The global test %s at %.4g %%: chi-square is %.5g on %.6g degrees of freedom, accepted "
                 "from %.5g to %.5g.",
                 t->rejected ? "rejects" : "accepts", 100.0 * (1.0 - t->alpha), t->chi_square,
                 t->degrees_of_freedom, t->lower, t->upper);
        if (t->rejected)
            advise(json, run);
        else
            lw_json_text_value(json, NULL,
                               "Residuals are as large as the stated standard deviations lead one to expect. "
                               "That is no proof that there is no blunder.");
        if (c->multiplied)
            lw_json_text_value(json, NULL,
                               "Standard deviations were multiplied by s0: that makes them fit these "
                               "residuals, it does not prove anything.");
    }
    lw_json_close(json);
}

static void caution(lw_json *json, const char *where, const char *format, ...)
    __attribute__((format(printf, 3, 4)));
static void caution(lw_json *json, const char *where, const char *format, ...)
{
    char text[SENTENCE];
    va_list list;
    va_start(list, format);
    vsnprintf(text, sizeof text, format, list);
    va_end(list);
    lw_json_object(json, NULL);
    lw_json_text_value(json, "where", where);
    lw_json_text_value(json, "text", text);
    lw_json_close(json);
}

static void parameter_cautions(lw_json *json, const lw_run *run)
{
    const lw_certainty *c = run->certainty;
    int64_t bounds = 0, kind[8] = {0};
    for (int64_t j = 0; run->at_bound && j < run->problem->n; j++) bounds += run->at_bound[j] != 0;
    for (int64_t j = 0; c && c->sigma_kind && j < c->parameters; j++) kind[c->sigma_kind[j] & 7]++;
    if (bounds)
        caution(json, "model",
                "%lld parameters lie at a bound: their uncertainty says nothing of how far they would move "
                "without it.",
                (long long)bounds);
    if (kind[LW_SIGMA_UPPER_BOUND])
        caution(
            json, "model",
            "%lld standard deviations are upper bounds, not estimates: the true ones may be much smaller.",
            (long long)kind[LW_SIGMA_UPPER_BOUND]);
    if (kind[LW_SIGMA_SAMPLED])
        caution(json, "model",
                "%lld standard deviations were sampled; expect a relative error of about %.2g in them.",
                (long long)kind[LW_SIGMA_SAMPLED], c->sigma_error);
    if (c && c->resolution && c->resolution_error > 0.0)
        caution(json, "model",
                "The resolution diagonal was probed at random; its standard error is about %.2g.",
                c->resolution_error);
}

static void row_cautions(lw_json *json, const lw_run *run)
{
    const lw_certainty *c = run->certainty;
    int64_t none = 0;
    for (int64_t i = 0; c->flag && i < c->rows; i++) none += (c->flag[i] & LW_FLAG_NO_REDUNDANCY) != 0;
    if (none)
        caution(json, "reliability",
                "%lld reading%s no redundancy: an error there passes unseen into the results, whatever the "
                "tests say.",
                (long long)none, none == 1 ? " has" : "s have");
    if (c->inseparable_count)
        caution(json, "reliability",
                "%lld pairs of readings cannot be told apart: an error found in one may sit in the other.",
                (long long)c->inseparable_count);
    if (run->outliers && run->outliers->set_aside)
        caution(json, "residuals",
                "%lld reading%s set aside and did not enter the solution; the log of the search says why.",
                (long long)run->outliers->set_aside, run->outliers->set_aside == 1 ? " was" : "s were");
}

static void curve_cautions(lw_json *json, const lw_run *run)
{
    const lw_curve *curve = run->curve;
    int open = 0;
    for (int i = 0; i < curve->count; i++) open += !curve->row[i].converged;
    if (open)
        caution(json, "curve", "%d of %d dampings are not converged at the wanted tolerance (hollow points).",
                open, curve->count);
    for (int i = 0; i < curve->choices; i++)
        if (isnan(curve->choice[i].damping))
            caution(json, "curve", "The criterion %s picks no damping.",
                    lw_criterion_name(curve->choice[i].criterion));
    if (run->estimate == NULL)
        caution(json, "explore",
                "No damping was picked, so there is no answer: the slider starts in the middle, and the "
                "choice is yours.");
}

void lw_report_cautions(lw_json *json, const lw_run *run)
{
    lw_json_array(json, "cautions");
    if (run->interrupted)
        caution(json, "model",
                "The run was interrupted: these numbers are what had been reached, not the answer.");
    else if (run->estimate &&
             (run->estimate->stop == LW_STOP_STEPS || run->estimate->stop == LW_STOP_STAGNATED ||
              run->estimate->stop == LW_STOP_MEMORY))
        caution(json, "model", "Not converged: %s The relative error of the model may be as large as %.1e.",
                lw_stop_words(run->estimate->stop), run->estimate->point.error_bound);
    parameter_cautions(json, run);
    if (run->certainty) row_cautions(json, run);
    if (run->curve) curve_cautions(json, run);
    for (size_t i = 0; run->warnings && i < run->warnings->count; i++)
        if (strncmp(run->warnings->text[i], "Not converged", 13) !=
            0) /* told above, where the model is read */
            caution(json, "", "%s", run->warnings->text[i]);
    lw_json_close(json);
}
