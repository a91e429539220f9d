/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/choose.h"

#include "tradeoff/corner.h"
#include "tradeoff/discrepancy.h"
#include "tradeoff/gcv.h"
#include "tradeoff/risk.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static lw_status (*const rule[LW_CRITERIA])(lw_look *, lw_choice *) = {
    [LW_BY_CORNER] = lw_corner_choose,
    [LW_BY_GCV] = lw_gcv_choose,
    [LW_BY_DISCREPANCY] = lw_discrepancy_choose,
    [LW_BY_RISK] = lw_risk_choose,
};

lw_status lw_choose_all(lw_look *look, unsigned criteria, lw_choice *choice, int *choices)
{
    *choices = 0;
    for (int i = 0; i < LW_CRITERIA; i++) {
        if (!(criteria & 1u << i)) continue;
        lw_choice *c = &choice[(*choices)++];
        memset(c, 0, sizeof *c);
        c->criterion = (lw_criterion)i;
        c->damping = c->from = c->to = c->value = (double)NAN;
        if (look->low >= look->count) {
            snprintf(c->warning, sizeof c->warning,
                     "No damping of the range had converged well enough to be picked.");
            continue;
        }
        lw_status status = rule[i](look, c);
        if (status != LW_OK) return status;
    }
    return LW_OK;
}

/* Choices further apart than this many decades deserve an explanation. */
#define NEAR_DECADES 0.5

static const char *meaning(lw_criterion least, lw_criterion most)
{
    if (least == LW_BY_GCV || least == LW_BY_RISK) {
        if (most == LW_BY_DISCREPANCY)
            return "the discrepancy principle smooths somewhat more by its nature; so much more means that "
                   "the standard "
                   "deviations are stated too large, or that the errors are correlated and taken for signal";
        if (most == LW_BY_CORNER)
            return "errors that are correlated from one observation to the next look like signal to it: "
                   "trust the larger damping, "
                   "or state the covariance";
        return "both rest on the effective number of parameters; a difference means that the stated standard "
               "deviations do not fit "
               "the misfit";
    }
    if (least == LW_BY_CORNER)
        return "the corner tends to damp too little where the true model is smooth and the unknowns are "
               "many: trust the "
               "larger damping";
    return "the misfit asked for is below what the other criteria take for noise: the standard deviations "
           "may be stated too small, "
           "or the equations may not describe the observations that well";
}

void lw_choose_compare(lw_curve *curve)
{
    const lw_choice *least = NULL, *most = NULL;
    for (int i = 0; i < curve->choices; i++) {
        const lw_choice *c = &curve->choice[i];
        if (isnan(c->damping)) continue;
        if (least == NULL || c->damping < least->damping) least = c;
        if (most == NULL || c->damping > most->damping) most = c;
    }
    curve->decades = (double)NAN;
    curve->comparison[0] = '\0';
    if (least == NULL || least == most) return;
    curve->decades = log10(most->damping / least->damping);
    const char *low = lw_criterion_name(least->criterion), *high = lw_criterion_name(most->criterion);
    if (curve->decades <= NEAR_DECADES)
        snprintf(curve->comparison, sizeof curve->comparison,
                 "The choices lie within %.2f decades, from %s (%.4g) to %s (%.4g): they agree.",
                 curve->decades, low, least->damping, high, most->damping);
    else
        snprintf(curve->comparison, sizeof curve->comparison,
                 "%s picks %.4g, %.1f decades below %s (%.4g): %s.", low, least->damping, curve->decades,
                 high, most->damping, meaning(least->criterion, most->criterion));
}

lw_status lw_choose_damping(lw_decomposition *decomposition, lw_criterion criterion,
                            const lw_sweep_options *options, const lw_watch *watch, double *damping,
                            lw_curve **out, lw_error *error)
{
    lw_sweep_options own = *options;
    lw_curve *curve = NULL;
    *damping = (double)NAN;
    if (out != NULL) *out = NULL;
    own.criteria |= 1u << criterion;
    lw_status status = lw_sweep(decomposition, &own, watch, &curve, error);
    if (status >= 0) {
        const lw_choice *choice = lw_curve_choice(curve, criterion);
        *damping = choice->damping;
        if (isnan(choice->damping) && status != LW_INTERRUPTED)
            status = lw_fail(error, LW_UNSOLVABLE, "--damping %s: %s", lw_criterion_name(criterion),
                             choice->warning);
    }
    if (out != NULL)
        *out = curve;
    else
        lw_curve_free(curve);
    return status;
}
