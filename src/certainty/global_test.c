/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/global_test.h"

#include "core/chance.h"

#include <math.h>
#include <stdio.h>

void lw_global_test_make(const lw_system *system, const lw_point *point, int64_t rank, double effective,
                         double confidence, lw_global_test *out)
{
    const lw_problem *problem = system->problem;
    bool damped = point->lambda > 0, stated = problem->sigma != NULL || problem->covariance != NULL;
    double dof = (double)NAN, chi_square = point->chi_square;
    if (damped)
        dof = (double)system->observations_used - effective;
    else if (rank >= 0)
        dof = (double)(system->rows_used + system->conditions - rank);
    *out = (lw_global_test){.chi_square = chi_square, .degrees_of_freedom = dof, .alpha = 1 - confidence};
    out->variance_factor = dof > 0 ? chi_square / dof : (double)NAN;
    out->probability = out->lower = out->upper = (double)NAN;
    out->applies = stated && !damped && dof > 0;
    if (!out->applies) return;
    out->probability = lw_chi2_two_sided(chi_square, dof);
    out->lower = lw_chi2_quantile(out->alpha / 2, dof);
    out->upper = lw_chi2_quantile(1 - out->alpha / 2, dof);
    out->too_high = chi_square > out->upper;
    out->rejected = out->too_high || chi_square < out->lower;
}

void lw_global_test_advice(const lw_global_test *test, char text[400])
{
    if (!test->applies)
        snprintf(text, 400,
                 "The global test does not apply: it needs stated standard deviations, redundancy and no "
                 "damping.");
    else if (!test->rejected)
        snprintf(
            text, 400,
            "The readings agree with each other as well as their stated standard deviations let expect.");
    else if (test->too_high)
        snprintf(
            text, 400,
            "The readings disagree more than their stated standard deviations allow: look for a gross error "
            "(largest standardized residual), for an equation that does not fit the field, or for standard "
            "deviations stated too small.");
    else
        snprintf(
            text, 400,
            "The readings agree better than their stated standard deviations let expect: the standard "
            "deviations are probably stated too large, or the readings are not independent of each other.");
}
