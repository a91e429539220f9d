/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What can be said of a problem before anything is solved: counts, hits, coverage, spreads, duplicates. Pure
 * facts about the files; rank and conditioning need a factorization and are in solve/datum.h. */
#ifndef LW_PROBLEM_CHECK_H
#define LW_PROBLEM_CHECK_H

#include "problem/component.h"
#include "problem/problem.h"
#include "problem/range.h"

typedef struct lw_check {
    int64_t observations, parameters, nonzeros, fixed, weighted_priors, conditions;
    int64_t degrees_of_freedom; /**< observations + weighted priors + conditions - free parameters; before any
                                   rank defect */
    int64_t *hits;              /**< n: observations that touch the parameter (nonzero coefficients) */
    double *coverage;           /**< n: sum of absolute coefficients, unit of the coefficients */
    lw_range hit_range, coefficient_range, sigma_range, value_range;
    int64_t weakest[10]; /**< parameters with the fewest hits (ties: least coverage), weakest first */
    int weakest_count;
    int64_t *zero_rows,
        zero_row_count; /**< observations whose coefficients are all zero or on fixed parameters */
    int64_t *zero_columns,
        zero_column_count;                 /**< free parameters that no equation, prior or penalty reaches */
    int64_t *single_hit, single_hit_count; /**< free parameters touched by one observation only */
    int64_t *duplicate_rows, duplicate_row_count; /**< pairs (first, later) of observations with the same
                                                     equation up to a factor */
    int64_t *duplicate_columns,
        duplicate_column_count; /**< pairs of parameters with proportional columns: cannot be told apart */
    lw_components components;
} lw_check;

/** Warnings (sigma spread above 1e4, coefficient spread above 1e8, medians of groups a round factor of 1000
 * apart: units mixed up?) go to the log. Cost: a few passes over the design. */
lw_status lw_check_problem(const lw_problem *problem, lw_log *log, lw_check *out, lw_error *error);
void lw_check_clear(lw_check *check);

#endif
