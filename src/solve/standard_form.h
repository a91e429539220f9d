/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The damped problem in standard form, for iterative engines:
 *
 *      min ||A z - b||^2 + lambda^2 ||L z||^2   ->   min ||Abar w - bbar||^2 + lambda^2 ||w||^2
 *
 *  L'L = R'R regular: Abar = A R^-1, w = R z. Where L has null vectors N (A N of full rank):
 *
 *      Abar = (I - Q Q') A L^#,  A N = Q T,  bbar = (I - Q Q') b,  z = L^# w + N T^-1 Q'(b - A L^# w)
 *
 *  so that undamped directions are treated exactly and are not damped away. L^# is made without any eps: as
 *  many columns of L as it has null vectors are pinned (z = 0 there), what remains has full rank and a factor
 *  R, and ||L L^# w|| = ||w||; N spans the rest. Undamped problems (no L): Abar = A, w = z.
 *
 *  Sources: Elden, BIT 17:134-145, 1977; Hansen, Rank-Deficient and Discrete Ill-Posed Problems, SIAM 1998,
 *  2.3; Calvetti & Somersalo, Inverse Problems 21:1397-1418, 2005 (prior-conditioning). */
#ifndef LW_SOLVE_STANDARD_FORM_H
#define LW_SOLVE_STANDARD_FORM_H

#include "core/watch.h"
#include "matrix/operator.h"
#include "matrix/suitesparse.h"
#include "problem/system.h"

typedef struct lw_standard_form lw_standard_form;

/** damped 0: no penalty. *out NULL with LW_QUALIFIED when the factor of L'L would be too large for the
 *  budget, when the penalty leaves too many directions undamped, or when L'L is too ill-conditioned for a
 *  factor, with the reason in error: the caller falls back to stacking and says so. LW_UNSOLVABLE, naming
 * parameters, when the data do not determine what the penalty leaves undamped. */
lw_status lw_standard_form_new(lw_system *system, int damped, const lw_product_options *product,
                               const lw_watch *watch, lw_standard_form **out, lw_error *error);
void lw_standard_form_free(lw_standard_form *form);
/** Abar, rows x width; borrowed. */
lw_operator *lw_standard_form_operator(lw_standard_form *form);
/** Length of w. */
int64_t lw_standard_form_width(const lw_standard_form *form);
/** bbar, rows. */
const double *lw_standard_form_side(const lw_standard_form *form);
/** Directions that the penalty leaves alone and the data determine. */
int64_t lw_standard_form_undamped(const lw_standard_form *form);
/** Time of factoring L'L, for the bench. */
double lw_standard_form_factor_seconds(const lw_standard_form *form);
/** z (columns x k) from w (width x k). */
lw_status lw_standard_form_back(lw_standard_form *form, int64_t k, const double *w, double *z,
                                lw_error *error);
/** The same for other right-hand sides than the system's b: that of vector v is side + v stride. */
lw_status lw_standard_form_back_from(lw_standard_form *form, int64_t k, const double *side, int64_t stride,
                                     const double *w, double *z, lw_error *error);
/** y (rows x k) <- (I - Q Q') y. */
void lw_standard_form_project(lw_standard_form *form, int64_t k, double *y);
/** z = L^# w only (no null-space part): square root of the prior covariance, for samples and posterior
 *  variances. */
lw_status lw_standard_form_root(lw_standard_form *form, int64_t k, const double *w, double *z,
                                lw_error *error);
/** w = L^#' z, k vectors. */
lw_status lw_standard_form_root_transposed(lw_standard_form *form, int64_t k, const double *z, double *w,
                                           lw_error *error);
/** Pieces of the prior covariance of z that the penalty means, with lambda = 1:
 *
 *      G = L^# - X W',  X = N T^-1,  W = L^#' A'Q;   G G' = S - X Y' - Y X' + X W'W X',  S = L^# L^#', Y =
 * L^# W
 *
 *  change (columns): diag(G G' - S); null (columns): diag(X X'), the part that the data alone determine.
 *  Source: standard_form.h with c = T^-1 Q'(b - A L^# w) random. LW_QUALIFIED, reason in error: does not fit.
 */
lw_status lw_standard_form_prior(lw_standard_form *form, const lw_watch *watch, double *change, double *null,
                                 lw_error *error);
/** What S needs: diagonal (columns) where L is diagonal and *factor NULL; else the Cholesky factor of L_f'L_f
 * (borrowed) whose place k is column (*column_of)[k], in model units. */
void lw_standard_form_factor(lw_standard_form *form, const double **inverse, lw_cholesky **factor,
                             const int64_t **column_of);

#endif
