/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Upper bounds of the posterior variances of a damped model from a bidiagonalization, for iterative engines
 * where neither a factor of the normal matrix nor samples are affordable: the covariance of the prior minus a
 * low-rank update. In standard form (solve/standard_form.h), with k steps A'U = V B', U and V
 * reorthogonalized, B = P S R':
 *
 *      (Abar'Abar + lambda^2 I)^-1  <=  (I - V R diag(s^2 / (s^2 + lambda^2)) R'V') / lambda^2
 *
 *  It is the posterior of the data U'b alone, so it can only be too large; k of 1.25 to 3 times the effective
 *  parameters brings it within a few percent, far fewer leave it near the prior.
 *  Sources: Spantini, Solonen, Cui, Martin, Tenorio & Marzouk, SIAM J. Sci. Comput. 37(6):A2451-A2487, 2015;
 *  Calvetti & Somersalo, Introduction to Bayesian Scientific Computing, Springer 2007 (prior-conditioning).
 */
#ifndef LW_CERTAINTY_LOW_RANK_H
#define LW_CERTAINTY_LOW_RANK_H

#include "certainty/cofactor.h"

typedef struct lw_low_rank {
    int64_t steps;    /**< k */
    double effective; /**< sum of s^2 / (s^2 + lambda^2): a lower bound of the effective parameters */
    bool complete;    /**< as many steps as are enough, or the data are exhausted */
} lw_low_rank;

/** Is it possible for this decomposition (iterative, damped, in standard form)? */
bool lw_low_rank_applies(const lw_cofactor *cofactor);
/** variance: columns, z units, before the factor. Steps are made until they are enough, at most as many as
 * half the memory budget holds or `most` (0 no limit). LW_QUALIFIED, reason in error: the prior covariance
 * does not fit. */
lw_status lw_variance_low_rank(lw_cofactor *cofactor, int64_t most, const lw_watch *watch, double *variance,
                               lw_low_rank *info, lw_error *error);

#endif
