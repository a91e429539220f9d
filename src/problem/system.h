/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The view of a problem that engines see: free parameters only, reduced by x0, whitened, column-scaled.
 *
 *      x_j = x0_j + scale_j z_j   (free j; scale_j a power of two near 1 / ||whitened column j||)
 *      rows 0 .. observations-1:      the problem's observations, whitened: W (A x - b), W'W = P
 *      rows observations .. rows-1:   weighted priors (x_j - prior_j) / prior_sigma_j
 *      b   = W (observed - A x0 - A_fixed x_fixed), computed in double-double and rounded once
 *      L   = penalty in z: L (x - x0) = penalty z
 *      C z = d   exact conditions, reduced by x0 and held values, rows scaled by powers of two
 *
 *  Set-aside observations (outlier search) and robust weights enter as row factors w: the variance of the row
 *  becomes sigma^2 / w^2, its covariances with others stay as stated; 0 leaves a row out (of its covariance
 *  block too).
 *
 *  Where the penalty ties free parameters to held ones that differ from their prior, L (x - x0) = L_free
 *  (x_free - x0) + c, c = L_held (held - prior). The least-squares solution s of L_free s = -c is added to x0
 * of the free parameters, so that L_free (x - x0 - s) differs from L (x - x0) by a constant orthogonal to the
 *  range of L_free only: its norm is penalty_constant, and ||L (x - x0)||^2 = ||penalty z||^2 +
 *  penalty_constant^2. */
#ifndef LW_PROBLEM_SYSTEM_H
#define LW_PROBLEM_SYSTEM_H

#include "core/decimal.h"
#include "matrix/operator.h"
#include "matrix/product.h"
#include "problem/penalty.h"
#include "problem/problem.h"

typedef struct lw_system {
    const lw_problem *problem;
    int64_t observations, priors, rows; /**< rows = observations + priors */
    int64_t *prior_parameter;           /**< priors: which parameter row observations + k observes */
    int64_t columns;                    /**< free parameters */
    int64_t *parameter_of;              /**< columns -> parameter */
    int64_t *column_of;                 /**< parameter -> column, -1 fixed */
    double *scale;                      /**< columns */
    double *b;                          /**< rows, whitened and reduced, dimensionless */
    lw_decimal *start;                  /**< columns: x0 in model units */
    lw_decimal
        *reduced;       /**< rows: observed - A x0 - A_fixed x_fixed, unit of the observation, not whitened */
    double *row_weight; /**< rows: factor / sigma; of a correlated observation 1, or 0 when set aside */
    double *row_factor; /**< rows or NULL: extra weight sqrt(w) of a row; 0 = set aside */
    int64_t rows_used;  /**< rows whose factor is not 0 */
    int64_t observations_used; /**< m in gcv: no priors, no set-aside readings */
    double *block_factor;      /**< R of each covariance block, block = R'R (upper, column-major), laid out as
                                    covariance->value; set-aside members have unit rows and columns */
    int32_t *block_place;      /**< observations: place in the block, or NULL */
    double *block_scratch;     /**< of the largest block: whitening is not for two threads at once */
    lw_penalty_kind prefer;
    lw_sparse *penalty;       /**< p x columns, in z; NULL for LW_PREFER_SMALLEST */
    double *penalty_diagonal; /**< columns, for LW_PREFER_SMALLEST: damp_weight_j scale_j; else NULL */
    int64_t penalty_rows;
    double penalty_constant; /**< norm of the part of L (x - x0) that held parameters alone make */
    int64_t conditions;
    lw_sparse *condition;          /**< conditions x columns, or NULL */
    double *condition_value;       /**< conditions */
    lw_decimal *condition_reduced; /**< conditions: d - C x0 - C_fixed x_fixed, unit of the condition */
    double *condition_scale;       /**< conditions: power of two by which each row was multiplied */
    lw_sparse *matrix;             /**< rows x columns whitened and scaled; NULL until lw_system_matrix */
} lw_system;

typedef struct lw_system_options {
    lw_penalty_options penalty;
    const double *row_factor; /**< rows (observations, then weighted priors) or NULL; copied */
} lw_system_options;

/** problem is borrowed and must outlive the system. Errors: LW_NO_MEMORY, LW_BAD_INPUT (covariance block not
 * positive definite), LW_BAD_USAGE (penalty that the problem cannot give, e.g. flattest without coordinates).
 */
lw_status lw_system_new(const lw_problem *problem, const lw_system_options *options, const lw_watch *watch,
                        lw_system **out, lw_error *error);
void lw_system_free(lw_system *system);

/** acc (rows) <- acc - A dx in double-double, from the decimals as written; dx: columns, model units. */
void lw_system_subtract_exact(const lw_system *system, const lw_decimal *dx, lw_team *team, lw_decimal *acc);
/** g (columns) <- A' y in double-double, y: rows (rows set aside must hold 0). */
void lw_system_transposed_exact(const lw_system *system, const lw_decimal *y, lw_team *team, lw_decimal *g);

/** The explicit whitened, scaled matrix, made on first call and kept in system->matrix (direct engines). */
lw_status lw_system_matrix(lw_system *system, const lw_watch *watch, lw_error *error);
/** The same as an operator for iterative engines. Where every parameter is free, no priors are weighted and
 *  nothing is correlated it stands directly on the problem's design, with no second copy. */
lw_status lw_system_operator(lw_system *system, const lw_product_options *product, const lw_watch *watch,
                             lw_operator **out, lw_error *error);
/** The same times diag(by), by: columns, copied, in one scale, so that the one-pass step of the product is
 *  kept. */
lw_status lw_system_operator_times(lw_system *system, const lw_product_options *product, const double *by,
                                   const lw_watch *watch, lw_operator **out, lw_error *error);

/** W v and W' v for a vector over the rows (whitening, row factors included); k vectors. In place. */
void lw_system_whiten(const lw_system *system, int k, double *v);
void lw_system_whiten_transposed(const lw_system *system, int k, double *v);
/** W^-1 v: whitened back to the units of the observations (rows with factor 0 become 0). */
void lw_system_unwhiten(const lw_system *system, int k, double *v);

/** Applies the penalty: out (penalty_rows) <- L z; and out (columns) <- L' v. */
void lw_system_penalize(const lw_system *system, const double *z, double *out);
void lw_system_penalize_transposed(const lw_system *system, const double *v, double *out);
/** L'L as a sparse upper triangle (diagonal for smallest). */
lw_status lw_system_penalty_gram(const lw_system *system, lw_sparse **out, lw_error *error);

/** Model values of all n parameters from z (columns) with its low parts (may be NULL): x = x0 + scale z
 *  rounded once. */
void lw_system_model(const lw_system *system, const double *z, const double *z_low, double *x);
/** predicted - observed of every row in the unit of the observation (rows incl. weighted priors and set-aside
 *  readings), from z, computed with the exact rows in double-double when `exact` and the low parts are kept,
 *  else in double. */
lw_status lw_system_residual(const lw_system *system, const double *z, const double *z_low, int exact,
                             double *residual, lw_error *error);

#endif
