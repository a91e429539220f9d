/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Problems built by hand, for tests of the layers above the files. Everything is copied; a failed allocation
 * aborts. */
#ifndef LW_TESTS_UNIT_SUPPORT_H
#define LW_TESTS_UNIT_SUPPORT_H

#include "problem/problem.h"

/** m observations o1, o2, ... of n parameters p1, p2, ...; A row-major, zeros are not stored. sigma NULL: not
 * given. */
lw_problem *problem_from_dense(int64_t m, int64_t n, const double *A, const double *value,
                               const double *sigma);
/** The same from a sparse matrix that the problem takes over. */
lw_problem *problem_from_sparse(lw_sparse *A, const double *value, const double *sigma);
/** From decimal texts, low parts kept: A row-major m x n ("0" is not stored), value m, sigma m or NULL. */
lw_problem *problem_from_text(int64_t m, int64_t n, const char *const *A, const char *const *value,
                              const char *const *sigma);

void problem_set_prior(lw_problem *problem, const double *prior); /**< n */
void problem_set_prior_sigma(lw_problem *problem,
                             const double *prior_sigma); /**< n, NaN = none; damp_weight there is 0 */
void problem_fix(lw_problem *problem, int64_t parameter, double value);
void problem_set_bounds(lw_problem *problem, const double *lower, const double *upper); /**< n each */
void problem_set_damp_weight(lw_problem *problem, const double *weight);                /**< n */
void problem_set_datum(lw_problem *problem, const int8_t *datum);                       /**< n */
void problem_set_coordinate(lw_problem *problem, int axis,
                            const double *value);                    /**< axis 0..2; n, NaN blank */
void problem_set_region(lw_problem *problem, const int32_t *region); /**< n, -1 blank */
/** One more block of correlated observations: members (size), covariance (size x size); sigma of the members
 * follows. */
void problem_add_block(lw_problem *problem, int64_t size, const int32_t *member, const double *covariance);
void problem_set_penalty(lw_problem *problem, int64_t rows, const double *L); /**< rows x n, row-major */
void problem_set_conditions(lw_problem *problem, int64_t rows, const double *C,
                            const double *d);                                  /**< rows x n, row-major */
void problem_set_group(lw_problem *problem, const int32_t *group, int groups); /**< m; names g1, g2, ... */

/** Sparse from a row-major dense matrix, zeros not stored. */
lw_sparse *sparse_from_dense(int64_t m, int64_t n, const double *A);
/** Uniform numbers in [-1, 1) of a fixed 64-bit linear congruence, the same on every machine. */
double next_random(uint64_t *state);

#endif
