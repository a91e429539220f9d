/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Robust misfits. With r the whitened residuals (in units of their sigma) and c = constant * scale,
 *
 *      huber   minimise  sum phi_c(r_i) + lambda^2 ||L (x - x0)||^2
 *              phi_c(r) = r^2 where |r| <= c, else 2 c |r| - c^2
 *      l1      minimise  2 sum |r_i|    + lambda^2 ||L (x - x0)||^2
 *
 *  The scale of huber is 1 where sigmas are stated, else median |r| / 0.6745, estimated anew in every
 *  iteration.
 *
 *  Two ways to the same minimum: iteratively reweighted least squares (weight min(1, c / |r|), l1: 1 /
 *  max(|r|, e) with e falling) with a direct engine, and nonlinear conjugate gradients on the operator for
 *  large problems. Undamped l1 of a determined problem with uncorrelated readings ends in a vertex: as many
 *  readings as unknowns are met exactly; it is found by exchange from the reweighted solution and solved as
 *  written, so that the estimate is exact (LW_VERTEX_MOST unknowns).
 *
 *  Certainty after huber: make the system with `row_factor` (square roots of the weights) and take its
 *  sigmas as usual. They count the weights as given and are an approximation (too small by some percent
 *  when many readings are down-weighted). After l1 there are none: the vertex uses no redundancy.
 *  Sources: Huber, Robust Statistics, 1981; Holland & Welsch, Commun. Statist. A6:813-827, 1977; Barrodale
 *  & Roberts, SIAM J. Numer. Anal. 10:839-848, 1973. */
#ifndef LW_SOLVE_ROBUST_H
#define LW_SOLVE_ROBUST_H

#include "solve/engine.h"
#include "solve/nonlinear_cg.h"

#define LW_HUBER_CONSTANT 1.345
#define LW_VERTEX_MOST 400

typedef enum lw_misfit_kind { LW_MISFIT_SQUARES = 0, LW_MISFIT_HUBER, LW_MISFIT_L1 } lw_misfit_kind;
typedef enum lw_robust_way { LW_ROBUST_AUTO = 0, LW_ROBUST_REWEIGHTED, LW_ROBUST_GRADIENTS } lw_robust_way;

typedef struct lw_robust_options {
    lw_misfit_kind misfit;
    double constant;   /**< of huber; 0: LW_HUBER_CONSTANT */
    bool scale_stated; /**< the scale is 1: sigmas are stated and trusted */
    lw_robust_way
        way; /**< auto: conjugate gradients where the engine is iterative (by name, or chosen for its size) */
    lw_cg_rule rule;    /**< of the conjugate gradients */
    int64_t iterations; /**< 0: 2000 */
    double tolerance;   /**< relative change of the residuals; 0: 1e-13 */
} lw_robust_options;

typedef struct lw_robust {
    lw_estimate *estimate; /**< at the minimum; its chi_square and misfit are those of the weighted system */
    double *weight;        /**< rows: min(1, c / |r|); l1: min(1, scale / |r|) */
    double *row_factor;    /**< rows: of the system whose least squares solution is the estimate */
    double scale;          /**< 1 or median |r| / 0.6745, at the end */
    double objective;      /**< sum over the rows and the penalty, as above */
    int64_t iterations;    /**< reweightings, or gradient steps */
    bool converged, vertex;
    const char *way; /**< "reweighted least squares", "conjugate gradients", "vertex" */
} lw_robust;
void lw_robust_free(lw_robust *robust);

/** problem and its system options as for an ordinary solution; a row factor of the options multiplies the
 *  robust one. LW_OK, LW_NOT_CONVERGED (the last iterate). Errors: those of solving; LW_BAD_USAGE for
 *  conjugate gradients with conditions. */
lw_status lw_robust_solve(const lw_problem *problem, const lw_system_options *system_options, double lambda,
                          const lw_solve_options *solve_options, const lw_robust_options *options,
                          const lw_watch *watch, lw_robust **out, lw_error *error);

/* Parts. */

/** median |r| / 0.6745 over the rows in use (factor not 0). */
lw_status lw_robust_scale(int64_t rows, const double *r, const double *factor, double *scale,
                          lw_error *error);
/** sum phi_c (or 2 sum |r| for c = 0) over the rows in use. */
double lw_robust_loss(int64_t rows, const double *r, const double *factor, double c);
/** Minimises on the operator of the system, from z (columns) to z; c <= 0: l1, by huber with c falling. */
lw_status lw_robust_descend(lw_system *system, double lambda, const lw_robust_options *options,
                            const lw_watch *watch, double *z, double *scale, int64_t *steps, lw_error *error);
/** Rows of the l1 vertex nearest to the residuals r (whitened) of system->matrix, improved by exchange:
 *  in[rows] true for the columns many that are met. LW_QUALIFIED: none found. */
lw_status lw_robust_vertex(const lw_system *system, const double *r, bool *in, lw_error *error);

#endif
