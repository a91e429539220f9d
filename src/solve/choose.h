/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What `auto` takes, with the analysis of a sparse factor kept where one was made. */
#ifndef LW_SOLVE_CHOOSE_H
#define LW_SOLVE_CHOOSE_H

#include "solve/engine.h"

/** As lw_engine_choose; *plan: an analysed Cholesky decomposition (lw_cholesky_plan) when that is the choice,
 * else NULL. */
lw_status lw_choose_planned(lw_system *system, double lambda, const lw_solve_options *options,
                            const lw_watch *watch, lw_engine_choice *out, lw_decomposition **plan,
                            lw_error *error);
/** Abilities that the system and options need of a direct or iterative engine. */
unsigned lw_choose_needs(const lw_system *system, double lambda, const lw_solve_options *options);
/** Dense Householder QR is affordable. */
int lw_choose_dense_fits(const lw_system *system, const lw_watch *watch, int64_t most_places);

#endif
