/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Exact conditions C z = d by the Schur complement of the factored matrix N_c = M'M:
 *
 *      Z = N_c^-1 C',  S = C Z,  z = z0 + Z w,  w = S^-1 (h - C z0) = u
 *
 *  with z0 the solution without conditions. Conditions that stand in the factor as rows of M change z0 but
 * not z or u. Source: Bjorck, Numerical Methods for Least Squares Problems, SIAM 1996, 5.1. */
#ifndef LW_SOLVE_CONDITIONS_H
#define LW_SOLVE_CONDITIONS_H

#include "problem/system.h"

typedef struct lw_conditions {
    int64_t count;
    double *schur;  /**< Cholesky factor of S, count x count; NULL: none made */
    int64_t border; /**< null vectors that conditions determine */
    double *cg;     /**< count x border: C G */
    double *k;      /**< border x border: Cholesky factor of K */
} lw_conditions;

struct lw_direct;

/** Rank test of C on the free columns: LW_UNSOLVABLE names each condition that the others contain and says
 * whether it contradicts them or repeats them. */
lw_status lw_conditions_check(const lw_system *system, lw_error *error);
/** S of the factor that stands in `direct`. */
lw_status lw_conditions_make(struct lw_direct *direct, lw_error *error);
/** *cured = 1 when C G has full rank: the conditions determine the null vectors that `direct` holds; 0 when
 * they determine none. LW_UNSOLVABLE when they determine some and a free datum is asked for. */
lw_status lw_conditions_cure(struct lw_direct *direct, int *cured, lw_error *error);
/** Corrects k base solutions of right-hand sides g and h (NULL: zero): z (columns x k) and r (stacked rows x
 * k, may be NULL) in place, u (count x k, may be NULL). */
lw_status lw_conditions_apply(struct lw_direct *direct, int64_t k, const double *g, const double *h,
                              double *r, double *z, double *u, lw_error *error);
/** Y and X, columns x (count + border). */
lw_status lw_conditions_correction(struct lw_direct *direct, double *yx, lw_error *error);
void lw_conditions_clear(lw_conditions *conditions);

#endif
