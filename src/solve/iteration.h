/** What the iterative kernels lsqr, cgls and lsmr have in common: options, result, the rules of stopping, the
 * observer.
 *
 *      minimise ||A x - b||^2 + damp^2 ||x||^2        (standard form)
 *      g = A'(b - A x) - damp^2 x                     minus half the gradient of the objective */
#ifndef LW_SOLVE_ITERATION_H
#define LW_SOLVE_ITERATION_H

#include "core/watch.h"
#include "matrix/operator.h"
#include "solve/decomposition.h"

/** What an observer sees after each step; pointers are valid during the call, NULL where a kernel has no such
 * vector. */
typedef struct lw_iteration {
    int64_t step;
    double alpha; /**< step length (cgls), alpha of the bidiagonalization (lsqr, lsmr) */
    double beta;  /**< Fletcher-Reeves coefficient (cgls), beta of the bidiagonalization (lsqr, lsmr) */
    double polak_ribiere;    /**< g_new'(g_new - g_old) / g_old'g_old (cgls), else NaN */
    double gradient;         /**< ||g||, as the recurrence has it */
    double residual;         /**< sqrt(||b - A x||^2 + damp^2 ||x||^2) */
    const double *x;         /**< columns, model after the step */
    const double *g;         /**< columns, gradient after the step (cgls) */
    const double *direction; /**< columns, direction of the step just made (cgls) */
} lw_iteration;
typedef void lw_observer(void *state, const lw_iteration *iteration);

typedef struct lw_iterate_options {
    double damp;          /**< >= 0 */
    double tolerance;     /**< of the relative error of the model; 0 = 1e-6 */
    int64_t steps;        /**< most steps; 0 = lw_default_steps */
    int start;            /**< 1: x holds a start value (cgls only) */
    lw_observer *observe; /**< may be NULL */
    void *observe_state;
    const lw_watch *watch;
} lw_iterate_options;

typedef struct lw_iterate_result {
    int64_t steps;
    lw_stop stop;
    double residual;    /**< ||b - A x|| */
    double norm;        /**< ||x|| */
    double gradient;    /**< ||g|| of the returned x, computed truly */
    double error_bound; /**< damped: ||g|| / (damp^2 ||x||). Undamped: ||g|| cond(A) / (||A|| ||r||) as
                           estimated */
    double norm_A;      /**< estimate of ||A||_F */
    double cond_A;      /**< estimate of cond(A) (of [A; damp I]); NaN where a kernel has none */
} lw_iterate_result;

typedef lw_status lw_iterate(lw_operator *op, const double *b, const lw_iterate_options *options, double *x,
                             lw_iterate_result *out, lw_error *error);

#define LW_DEFAULT_TOLERANCE 1e-6
/** 4 min(rows, columns) + 200, at least 1000: rounding delays the finite termination. */
int64_t lw_default_steps(const lw_operator *op);

/** The state of the stopping rules, as the recurrences of a kernel estimate it. */
typedef struct lw_progress {
    double damp, tolerance;
    double norm_b;
    double gradient; /**< ||g|| */
    double residual; /**< ||b - A x|| */
    double norm;     /**< ||x|| */
    double norm_A, cond_A;
} lw_progress;

/** Damped: ||g|| / (damp^2 ||x||), an upper bound of the relative error of x, since A'A + damp^2 I >= damp^2
 * I. Undamped: the smaller of ||g|| cond / (||A|| ||r||) and, for equations that can be met, ||r|| cond /
 * (||A|| ||x||). */
double lw_progress_bound(const lw_progress *progress);
/** True when the recurrence has arrived (*stop = tolerance), or when rounding allows no more (*stop =
 * stagnated). */
bool lw_progress_done(const lw_progress *progress, lw_stop *stop);

/** ||b - A x||, ||x|| and ||g|| computed from x itself (one product each); r (rows) and g (columns) are
 * overwritten. */
void lw_true_gradient(lw_operator *op, const double *b, double damp, const double *x, double *r, double *g,
                      lw_progress *progress);
/** Ends a kernel: true norms, error bound; a recurrence that claimed more than is true is stop = stagnated.
 */
void lw_iterate_finish(lw_operator *op, const double *b, const double *x, double *r, double *g,
                       lw_progress *progress, lw_iterate_result *out);
/** Tolerance and most steps with their defaults; the status that belongs to a result; the progress line. */
double lw_iterate_tolerance(const lw_iterate_options *options);
int64_t lw_iterate_most(const lw_iterate_options *options, const lw_operator *op);
lw_status lw_iterate_status(const lw_iterate_result *result, const lw_progress *progress);
void lw_iterate_tick(const lw_iterate_options *options, const char *what, int64_t step,
                     const lw_progress *progress);

#endif
