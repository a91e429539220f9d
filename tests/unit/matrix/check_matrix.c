/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "matrix/dense.h"

#include <check.h>

Suite *suite_vector(void);
Suite *suite_sparse(void);
Suite *suite_operator(void);
Suite *suite_product(void);
Suite *suite_dense(void);
Suite *suite_suitesparse(void);

int main(void)
{
    lw_dense_single_thread();
    SRunner *runner = srunner_create(suite_vector());
    srunner_add_suite(runner, suite_sparse());
    srunner_add_suite(runner, suite_operator());
    srunner_add_suite(runner, suite_product());
    srunner_add_suite(runner, suite_dense());
    srunner_add_suite(runner, suite_suitesparse());
    srunner_set_tap(runner, "-");
    srunner_run_all(runner, CK_SILENT);
    srunner_free(runner);
    return 0;
}
