/** Golub-Kahan bidiagonalization of A, started from b, for k right-hand sides in lockstep:
 *
 *      beta_1 u_1 = b,                            alpha_1 v_1 = A'u_1
 *      beta_{i+1} u_{i+1} = A v_i - alpha_i u_i,  alpha_{i+1} v_{i+1} = A'u_{i+1} - beta_{i+1} v_i
 *
 *  One pass over the matrix a step where the operator offers it: normalization is a scalar that is applied
 * late. With column fusion the product A v_{i+1} is made ahead, in the pass that makes v_{i+1}. No
 * reorthogonalization: rounding only delays convergence, and at a few hundred steps one Gram-Schmidt pass
 * costs ten times the step itself. Sources: Golub & Kahan, SIAM J. Numer. Anal. 2(2):205-224, 1965; Paige &
 * Saunders, ACM TOMS 8(1):43-71, 1982, "Bidiag 1". */
#ifndef LW_SOLVE_GOLUB_KAHAN_H
#define LW_SOLVE_GOLUB_KAHAN_H

#include "matrix/operator.h"

#include <stdbool.h>

/** Most right-hand sides in lockstep. */
#define LW_LOCKSTEP 16

typedef struct lw_golub_kahan {
    lw_operator *op; /**< borrowed */
    int k;     /**< right-hand sides that are stepped; may be lowered on the way: the later ones then rest */
    double *u; /**< rows x k, u_{i+1} times u_scale */
    double *v; /**< columns x k, v_{i+1} times v_scale */
    double *w; /**< the side product of the fused pass */
    double *product; /**< rows x k, A v, where the operator has no fused step; else NULL */
    double u_scale[LW_LOCKSTEP], v_scale[LW_LOCKSTEP];
    double alpha[LW_LOCKSTEP],
        beta[LW_LOCKSTEP];      /**< alpha_{i+1}, beta_{i+1} of the latest step; 0: exhausted */
    double square[LW_LOCKSTEP]; /**< sum of squares of all alpha and beta but beta_1: about ||A||_F^2 */
    bool ended[LW_LOCKSTEP];
} lw_golub_kahan;

/** Makes beta_1, alpha_1, v_1. b: rows x k, copied. Cost: one adjoint product (column fusion: one fused
 * pass). */
lw_status lw_golub_kahan_start(lw_golub_kahan *gk, lw_operator *op, int k, const double *b, lw_error *error);
void lw_golub_kahan_clear(lw_golub_kahan *gk);
/** Makes beta_{i+1}, alpha_{i+1}, v_{i+1}. A right-hand side whose space is exhausted has ended: its u and v
 * are zero. */
void lw_golub_kahan_step(lw_golub_kahan *gk);
/** v_{i+1} of right-hand side c, normalized, to out (columns). */
void lw_golub_kahan_direction(const lw_golub_kahan *gk, int c, double *out);
/** Bytes for k right-hand sides. */
int64_t lw_golub_kahan_bytes(const lw_operator *op, int k);

#endif
