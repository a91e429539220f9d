/* SPDX-License-Identifier: GPL-3.0-or-later */
/** How far an error in one reading moves the parameter that it moves most: the entry of largest size of
 *
 *      Q A' P e_i     (for one unit of error; certainty multiplies by the smallest detectable error)
 *
 *  Searched over all parameters while that is cheap (LW_SHIFT_WORK); in larger problems over the parameters
 *  of the reading's own equation (of its block's equations, when correlated), where local errors have their
 *  largest effect. */
#ifndef LW_CERTAINTY_SHIFT_H
#define LW_CERTAINTY_SHIFT_H

#include "certainty/cofactor.h"
#include "certainty/equation.h"

/** Multiplications that a search over all parameters may take; a constant, so that results do not depend on
 *  the machine. */
#define LW_SHIFT_WORK 1e9

typedef struct lw_shift {
    double *size;       /**< rows: signed, unit of the parameter for one unit of the reading; NaN none */
    int64_t *parameter; /**< rows: -1 none */
} lw_shift;

bool lw_shift_is_cheap(const lw_equations *equations, const lw_cofactor *cofactor);
/** Over all parameters, by solves: before lw_cofactor_invert. */
lw_status lw_shift_of_all(const lw_equations *equations, lw_cofactor *cofactor, const lw_watch *watch,
                          lw_shift *out, lw_error *error);
/** Room for `rows` shifts, all unknown. */
lw_status lw_shift_new(int64_t rows, lw_shift *out, lw_error *error);
/** Takes the entry of largest size of S z as the shift of row i; column NULL: z holds all columns. */
void lw_shift_take(const lw_system *system, int64_t i, int64_t count, const int64_t *column, const double *z,
                   lw_shift *out);
/** Over the parameters of the own equations, from entries, for correlated rows (lw_redundancy_new does the
 *  others). */
lw_status lw_shift_of_blocks(const lw_equations *equations, const lw_cofactor *cofactor, lw_shift *out,
                             lw_error *error);
void lw_shift_clear(lw_shift *shift);

#endif
