/** One decomposition of a system, from which every answer is read.
 *
 *      minimise ||A z - b||^2 + lambda^2 ||L z||^2  subject to C z = d      (all in the scaled coordinates of
 * lw_system)
 *
 *  Coordinates: z has system->columns, rows are system->rows (whitened). lambda is in the unit of the
 * objective. */
#ifndef LW_SOLVE_DECOMPOSITION_H
#define LW_SOLVE_DECOMPOSITION_H

#include "matrix/suitesparse.h"
#include "problem/system.h"

/** Why an engine stopped; a result, not an error. */
typedef enum lw_stop {
    LW_STOP_DIRECT = 0, /**< a factorization: exact up to rounding */
    LW_STOP_REFINED,    /**< refined until the estimate no longer changes */
    LW_STOP_TOLERANCE,  /**< iterated to the tolerance asked for */
    LW_STOP_STEPS,      /**< the most steps were made */
    LW_STOP_STAGNATED,  /**< rounding allows no more */
    LW_STOP_BREAKDOWN,  /**< the Krylov space is exhausted: exact within it */
    LW_STOP_MEMORY,     /**< the basis filled the budget */
    LW_STOP_INTERRUPTED,
    LW_STOP_ZERO /**< the right-hand side is zero: the start value is the answer */
} lw_stop;
const char *lw_stop_name(lw_stop stop);  /**< "direct", "refined", "tolerance", "steps", ... */
const char *lw_stop_words(lw_stop stop); /**< a sentence for a person */

/** What the trade-off needs of one damping; no vector of the size of the model. Norms in whitened,
 * dimensionless units (misfit) and units of L x (size). */
typedef struct lw_point {
    double lambda;
    double misfit;               /**< ||A z - b|| over the observations used */
    double chi_square;           /**< misfit^2 + weighted priors */
    double size;                 /**< ||L z|| */
    double size_slope;           /**< d(size^2)/d lambda, <= 0; NaN unknown */
    double effective_parameters; /**< trace of the influence matrix over the observations (and priors); NaN
                                    unknown */
    double effective_spread;     /**< its standard error (random probes); 0 exact */
    double error_bound; /**< ||g|| / (lambda^2 ||z||_L), upper bound of the relative error of the model; 0
                           direct */
} lw_point;

/** The full answer at one damping, in the user's units. */
typedef struct lw_estimate {
    lw_point point;
    int64_t parameters, rows;
    double *x; /**< parameters: estimate (fixed parameters at their value), correctly rounded where refined */
    double *z, *z_low; /**< columns: scaled corrections; z_low NULL unless refined */
    double *residual;  /**< rows: predicted - observed, unit of the observation; weighted priors follow the
                          observations */
    double *weighted;  /**< rows: P residual (unwhitened: e = P v), 1 / unit */
    double *condition_multiplier; /**< conditions, or NULL */
    int64_t rank;                 /**< -1 unknown (iterative) */
    int64_t steps;                /**< iterations, or refinement steps */
    lw_stop stop;
    double gradient;       /**< ||g|| of the damped objective in standard form */
    double rcond;          /**< reciprocal condition estimate of the scaled matrix; NaN unknown */
    double contraction;    /**< ratio of the second to the first refinement correction; NaN none made */
    double refined_to;     /**< relative size of the last correction; NaN */
    double chi_square_low; /**< low part of chi_square (double-double) where refined, else 0 */
} lw_estimate;
void lw_estimate_free(lw_estimate *estimate);

/** Null vectors of an undamped, rank-deficient system and how the datum was defined. */
typedef struct lw_null_space {
    int64_t columns;
    int64_t defect; /**< d */
    double *basis;  /**< columns x d, z coordinates, A basis = 0; NULL when d = 0 */
    int64_t *held;  /**< d: columns that were held to make the normal matrix regular */
} lw_null_space;

/** Where entries of the inverse Q = (A'A + lambda^2 L'L)^-1 (in z; conditions and free datum included) come
 * from: Q_ij = Q0_ij + sum_k left[i + k columns] right[j + k columns] with Q0 the inverse of the factored
 * matrix (view) or a full matrix (dense). */
typedef struct lw_inverse_source {
    int64_t columns;
    lw_factor_view view;  /**< view.columns 0: use dense */
    double *dense;        /**< columns x columns, symmetric; borrowed; NULL: use view */
    int64_t correction;   /**< number of rank-one terms */
    double *left, *right; /**< columns x correction, borrowed from the decomposition */
    double error;         /**< relative error to be expected of the entries */
} lw_inverse_source;

typedef struct lw_decomposition lw_decomposition;

typedef struct lw_decomposition_methods {
    const char *engine;
    /** Points at `count` dampings and, when models is not NULL, z of each (columns x count, or NaN where the
     * decomposition has not enough). want_trace: fill effective_parameters. Never refines. */
    lw_status (*evaluate)(lw_decomposition *self, int count, const double *lambda, int want_trace,
                          lw_point *point, double *models, const lw_watch *watch, lw_error *error);
    /** The full answer at one damping, refined where the engine refines, iterated to the tolerance where it
     * iterates. */
    lw_status (*estimate)(lw_decomposition *self, double lambda, const lw_watch *watch, lw_estimate **out,
                          lw_error *error);
    /** Does a chunk more work towards smaller error bounds (iterative); *exhausted = 1 when there is no more
     * to do. NULL: direct. */
    lw_status (*extend)(lw_decomposition *self, int64_t steps, int *exhausted, const lw_watch *watch,
                        lw_error *error);
    /** Solves for k right-hand sides the augmented system
     *      [ I  At  0 ] [r]   [f]
     *      [ At' 0  C'] [z] = [g]      At = [A; lambda L], f: rows + penalty_rows (lambda > 0) x k, g:
     * columns x k, h: conditions x k [ 0  C   0 ] [u]   [h] f, g, h may be NULL (zero). r, u may be NULL (not
     * wanted). In double. With a free datum, z is in that datum. */
    lw_status (*solve_many)(lw_decomposition *self, double lambda, int64_t k, const double *f,
                            const double *g, const double *h, double *r, double *z, double *u,
                            lw_error *error);
    /** Source of the inverse's entries at lambda; NULL when the engine has none. hand_over: the factor's
     * values may be overwritten by the caller; afterwards only `free` may be called. */
    lw_status (*inverse_entries)(lw_decomposition *self, double lambda, int hand_over, lw_inverse_source *out,
                                 lw_error *error);
    /** NULL-terminated engines without it leave it NULL. Borrowed until free. */
    const lw_null_space *(*null_space)(lw_decomposition *self);
    int64_t (*rank)(lw_decomposition *self); /**< -1 unknown */
    double (*rcond)(lw_decomposition *self); /**< NaN unknown */
    void (*free_self)(lw_decomposition *self);
} lw_decomposition_methods;

struct lw_decomposition {
    const lw_decomposition_methods *methods;
    lw_system *system; /**< borrowed */
};
void lw_decomposition_free(lw_decomposition *decomposition);

/** Shared by all engines: makes the estimate of a z (columns; z_low may be NULL), with residuals and norms;
 * takes over nothing. exact: residuals in double-double. */
lw_status lw_estimate_from_model(const lw_system *system, double lambda, const double *z, const double *z_low,
                                 int exact, lw_estimate **out, lw_error *error);

#endif
