/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the direct engines (dense, cholesky, qr) share. Each factors one stacked matrix
 *
 *      M = [A; lambda L; C_i; E']
 *
 *  C_i: the conditions that stand in the factor (all that are not too long), E': unit rows of the columns
 * that are held where the datum is free. A held minimal set changes no residual, so E' z = 0 in the
 * least-squares solution. Conditions, datum, refinement, sweep and trace are then the same for all three:
 * they only need the solution of
 *
 *      [I  M; M'  0] [r; z] = [f; g]. */
#ifndef LW_SOLVE_DIRECT_H
#define LW_SOLVE_DIRECT_H

#include "solve/conditions.h"
#include "solve/datum.h"
#include "solve/decomposition.h"
#include "solve/engine.h"
#include "solve/exact.h"

typedef struct lw_direct lw_direct;

typedef struct lw_factor_methods {
    /** Factors M at lambda. LW_UNSOLVABLE: M has not full column rank, or too nearly not. */
    lw_status (*factorize)(lw_direct *self, double lambda, const lw_watch *watch, lw_error *error);
    /** Null vectors of M after LW_UNSOLVABLE: *basis columns x *vectors, orthonormal within each component;
     * *defect their number in all. Defect 0: M is regular after all and now factored, or LW_NOT_CONVERGED:
     * beyond this engine. */
    lw_status (*null_vectors)(lw_direct *self, double lambda, int expand, const lw_watch *watch,
                              double **basis, int64_t *vectors, int64_t *defect, lw_error *error);
    /** Solves for k right-hand sides; f (stacked x k) or g (columns x k) NULL: zero; r NULL: not wanted. */
    lw_status (*solve)(lw_direct *self, int64_t k, const double *f, const double *g, double *r, double *z,
                       lw_error *error);
    /** Fills view or dense and error of the source. */
    lw_status (*inverse)(lw_direct *self, int hand_over, lw_inverse_source *out, lw_error *error);
    double (*rcond)(lw_direct *self);
    void (*free_state)(lw_direct *self);
} lw_factor_methods;

struct lw_direct {
    lw_decomposition base;
    const lw_factor_methods *factor;
    void *state; /**< the engine's own */
    lw_solve_options options;
    lw_watch watch;           /**< for calls that bring none: memory, seed and log only */
    lw_sparse *penalty;       /**< L, p x columns; made from the diagonal for LW_PREFER_SMALLEST */
    lw_sparse *extra;         /**< C_i over E', or NULL */
    int64_t extra_number;     /**< counts how often it was made anew */
    int64_t *extra_condition; /**< conditions in the factor: their numbers */
    int64_t extra_conditions; /**< how many */
    int longest;              /**< conditions of more nonzeros than this stay out of the factor */
    double lambda;            /**< of the factor that stands; NaN none */
    double base_lambda;       /**< the same already while datum and conditions are being made */
    int damped;               /**< lambda > 0 in the factor that stands or stood last */
    int corrected;            /**< solve corrects its solution once (cholesky, where nothing is refined) */
    int searched;             /**< the null space for this `damped` is known */
    lw_datum datum;           /**< space.defect 0: none */
    lw_conditions conditions;
    lw_exact *exact; /**< refined state, kept for refined_lambda */
    lw_exact_state refined;
    lw_refinement refinement;
    double refined_lambda;
    lw_status refined_status;
    double *left, *right; /**< corrections of the inverse */
    double condition;     /**< reciprocal condition estimate of M, NaN not yet made */
};

/** A direct decomposition without a factor. `state` is freed by methods->free_state, also when this fails. */
lw_status lw_direct_new(lw_system *system, const lw_decomposition_methods *methods,
                        const lw_factor_methods *factor, void *state, const lw_solve_options *options,
                        const lw_watch *watch, lw_direct **out, lw_error *error);
/** Makes the factor of lambda stand, with datum and conditions. LW_UNSOLVABLE in words; LW_NOT_CONVERGED: the
 * numbers are beyond this engine (cholesky only). */
lw_status lw_direct_prepare(lw_direct *self, double lambda, const lw_watch *watch, lw_error *error);
/** Refines the solution at lambda and keeps it. LW_NOT_CONVERGED as lw_exact_refine. */
lw_status lw_direct_refine(lw_direct *self, double lambda, int most, const lw_watch *watch, lw_error *error);

/** Null vectors that neither equations nor conditions determine: defect of a free datum. */
int64_t lw_direct_defect(const lw_direct *self);
int64_t lw_direct_penalty_rows(const lw_direct *self, double lambda); /**< p, or 0 without damping */
int64_t lw_direct_stacked(const lw_direct *self, double lambda);      /**< rows of M */
/** M as a sparse matrix; held: with the rows of held columns. */
lw_status lw_direct_stack(lw_direct *self, double lambda, lw_sparse **out, lw_error *error);
/** Y <- M Z and Z <- M' Y for k vectors. */
void lw_direct_apply(const lw_direct *self, double lambda, int64_t k, const double *z, double *y);
void lw_direct_apply_transposed(const lw_direct *self, double lambda, int64_t k, const double *y, double *z);
/** Rebuilds `extra` from the conditions that stand in the factor and the held columns. */
lw_status lw_direct_make_extra(lw_direct *self, lw_error *error);

/** The methods that engines put into their lw_decomposition_methods (direct_read.c: evaluate, estimate,
 * inverse). */
lw_status lw_direct_evaluate(lw_decomposition *self, int count, const double *lambda, int want_trace,
                             lw_point *point, double *models, const lw_watch *watch, lw_error *error);
lw_status lw_direct_estimate(lw_decomposition *self, double lambda, const lw_watch *watch, lw_estimate **out,
                             lw_error *error);
lw_status lw_direct_solve_many(lw_decomposition *self, double lambda, int64_t k, const double *f,
                               const double *g, const double *h, double *r, double *z, double *u,
                               lw_error *error);
lw_status lw_direct_inverse(lw_decomposition *self, double lambda, int hand_over, lw_inverse_source *out,
                            lw_error *error);
const lw_null_space *lw_direct_null_space(lw_decomposition *self);
int64_t lw_direct_rank(lw_decomposition *self);
double lw_direct_rcond(lw_decomposition *self);
void lw_direct_free(lw_decomposition *self);

/** Reciprocal condition of M from power and inverse iteration with M'M (a few solves), made once a factor;
 * NaN unknown. Source: Higham, Accuracy and Stability of Numerical Algorithms, SIAM 2002, 15.2. */
double lw_direct_condition(lw_direct *self);
/** trace of the influence matrix at the lambda that stands: exact by solves up to 2000 columns, else by
 * random probes. */
lw_status lw_direct_trace(lw_direct *self, double lambda, double *trace, double *spread, lw_error *error);

#endif
