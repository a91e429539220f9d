/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The equations of a system row by row, unwhitened, in the scaled coordinates z:
 *
 *      row i:  sum_k a[k] z[column[k]],  unit of the reading; held parameters left out
 *
 *  with the weight matrix P of a row or of its block of correlated readings. A row factor w divides sigma;
 *  a reading that is set aside (w = 0) keeps its equation and its sigma, and has no weight. */
#ifndef LW_CERTAINTY_EQUATION_H
#define LW_CERTAINTY_EQUATION_H

#include "problem/system.h"

#include <stdbool.h>

typedef struct lw_equations {
    const lw_system *system;
    lw_sparse *by_row; /**< parameters x observations: the design transposed */
    int64_t longest;   /**< most coefficients of a row */
} lw_equations;

lw_status lw_equations_new(const lw_system *system, lw_equations *out, lw_error *error);
void lw_equations_clear(lw_equations *equations);

/** Coefficients of row i: returns their number; column and a take up to `longest`. */
int64_t lw_equation_row(const lw_equations *equations, int64_t i, int64_t *column, double *a);
/** Stated sigma of row i (1 where none was given), without its row factor. */
double lw_equation_sigma(const lw_equations *equations, int64_t i);
/** Row factor, 1 where there is none. */
double lw_equation_factor(const lw_equations *equations, int64_t i);
/** Block of row i, -1 when it is uncorrelated. */
int64_t lw_equation_block(const lw_equations *equations, int64_t i);

/** Members of block k that are in use, and P = (Sigma with its diagonal divided by w_i^2)^-1 (size x size,
 *  column-major); arrays owned by the caller. Errors: LW_NO_MEMORY, LW_SYSTEM. */
lw_status lw_equation_weights(const lw_equations *equations, int64_t block, int64_t *size, int64_t **member,
                              double **weights, lw_error *error);

#endif
