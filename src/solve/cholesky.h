/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The sparse Cholesky engine: N = M'M = A'A + lambda^2 L'L + ... of the equilibrated matrix, analysed once,
 * factored for each damping. Solutions by the augmented formulas, refined on the exact system by default.
 *
 *  decompose returns LW_NOT_CONVERGED with *out NULL when N is beyond double precision (no clear null space
 * and no factor): lw_decompose then goes on with QR. */
#ifndef LW_SOLVE_CHOLESKY_H
#define LW_SOLVE_CHOLESKY_H

#include "solve/engine.h"

extern const lw_engine lw_engine_cholesky;

/** Everything up to the analysis: *out has no factor yet. size: what the factor will take. */
lw_status lw_cholesky_plan(lw_system *system, double lambda, const lw_solve_options *options,
                           const lw_watch *watch, lw_decomposition **out, lw_cholesky_size *size,
                           lw_error *error);
/** The factor at lambda; frees *plan and sets it NULL when it fails. */
lw_status lw_cholesky_begin(lw_decomposition **plan, double lambda, const lw_watch *watch, lw_error *error);

#endif
