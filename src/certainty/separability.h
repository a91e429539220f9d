/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Readings that cannot be told apart: those whose test statistics have a correlation
 *
 *      rho_ij = T_ij / sqrt(T_ii T_jj),  T = P Q_vv P,  |rho_ij| > 1 - 1e-9
 *
 *  so that an error in one looks like an error in the other. Found without the m^2 entries of T: for random
 *  g ~ N(0, I) the vector y = W'(I - A Q A')g has covariance T, hence y_i / sqrt(T_ii) = +-y_j / sqrt(T_jj)
 *  in every trial exactly when |rho_ij| = 1; the mean of the squared differences over
 *  LW_SEPARABILITY_TRIALS trials estimates 2 (1 - |rho_ij|). Rows are sorted by |y| of the first trial, so
 *  that only neighbours are compared. Readings with no redundancy, or set aside, have no statistic and take
 *  no part. Cost: the solves of the trials and one sort. */
#ifndef LW_CERTAINTY_SEPARABILITY_H
#define LW_CERTAINTY_SEPARABILITY_H

#include "certainty/cofactor.h"
#include "certainty/redundancy.h"

#define LW_SEPARABILITY_TRIALS 4

/** y: rows x LW_SEPARABILITY_TRIALS, owned by the caller; before the factor is handed over. */
lw_status lw_separability_try(lw_cofactor *cofactor, const lw_watch *watch, double **y, lw_error *error);
/** Classes of inseparable readings as pairs (first reading of the class, other reading), in order of the
 *  other; 2 x count numbers, owned by the caller. */
lw_status lw_separability_find(const lw_redundancy *redundancy, const double *y, int64_t **pairs,
                               int64_t *count, lw_error *error);

#endif
