/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the tests of the iterative kernels share: the 8 x 5 integer system, operators in every layout,
 * comparisons. */
#ifndef LW_TESTS_UNIT_SOLVE_SMALL_SYSTEM_H
#define LW_TESTS_UNIT_SOLVE_SMALL_SYSTEM_H

#include "matrix/operator.h"
#include "solve/iteration.h"

/* Constructed; solutions by exact rational elimination, confirmed to 4e-14 by two independent programs. */
extern const double small_A[8 * 5], small_b[8];
typedef struct small_solution {
    double damp, x[5], residual, norm;
} small_solution;
extern const small_solution small_solutions[4];

typedef enum layout { LAYOUT_FUSED, LAYOUT_TWO_PASS } layout;
typedef struct owned_operator {
    lw_operator *op;
    lw_sparse *matrix;
} owned_operator;
/** From a row-major dense matrix. FUSED: rows when m > n, columns when n > m. */
owned_operator operator_of(int64_t m, int64_t n, const double *A, layout how, lw_team *team);
void owned_operator_clear(owned_operator *owned);

/** Runs a kernel on the 8 x 5 system at all dampings and layouts and compares. */
void kernel_solves_small(lw_iterate *kernel);
/** Random systems, tall and wide, damped and not, against Householder QR (dgels) of [A; damp I]. */
void kernel_agrees_with_qr(lw_iterate *kernel);
/** Zero right-hand side, a right-hand side orthogonal to the range, too few steps, a cancel flag. */
void kernel_ends_well(lw_iterate *kernel);
/** The error bound is above the true error at every number of steps. */
void kernel_bounds_its_error(lw_iterate *kernel);
/** The same bytes for one to four threads, on a system large enough to be cut. */
void kernel_ignores_threads(lw_iterate *kernel);

#endif
