/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Conjugate gradients on the stacked system, several right-hand sides in lockstep, one product with A and
 * one with A' a step for all of them:
 *
 *      r = [f1; f2] - [A; lambda L] x       s = A'r1 + lambda L'r2 - g       (s = 0 at the solution)
 *      a = ||s||^2 / (||A p||^2 + lambda^2 ||L p||^2),  x <- x + a p,  p <- s + beta p
 *
 *  The unknown is w of the standard form where there is one and no g is given (L = I there, and far fewer
 *  steps), else z itself.
 *  Source: Bjorck, Numerical Methods for Least Squares Problems, SIAM 1996, 7.4. */
#ifndef LW_SOLVE_KRYLOV_MANY_H
#define LW_SOLVE_KRYLOV_MANY_H

#include "solve/krylov.h"

#define LW_MANY_SIDES 8

typedef struct lw_many {
    const lw_system *system;
    lw_operator *op;
    double lambda, tolerance;
    lw_standard_form *form; /**< iterates on w of the standard form, where L = I; NULL: on z */
    const double *diagonal; /**< iterates on L z, L diagonal and regular; NULL: L of the system */
    int64_t m, n, p;        /**< rows, width of the unknown, penalty rows (0 undamped) */
    int k;                  /**< sides in use */
    double *r1, *r2, *q1, *q2, *x, *s, *d, *t;
    const double *g; /**< n x k or NULL */
    double gamma[LW_MANY_SIDES],
        inverse[LW_MANY_SIDES]; /**< ||s||^2; sum of ||p||^2 / delta, above ||(A'A + lambda^2 L'L)^-1|| */
    double least;               /**< what `inverse` is known to be at least, from earlier solves */
    bool done[LW_MANY_SIDES];
} lw_many;

/** Room for `sides` right-hand sides at lambda; cleared by the caller also after a failure. gradient: g will
 * be given. */
lw_status lw_many_new(lw_many *many, lw_krylov *self, double lambda, int sides, int gradient,
                      lw_error *error);
void lw_many_clear(lw_many *many);
/** Iterates from r1 = f1, r2 = f2 and x = 0, or, when started, from x as it stands with r1 and r2 the
 *  residuals there. Returns the steps; `done` says which sides have converged. */
int64_t lw_many_iterate(lw_many *many, int64_t most, int started, const char *what, const lw_watch *watch);
/** Upper bound of the relative error of side i, as estimated. */
double lw_many_bound(const lw_many *many, int i);
#endif
