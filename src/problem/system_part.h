/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the files of lw_system share among themselves; see system.h. */
#ifndef LW_PROBLEM_SYSTEM_PART_H
#define LW_PROBLEM_SYSTEM_PART_H

#include "problem/system.h"

/** A number that a file gave, or what stands for a missing column. */
static inline lw_decimal lw_given(const double *high, const double *low, int64_t i, double missing)
{
    if (high == NULL) return lw_decimal_of(missing);
    return (lw_decimal){high[i], low == NULL ? 0.0 : low[i]};
}

static inline int32_t lw_system_block(const lw_system *system, int64_t i)
{
    const lw_covariance *covariance = system->problem->covariance;
    return covariance == NULL ? -1 : covariance->block_of[i];
}

/** Row weights and the Cholesky factors of the covariance blocks. */
lw_status lw_system_weigh(lw_system *system, lw_error *error);
/** Power-of-two column scales from the norms of the whitened columns. */
lw_status lw_system_scale(lw_system *system, lw_error *error);
/** reduced, and b from it. */
lw_status lw_system_reduce(lw_system *system, lw_error *error);
/** Conditions: reduced, scaled. */
lw_status lw_system_restrict(lw_system *system, lw_error *error);
/** Penalty in z; may shift `start` (see system.h). */
lw_status lw_system_damp(lw_system *system, const lw_penalty_options *options, const lw_watch *watch,
                         lw_error *error);
/** Moves `start` to where held parameters draw the penalty; L as made, all parameters (see system_held.c). */
lw_status lw_system_shift_held(lw_system *system, const lw_sparse *L, const lw_watch *watch, lw_error *error);
/** The columns of the free parameters, in their order, each times factor_j (NULL: 1). Low parts are left
 *  behind. */
lw_status lw_system_select(const lw_system *system, const lw_sparse *A, const double *factor, lw_sparse **out,
                           lw_error *error);
/** 2^k nearest to 1 / norm (in the logarithm); 1 for 0. */
double lw_system_power(double norm);

#endif
