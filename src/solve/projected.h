/** The damped problem projected on a Krylov space of k steps:
 *
 *      minimise ||B y - beta_1 e_1||^2 + lambda^2 ||y||^2,   B (k+1) x k lower bidiagonal: alpha_i,
 * beta_{i+1}
 *
 *  by Givens rotations of [B; lambda I], O(k) for each damping, eight dampings at a time. In exact arithmetic
 * the norms are those of the whole problem with x = V y; rounding changes them no more than the error bound
 * says. Sources: Paige & Saunders, ACM TOMS 8(1):43-71, 1982; Golub & Meurant, Matrices, Moments and
 * Quadrature, 2010, ch. 4, 10. */
#ifndef LW_SOLVE_PROJECTED_H
#define LW_SOLVE_PROJECTED_H

#include "core/status.h"

#include <stdint.h>

/** alpha[0 .. k], beta[0 .. k]: alpha_1 .. alpha_{k+1}, beta_1 .. beta_{k+1}. */
typedef struct lw_bidiagonal {
    int64_t k, room;
    double *alpha, *beta;
} lw_bidiagonal;

/** Appends alpha_{i}, beta_{i}; the first call gives alpha_1, beta_1 and k = 0. */
lw_status lw_bidiagonal_add(lw_bidiagonal *B, double alpha, double beta, lw_error *error);
void lw_bidiagonal_clear(lw_bidiagonal *B);
/** Largest singular value of B, to three digits or better (power iteration). */
double lw_bidiagonal_largest(const lw_bidiagonal *B);

typedef struct lw_projected {
    double misfit;     /**< ||B y - beta_1 e_1|| */
    double size;       /**< ||y|| */
    double slope;      /**< d(size^2)/d lambda = -4 lambda y'(B'B + lambda^2)^-1 y */
    double gradient;   /**< ||A'r - lambda^2 x|| = alpha_{k+1} beta_{k+1} |y_k| */
    double influence;  /**< b'H b, H = A (A'A + lambda^2)^-1 A': mean of the lower and the upper bound of the
                          quadrature */
    double gap;        /**< half of what lies between these bounds */
    double influence2; /**< ||H b||^2 */
} lw_projected;

/** y: k x count, or NULL. count dampings, > 0 (or 0 with B of full rank). k >= 1. */
lw_status lw_projected_solve(const lw_bidiagonal *B, int64_t count, const double *lambda, lw_projected *out,
                             double *y, lw_error *error);

#endif
