/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Cofactors Q_jj correctly to about 30 digits: each column of Q by refinement of the exact augmented system
 * with the right-hand side (0, -e_j, 0).  Source: Bjorck, BIT 7:257-278, 1967. */
#ifndef LW_SOLVE_VARIANCE_H
#define LW_SOLVE_VARIANCE_H

#include "core/decimal.h"
#include "solve/decomposition.h"

/** variance (columns): Q_jj in model units for the stated weights, in double-double. *worst: the largest
 * relative size of a last correction. Does nothing and returns LW_QUALIFIED when the cost, columns x nonzeros
 * of the stacked matrix (dense: x rows x columns), is above `most_cost` (0: 5e7, about a second) or the
 * decomposition does not refine; the caller then takes the entries of inverse_entries and says so.
 * LW_NOT_CONVERGED: refined as far as possible. */
lw_status lw_solve_variances(lw_decomposition *decomposition, double lambda, double most_cost,
                             const lw_watch *watch, lw_decimal *variance, double *worst, lw_error *error);

#endif
