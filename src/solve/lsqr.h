/** LSQR: damped sparse least squares by Golub-Kahan bidiagonalization.
 *
 *  In exact arithmetic the iterates of conjugate gradients on the normal equations; the better one
 * numerically when A is ill-conditioned. Source: Paige & Saunders, ACM TOMS 8(1):43-71 and 8(2):195-209,
 * 1982. */
#ifndef LW_SOLVE_LSQR_H
#define LW_SOLVE_LSQR_H

#include "solve/engine.h"
#include "solve/iteration.h"

/** minimise ||A x - b||^2 + damp^2 ||x||^2
 *
 *  op    A, rows x columns; borrowed
 *  b     rows; borrowed
 *  x     columns, out
 *  out   how it ended; never NULL
 *
 *  Returns LW_OK, LW_NOT_CONVERGED or LW_INTERRUPTED (x is the last iterate). Errors: LW_NO_MEMORY.
 *  Cost: one product with A and one with A' a step, one of each at the end; 2 rows + 4 columns doubles. */
lw_status lw_lsqr(lw_operator *op, const double *b, const lw_iterate_options *options, double *x,
                  lw_iterate_result *out, lw_error *error);

extern const lw_engine lw_engine_lsqr;

#endif
