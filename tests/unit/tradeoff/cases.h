/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the tests of the trade-off share: a problem swept by a named engine. */
#ifndef LW_TESTS_UNIT_TRADEOFF_CASES_H
#define LW_TESTS_UNIT_TRADEOFF_CASES_H

#include "support.h"
#include "tradeoff/sweep.h"

typedef struct swept {
    lw_problem *problem;
    lw_system *system;
    lw_decomposition *decomposition;
    lw_curve *curve;
    lw_status status;
    lw_error error;
} swept;

/** Takes over the problem. own: penalty.csv of the problem as L. options->sigma_stated follows the problem.
 */
swept sweep_by(lw_problem *problem, bool own, const char *engine, const lw_sweep_options *options);
void swept_clear(swept *s);
const lw_choice *choice_of(const swept *s, lw_criterion criterion);

lw_problem *hilbert_problem(void);
lw_problem *shaw_problem(const double *sigma);
lw_problem *gravity_problem(const double *sigma);
/** Differences of that order (0: NULL) of 20 cells as the problem's own penalty. */
void set_differences(lw_problem *problem, int order);
/** A matrix that blurs, m x n, and noisy observations of a bump; standard deviation of the noise `noise`. */
lw_problem *blur_problem(int64_t m, int64_t n, double noise, uint64_t seed, bool with_sigma);

#define ASSERT_NEAR(a, b, relative) ck_assert_double_eq_tol((a), (b), (relative)*fabs(b))

#endif
