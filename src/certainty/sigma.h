/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Variances of the parameters in z, before the variance factor: diagonals of
 *
 *      Q                 undamped, or damped with the penalty as a true prior (posterior)
 *      Q A'A Q           damped, data noise carried through (noise)
 *
 *  exactly from entries or columns of Q, or by samples: perturb data (and prior) by N(0, I), solve as a
 *  block, and take the mean square; the relative error of a standard deviation from N samples is 1 / sqrt(2
 *  N).
 *  Source: Tarantola, Inverse Problem Theory, SIAM 2005, 2.3; Bardsley, Solonen, Haario & Laine, SIAM J.
 *  Sci. Comput. 36(4), 2014 (randomize, then optimize: exact for linear problems). */
#ifndef LW_CERTAINTY_SIGMA_H
#define LW_CERTAINTY_SIGMA_H

#include "certainty/cofactor.h"

/** Samples when none were asked for: 7 % error of a standard deviation. */
#define LW_SIGMA_SAMPLES 100
/** Time units (about nanoseconds) that exact noise variances may take; beyond, samples. */
#define LW_SIGMA_WORK 1.2e11

/** diag Q; after lw_cofactor_invert. variance: columns. */
void lw_variance_of_entries(const lw_cofactor *cofactor, double *variance);
bool lw_variance_noise_is_cheap(const lw_cofactor *cofactor);
/** diag Q A'A Q by columns, before the factor is handed over. */
lw_status lw_variance_of_noise(lw_cofactor *cofactor, const lw_watch *watch, double *variance,
                               lw_error *error);
/** Mean squares of `samples` solutions; posterior: prior perturbed too. */
lw_status lw_variance_by_samples(lw_cofactor *cofactor, bool posterior, int samples, const lw_watch *watch,
                                 double *variance, lw_error *error);

#endif
