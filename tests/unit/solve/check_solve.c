/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_solve.h"

#include <stdlib.h>

int main(void)
{
    SRunner *runner = srunner_create(suite_bounds());
    srunner_add_suite(runner, suite_cgls());
    srunner_add_suite(runner, suite_cholesky());
    srunner_add_suite(runner, suite_conditions());
    srunner_add_suite(runner, suite_datum());
    srunner_add_suite(runner, suite_dense());
    srunner_add_suite(runner, suite_engine());
    srunner_add_suite(runner, suite_exact());
    srunner_add_suite(runner, suite_golub_kahan());
    srunner_add_suite(runner, suite_krylov());
    srunner_add_suite(runner, suite_lsmr());
    srunner_add_suite(runner, suite_lsqr());
    srunner_add_suite(runner, suite_nonlinear_cg());
    srunner_add_suite(runner, suite_qr());
    srunner_add_suite(runner, suite_robust());
    srunner_add_suite(runner, suite_standard_form());
    srunner_add_suite(runner, suite_stacked());
    srunner_set_tap(runner, "-");
    srunner_run_all(runner, CK_SILENT);
    srunner_free(runner);
    return EXIT_SUCCESS;
}
