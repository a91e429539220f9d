/** LSMR: least squares by Golub-Kahan bidiagonalization in which the norm of the gradient falls at every
 * step, so that it may be stopped earlier than LSQR. Source: Fong & Saunders, SIAM J. Sci. Comput.
 * 33(5):2950-2971, 2011. */
#ifndef LW_SOLVE_LSMR_H
#define LW_SOLVE_LSMR_H

#include "solve/engine.h"
#include "solve/iteration.h"

/** minimise ||A x - b||^2 + damp^2 ||x||^2; as lw_lsqr. 2 rows + 5 columns doubles. */
lw_status lw_lsmr(lw_operator *op, const double *b, const lw_iterate_options *options, double *x,
                  lw_iterate_result *out, lw_error *error);

extern const lw_engine lw_engine_lsmr;

#endif
