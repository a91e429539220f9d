/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The exact residual of the unwhitened augmented system, in double-double, of the numbers as written: no
 *  whitening is made.
 *
 *      f  = b - A x - Sigma y          rows (observations and weighted priors; held values inside b)
 *      fp = -(lambda L dx) - yp        penalty rows, unit weight
 *      g  = -(A' y + lambda L' yp + C' u)   columns, model units
 *      h  = d - C x                    conditions
 *
 *  with x = x0 + dx; dx, y, yp, u carried in double-double; Sigma the covariance as stated (diagonal:
 *  sigma^2, blocks). Rows set aside have y = 0 and are skipped; a row factor w enters as Sigma_ii / w^2.
 *  Source: Bjorck, BIT 7:257-278, 1967; Demmel, Hida, Riedy & Li, ACM TOMS 35(4):28, 2009. */
#ifndef LW_SOLVE_EXACT_H
#define LW_SOLVE_EXACT_H

#include "core/decimal.h"
#include "problem/system.h"

typedef struct lw_exact lw_exact;

/** The state that is refined; arrays owned by the struct. */
typedef struct lw_exact_state {
    lw_decimal *dx; /**< columns, model units */
    lw_decimal *y;  /**< rows */
    lw_decimal *yp; /**< penalty rows (lambda > 0) */
    lw_decimal *u;  /**< conditions */
} lw_exact_state;

lw_status lw_exact_new(const lw_system *system, double lambda, lw_exact **out, lw_error *error);
void lw_exact_free(lw_exact *exact);
lw_status lw_exact_state_new(const lw_exact *exact, lw_exact_state *out, lw_error *error);
void lw_exact_state_clear(lw_exact_state *state);

/** Right-hand side of the augmented system: the problem's own (b, 0, d), or for variances (0, -e_column, 0).
 */
typedef enum lw_exact_side { LW_SIDE_PROBLEM, LW_SIDE_UNIT } lw_exact_side;

/** Residuals whitened and scaled for the decomposition's solve_many: f (rows + penalty rows), g (columns), h
 *  (conditions), rounded to double once. column: for LW_SIDE_UNIT. */
lw_status lw_exact_residual(lw_exact *exact, lw_exact_side side, int64_t column, const lw_exact_state *state,
                            lw_team *team, double *f, double *g, double *h, lw_error *error);
/** Adds a correction (r, z, u in the decomposition's coordinates) to the state. */
void lw_exact_correct(lw_exact *exact, const double *r, const double *z, const double *u,
                      lw_exact_state *state);
/** chi_square = y' Sigma y over the rows (weighted priors included), in double-double. */
lw_decimal lw_exact_chi_square(const lw_exact *exact, const lw_exact_state *state);

/** Refines: solve, add, until the correction no longer changes the estimate, or `most` steps after the first
 *  solve. The state starts at zero. With n_k = ||z of solve k||, k = 0 the first:
 *
 *      contraction = n_1 / n_0       what one step leaves of the error: that of the unrefined solution
 *      last        = n_last / ||z||  stop at 1e-25, or where corrections no longer shrink
 *
 *  (z below 2^-46 of the right-hand side counts as that much.) LW_OK; LW_NOT_CONVERGED when contraction >
 * 0.1, or the last is above 1e-15: the double result is not sure to its last digits. most = 0: one solve,
 * nothing refined, contraction NaN. */
struct lw_decomposition;
typedef struct lw_refinement {
    int64_t steps;            /**< corrections after the first solve */
    double contraction, last; /**< NaN where no correction was made */
} lw_refinement;
lw_status lw_exact_refine(lw_exact *exact, lw_exact_side side, int64_t column,
                          struct lw_decomposition *decomposition, double lambda, int most,
                          const lw_watch *watch, lw_exact_state *state, lw_refinement *out, lw_error *error);

#endif
