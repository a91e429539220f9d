/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_tradeoff.h"

#include "matrix/dense.h"

#include <stdlib.h>

int main(void)
{
    lw_dense_single_thread();
    SRunner *runner = srunner_create(suite_search());
    srunner_add_suite(runner, suite_corner());
    srunner_add_suite(runner, suite_gcv());
    srunner_add_suite(runner, suite_discrepancy());
    srunner_add_suite(runner, suite_choose());
    srunner_add_suite(runner, suite_sweep());
    srunner_add_suite(runner, suite_reference());
    srunner_set_tap(runner, "-");
    srunner_run_all(runner, CK_SILENT);
    srunner_free(runner);
    return EXIT_SUCCESS;
}
