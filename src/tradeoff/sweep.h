/** Sweeps the damping over a decomposition: the curve, and the choices of the criteria.
 *
 *  Grid, where none is given: `count` dampings, logarithmic, from the largest singular value sigma_1 of the
 * problem in standard form (above it nothing but the mean level of the misfit is left) down to where the
 * curve has nothing more to tell: with a direct engine where over half a decade neither misfit nor size
 * changes by 0.1 %, at the latest at 1e-8 sigma_1; with an iterative engine to half the smallest choice, or
 * as far as the curve had converged.
 *
 *  An iterative engine goes on until every choice is within the tolerance and every damping down to half the
 * smallest choice has an error bound of 1e-3; a point with a larger bound is never picked. */
#ifndef LW_TRADEOFF_SWEEP_H
#define LW_TRADEOFF_SWEEP_H

#include "core/watch.h"
#include "tradeoff/curve.h"

#define LW_SWEEP_DEFAULT_COUNT 60
#define LW_CURVE_TOLERANCE 1e-3

typedef struct lw_sweep_options {
    int count;             /**< dampings; 0 = LW_SWEEP_DEFAULT_COUNT when `damping` is NULL */
    const double *damping; /**< count positive dampings in any order, or NULL: the program's own grid */
    unsigned criteria;     /**< bits 1u << lw_criterion; 0 = all that apply */
    bool sigma_stated;     /**< sigma was given: discrepancy and risk apply */
    double noise_factor;   /**< of the discrepancy target chi_square = noise_factor^2 m; 0 = 1 */
    double tolerance;      /**< of an iterative engine; 0 = 1e-6 */
    int64_t steps;         /**< most steps of an iterative engine; 0 = a default from the sizes */
} lw_sweep_options;

/** The criteria that apply (bits): discrepancy and risk only with a stated sigma. */
unsigned lw_sweep_criteria(const lw_sweep_options *options);
/** Does any of them need effective_parameters (so that lw_solve_options.trace_probes should not be 0)? */
bool lw_sweep_wants_trace(const lw_sweep_options *options);
/** The grid FROM:TO:COUNT, logarithmic, both ends exact. */
void lw_sweep_grid(double from, double to, int count, double *out);

/** decomposition: made with lw_solve_options.sweep = 1 of a system with a penalty. *out (owned by the caller)
 * is given for LW_OK, LW_NOT_CONVERGED and LW_INTERRUPTED. Warnings of the choices stand in the choices, not
 * in the log. Errors: LW_BAD_USAGE (a damping that is not positive; a criterion named that needs sigma),
 * LW_UNSOLVABLE (all coefficients zero), and those of the engine. Models: decomposition->methods->evaluate
 * gives them at any dampings. */
lw_status lw_sweep(lw_decomposition *decomposition, const lw_sweep_options *options, const lw_watch *watch,
                   lw_curve **out, lw_error *error);

#endif
