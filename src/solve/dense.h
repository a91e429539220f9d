/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The dense engine: Householder QR with column pivoting of M = [A; lambda L; ...] (rank test, null space,
 * refinement), and for many dampings one singular value decomposition of the standard form (dense_sweep.h).
 */
#ifndef LW_SOLVE_DENSE_H
#define LW_SOLVE_DENSE_H

#include "solve/engine.h"

extern const lw_engine lw_engine_dense;

#endif
