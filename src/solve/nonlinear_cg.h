/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Nonlinear conjugate gradients for a smooth objective:
 *
 *      d_0 = -g_0,  x_{k+1} = x_k + alpha_k d_k,  d_{k+1} = -g_{k+1} + beta_k d_k
 *      beta_k = max(0, g_{k+1}'(g_{k+1} - g_k) / g_k'g_k)    Polak-Ribiere+
 *             = g_{k+1}'g_{k+1} / g_k'g_k                    Fletcher-Reeves
 *
 *  with a restart along -g where d would not descend (Fletcher-Reeves: also every max(n, 50) steps, for it
 *  takes ever shorter steps after a bad direction). The line search satisfies the strong Wolfe conditions
 *
 *      f(alpha) <= f(0) + decrease alpha f'(0),   |f'(alpha)| <= curvature |f'(0)|
 *
 *  Sources: Fletcher & Reeves, Computer J. 7:149-154, 1964; Polak & Ribiere, RIRO 3(16):35-43, 1969;
 *  Gilbert & Nocedal, SIAM J. Optim. 2:21-42, 1992; Nocedal & Wright, Numerical Optimization, 2006, 3.5 and
 *  5.2. */
#ifndef LW_SOLVE_NONLINEAR_CG_H
#define LW_SOLVE_NONLINEAR_CG_H

#include "core/watch.h"
#include "solve/decomposition.h"

/** What is minimised. value gives f(x) and its gradient. aim and along may be NULL; with them a trial along
 *  a line needs no full evaluation: aim(x, d) is called first, along(alpha, &slope) gives f(x + alpha d)
 *  and its derivative. */
typedef struct lw_objective {
    int64_t n;
    void *state;
    double (*value)(void *state, const double *x, double *gradient);
    void (*aim)(void *state, const double *x, const double *d);
    double (*along)(void *state, double alpha, double *slope);
} lw_objective;

typedef enum lw_cg_rule { LW_POLAK_RIBIERE_PLUS = 0, LW_FLETCHER_REEVES } lw_cg_rule;

typedef struct lw_cg_options {
    lw_cg_rule rule;
    double decrease, curvature; /**< 0: 1e-4 and 0.1 */
    double tolerance;           /**< of ||g|| relative to the first; 0: 1e-10 */
    int64_t steps;              /**< 0: 10 n + 1000 */
    /** Replaces the line search: alpha from x along d, slope f'(0). NULL: strong Wolfe. */
    double (*search)(void *state, const double *x, const double *d, double slope);
} lw_cg_options;

typedef struct lw_cg_result {
    int64_t steps, evaluations; /**< evaluations: along a line and in full */
    double value, gradient;     /**< f and ||g|| at x */
    lw_stop stop;               /**< LW_STOP_TOLERANCE, _STEPS, _STAGNATED, _INTERRUPTED */
} lw_cg_result;

/** x (n): start, then the last point. LW_OK (tolerance, or rounding allows no more), LW_NOT_CONVERGED,
 *  LW_INTERRUPTED. */
lw_status lw_nonlinear_cg(const lw_objective *objective, const lw_cg_options *options, double *x,
                          lw_cg_result *out, const lw_watch *watch, lw_error *error);

#endif
