/* SPDX-License-Identifier: GPL-3.0-or-later */
#ifndef CHECK_SOLVE_H
#define CHECK_SOLVE_H

#include <check.h>

Suite *suite_bounds(void);
Suite *suite_cgls(void);
Suite *suite_cholesky(void);
Suite *suite_conditions(void);
Suite *suite_datum(void);
Suite *suite_dense(void);
Suite *suite_engine(void);
Suite *suite_exact(void);
Suite *suite_golub_kahan(void);
Suite *suite_krylov(void);
Suite *suite_lsmr(void);
Suite *suite_lsqr(void);
Suite *suite_nonlinear_cg(void);
Suite *suite_qr(void);
Suite *suite_robust(void);
Suite *suite_stacked(void);
Suite *suite_standard_form(void);

#endif
