/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Every damping from one singular value decomposition of the dense standard form
 *
 *      Abar = (I - Q Q') A Z1 = U diag(s) V',  L Z1 has orthonormal columns,  L N = 0,  A N = Q T,  beta =
 * U'b misfit^2 = sum (lambda^2 beta / (s^2 + lambda^2))^2 + ||b - U beta||^2,   size^2 = sum (s beta / (s^2 +
 * lambda^2))^2 trace    = columns(N) + sum s^2 / (s^2 + lambda^2)
 *
 *  Sources: Elden, BIT 17:134-145, 1977; Hansen, Rank-Deficient and Discrete Ill-Posed Problems, SIAM
 * 1998, 2.3, 4.2. */
#ifndef LW_SOLVE_DENSE_SWEEP_H
#define LW_SOLVE_DENSE_SWEEP_H

#include "solve/decomposition.h"

typedef struct lw_dense_sweep lw_dense_sweep;

/** penalty: L in z. LW_UNSOLVABLE when A N has not full rank. Cost: a QR of L and a singular value
 * decomposition. */
lw_status lw_dense_sweep_make(const lw_system *system, const lw_sparse *penalty, const lw_watch *watch,
                              lw_dense_sweep **out, lw_error *error);
/** Points (with trace and slope) and models (columns x count, or NULL) at dampings > 0. */
lw_status lw_dense_sweep_evaluate(const lw_dense_sweep *sweep, int count, const double *lambda,
                                  lw_point *point, double *models, lw_error *error);
void lw_dense_sweep_free(lw_dense_sweep *sweep);

#endif
