/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the tests of the direct engines share: a problem solved by a named engine, and comparisons. */
#ifndef LW_TESTS_UNIT_SOLVE_SOLVING_H
#define LW_TESTS_UNIT_SOLVE_SOLVING_H

#include "../support.h"
#include "solve/engine.h"

typedef struct solved {
    lw_problem *problem;
    lw_system *system;
    lw_decomposition *decomposition;
    lw_engine_choice choice;
    lw_estimate *estimate;
    lw_status status;
    lw_error error;
    lw_log log;
} solved;

/** Takes over the problem; penalty own when the problem has one. Stops at the first failure with its status.
 */
solved solve_problem(lw_problem *problem, double lambda, const lw_solve_options *options);
solved solve_by(lw_problem *problem, const char *engine, double lambda);
void solved_clear(solved *s);

/** |a - b| <= tolerance max(1, |b|). */
int near(double a, double b, double tolerance);
/** Largest |a_i - b_i| / max |b_i|. */
double apart(int64_t n, const double *a, const double *b);
/** Q in model units from inverse_entries: full n x n (columns); works for dense sources and factor views. */
double *full_inverse(solved *s, double lambda);
/** m x n with entries in [-1, 1), a tenth of them not zero, each row and column reached. */
double *random_matrix(int64_t m, int64_t n, uint64_t seed);
double *random_vector(int64_t n, uint64_t seed);

/** The levelling net of six lines and four points (see test_dense.c), with every height unknown. */
lw_problem *six_lines(void);

#endif
