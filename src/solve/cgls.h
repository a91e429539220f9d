/** CGLS: conjugate gradients for least squares, one product with A and one with A' a step.
 *
 *  Source: Hestenes & Stiefel, J. Res. Nat. Bur. Standards 49(6):409-436, 1952 (section 10); the form with
 * damping and a recurred residual: Bjorck, Numerical Methods for Least Squares Problems, SIAM 1996, 7.4. */
#ifndef LW_SOLVE_CGLS_H
#define LW_SOLVE_CGLS_H

#include "solve/engine.h"
#include "solve/iteration.h"

/** minimise ||A x - b||^2 + damp^2 ||x||^2; as lw_lsqr. With options->start, x holds a start value (one
 * product more at the start). With row fusion the gradient is carried by a recurrence and made anew every 32
 * steps, with one product more of each kind. 2 rows + 3 columns doubles (column fusion: 3 rows + 2 columns).
 */
lw_status lw_cgls(lw_operator *op, const double *b, const lw_iterate_options *options, double *x,
                  lw_iterate_result *out, lw_error *error);

extern const lw_engine lw_engine_cgls;

#endif
