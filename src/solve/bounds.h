/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Least squares in a box:
 *
 *      minimise    q(z) = 1/2 ||A z - b||^2 + 1/2 lambda^2 ||L z||^2
 *      subject to  lower <= x <= upper,  x = x0 + scale z
 *
 *  First gradient projection and conjugate gradients in turn: projected gradient steps find which bounds
 *  hold, conjugate gradients minimise over the rest, a projected search keeps the step in the box. It ends
 *  where the projected gradient is small, with g = A'(A z - b) + lambda^2 L'L z
 *
 *      p_j = g_j between the bounds,  min(g_j, 0) at the lower,  max(g_j, 0) at the upper
 *
 *  optimality = ||p|| / ||A'b|| <= tolerance, in columns of about unit length. Then, where the problem is
 *  small enough for a dense factor, an active-set method from there to the exact minimum: full steps over the
 *  free parameters by QR, stopped at the first bound they meet; the bound with the worst wrong sign of g is
 *  let go; finite.
 *
 *  Sources: More & Toraldo, SIAM J. Optim. 1(1):93-113, 1991; Bertsekas, SIAM J. Control Optim. 20(2):
 *  221-246, 1982; Stark & Parker, Computational Statistics 10:129-141, 1995; Lawson & Hanson, Solving Least
 *  Squares Problems, 1974, ch. 23. */
#ifndef LW_SOLVE_BOUNDS_H
#define LW_SOLVE_BOUNDS_H

#include "core/watch.h"
#include "matrix/product.h"
#include "problem/system.h"
#include "solve/decomposition.h"

typedef struct lw_bounds_options {
    double tolerance; /**< of the optimality; 0 = 1e-10 */
    int64_t steps;    /**< most products with A; 0 = by the size, 1000 to 20000 */
    lw_storage storage;
    int64_t dense; /**< most columns for the exact finish; 0 = 2000 (and 4e10 operations), < 0 never */
} lw_bounds_options;

typedef struct lw_bounded {
    int64_t columns;
    double *z, *z_low;  /**< columns; z_low makes lw_system_model give a bound that holds to the last bit */
    int8_t *at_bound;   /**< columns: -1 at the lower, +1 at the upper, 0 between */
    double *multiplier; /**< columns: d q / d x_j in model units, >= 0 at a lower and <= 0 at an upper bound,
                           0 between */
    int64_t free;       /**< parameters between their bounds */
    int64_t steps;      /**< products with A */
    int64_t exchanges;  /**< factorizations of the exact finish */
    lw_stop
        stop; /**< LW_STOP_DIRECT: the exact finish; else TOLERANCE, STEPS, STAGNATED, INTERRUPTED, ZERO */
    double optimality; /**< as above, from residuals formed afresh */
} lw_bounded;

/** Bounds: the problem's (NULL: none). lambda 0: no penalty. LW_OK; LW_NOT_CONVERGED (optimality above the
 *  tolerance: the last iterate, feasible); LW_INTERRUPTED. LW_BAD_USAGE with exact conditions. Where data,
 *  penalty and bounds leave directions open, one of the minimizers. Cost a step: one product with A and one
 *  with A'; 8 vectors of columns, 3 of rows. */
lw_status lw_bounds_solve(lw_system *system, double lambda, const lw_bounds_options *options,
                          const lw_watch *watch, lw_bounded **out, lw_error *error);
void lw_bounded_free(lw_bounded *bounded);

#endif
