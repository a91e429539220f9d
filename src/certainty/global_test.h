/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The global test of the adjustment: is chi_square what the stated sigmas let expect? Two-sided at alpha =
 *  1 - confidence.
 *
 *      degrees of freedom = observations used + weighted priors + conditions - rank     undamped
 *                         = observations used - effective parameters                    damped; no test then
 *
 *  Source: Baarda 1968; Teunissen, Testing Theory, 2000. */
#ifndef LW_CERTAINTY_GLOBAL_TEST_H
#define LW_CERTAINTY_GLOBAL_TEST_H

#include "certainty/certainty.h"

/** rank: < 0 unknown; effective: parameters when damped, NaN unknown. */
void lw_global_test_make(const lw_system *system, const lw_point *point, int64_t rank, double effective,
                         double confidence, lw_global_test *out);
/** A sentence of what the verdict means and what to look at; in `text`. */
void lw_global_test_advice(const lw_global_test *test, char text[400]);

#endif
