/** The decomposition of the iterative engines lsqr, cgls and lsmr.
 *
 *  One damping: the engine's own short recurrence, nothing is stored.
 *  Many dampings: one bidiagonalization for all of them, whatever engine was named,
 *      A V_k = U_{k+1} B_k,  x(lambda) = V_k y(lambda),  y from the small bidiagonal problem (projected.h)
 *  with V_k kept in blocks while it fits half the memory budget; beyond it the curve is still read from B_k,
 * and models are made by the short recurrence, one damping at a time. Where L'L has no factor (memory, too
 * many undamped directions) there is no bidiagonalization and no `extend`: each damping is solved stacked.
 * The trace of the influence matrix: exact, from singular values, for small problems; else by random +-1
 * probes z, each with its own bidiagonalization in lockstep (one pass over the matrix for all), trace H =
 * E[z'H z], z'H z by Gauss quadrature. Source of the probes: Hutchinson, Commun. Statist. Simula.
 * 19(2):433-450, 1990. */
#ifndef LW_SOLVE_KRYLOV_H
#define LW_SOLVE_KRYLOV_H

#include "solve/engine.h"
#include "solve/golub_kahan.h"
#include "solve/iteration.h"
#include "solve/projected.h"
#include "solve/standard_form.h"

/** Vectors of one block of the basis: as many as 2 MiB hold, 8 to 256. Larger blocks come in huge pages,
 * which the system clears anew for each run (measured: a tenth of the time of a sweep of 4900 cells). */
#define LW_BASIS_LEAST 8
#define LW_BASIS_MOST 256
#define LW_BASIS_ROOM 2097152

/** V, columns appended one by one. */
typedef struct lw_basis {
    int64_t length, count, blocks, room; /**< of a vector; vectors; blocks allocated; places for blocks */
    double **block;                      /**< length x each */
    int64_t each;                        /**< vectors of a block; 0 until the first */
    int64_t most;                        /**< vectors that the budget allows */
} lw_basis;

/** Without a standard form: the models of the latest damping, from which the next starts. */
typedef struct lw_stacked {
    int sides; /**< columns of x; 0 none yet */
    double lambda;
    double inverse; /**< lower bound of ||(A'A + lambda^2 L'L)^-1|| */
    double *x;      /**< columns x sides */
} lw_stacked;

/** Misfit of the observations alone at a damping whose model the basis cannot give. */
typedef struct lw_split {
    double lambda, misfit;
} lw_split;

typedef struct lw_krylov {
    lw_decomposition base;
    lw_iterate *iterate; /**< the engine's recurrence */
    double tolerance;
    int64_t most; /**< steps */
    int damped, probes;
    lw_watch watch;         /**< for calls that bring none: memory, seed and log only */
    lw_standard_form *form; /**< NULL: L'L has no factor, each damping is solved stacked (krylov_stacked.c) */
    lw_stacked stacked;
    lw_operator *op;    /**< borrowed from the form */
    lw_operator *plain; /**< A itself, made when it is needed beside the form */
    lw_product_options product;
    const double *b;   /**< likewise */
    double trace_from; /**< smallest damping for which the trace will be asked; 0 unknown */
    double front;      /**< smallest damping seen whose error bound is good enough for a curve; 0 none yet */

    lw_golub_kahan gk; /**< side 0: the problem; sides 1 .. probes */
    bool started;
    int64_t made; /**< steps of the bidiagonalization */
    lw_bidiagonal B[LW_LOCKSTEP];
    lw_basis basis;
    bool keeps;      /**< V is complete */
    lw_split *split; /**< with weighted priors and without V */
    int splits;
    double *singular; /**< exact trace: singular values of Abar; NULL none */
    int64_t singular_count;
    double largest; /**< most alpha_i + beta_{i+1} of side 0: a bound of sigma_1 as B shows it */
    double cond_A;  /**< of the latest undamped recurrence; NaN */
} lw_krylov;

/** Shared decompose of the three engines. lambda 0: undamped, unless options->sweep. Errors: LW_NO_MEMORY,
 * LW_BAD_USAGE. */
lw_status lw_krylov_decompose(lw_system *system, double lambda, const lw_solve_options *options,
                              const char *engine, lw_iterate *iterate, const lw_watch *watch,
                              lw_decomposition **out, lw_error *error);

/** Largest singular value of the damped problem in standard form, to a percent or so: from the
 * bidiagonalization of an iterative decomposition, else from 24 steps made for it. LW_BAD_USAGE when it would
 * need more memory than allowed. */
lw_status lw_largest_singular(lw_decomposition *decomposition, const lw_watch *watch, double *out,
                              lw_error *error);

/* Parts of krylov.c that stand in files of their own. */
bool lw_is_krylov(const lw_decomposition *decomposition);
lw_status lw_krylov_evaluate(lw_decomposition *self, int count, const double *lambda, int want_trace,
                             lw_point *point, double *models, const lw_watch *watch, lw_error *error);
lw_status lw_krylov_estimate(lw_decomposition *self, double lambda, const lw_watch *watch, lw_estimate **out,
                             lw_error *error);
lw_status lw_krylov_extend(lw_decomposition *self, int64_t steps, int *exhausted, const lw_watch *watch,
                           lw_error *error);
lw_status lw_krylov_solve_many(lw_decomposition *self, double lambda, int64_t k, const double *f,
                               const double *g, const double *h, double *r, double *z, double *u,
                               lw_error *error);
/** Without the standard form: z (columns) at one damping; with probes also effective_parameters of *point. */
lw_status lw_krylov_stacked(lw_krylov *self, double lambda, int probes, const lw_watch *watch, double *z,
                            lw_iterate_result *out, lw_point *point, lw_error *error);
lw_status lw_krylov_evaluate_stacked(lw_krylov *self, int count, const double *lambda, int want_trace,
                                     lw_point *point, double *models, const lw_watch *watch, lw_error *error);
/** A damping near or somewhat above the largest singular value of the standard form, as the data show it. */
lw_status lw_krylov_stacked_top(lw_krylov *self, const lw_watch *watch, double *out, lw_error *error);
/** w = V y (width x count); y: k x count. */
void lw_basis_multiply(const lw_basis *basis, int64_t k, int count, const double *y, double *w,
                       lw_team *team);
/** Room for one more vector; NULL: budget or memory exhausted. */
double *lw_basis_next(lw_basis *basis);
void lw_basis_clear(lw_basis *basis);
/** Singular values for the exact trace, when the problem is small enough. */
lw_status lw_krylov_small_trace(lw_krylov *self, lw_error *error);
/** effective_parameters and their standard error at `count` dampings; NaN where the quadrature has not
 * converged. */
lw_status lw_krylov_trace(lw_krylov *self, int count, const double *lambda, lw_point *point, lw_error *error);
/** Has the quadrature of every probe converged at lambda? */
lw_status lw_krylov_trace_ready(lw_krylov *self, double lambda, bool *ready, lw_error *error);
/** rows x probes random signs; rows that are set aside get 0. */
lw_status lw_krylov_probe(lw_krylov *self, double *z, lw_error *error);

#endif
