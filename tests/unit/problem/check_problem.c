/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_problem.h"

#include <stdlib.h>

int main(void)
{
    SRunner *runner = srunner_create(suite_ids());
    srunner_add_suite(runner, suite_triplets());
    srunner_add_suite(runner, suite_read());
    srunner_add_suite(runner, suite_faults());
    srunner_add_suite(runner, suite_parameters());
    srunner_add_suite(runner, suite_covariance());
    srunner_add_suite(runner, suite_conditions());
    srunner_add_suite(runner, suite_range());
    srunner_add_suite(runner, suite_check());
    srunner_add_suite(runner, suite_pack());
    srunner_add_suite(runner, suite_penalty());
    srunner_add_suite(runner, suite_system());
    srunner_set_tap(runner, "-");
    srunner_run_all(runner, CK_SILENT);
    srunner_free(runner);
    return EXIT_SUCCESS;
}
