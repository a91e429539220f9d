/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_core.h"

#include <stdlib.h>

int main(void)
{
    SRunner *runner = srunner_create(suite_status());
    srunner_add_suite(runner, suite_memory());
    srunner_add_suite(runner, suite_log());
    srunner_add_suite(runner, suite_watch());
    srunner_add_suite(runner, suite_team());
    srunner_add_suite(runner, suite_decimal());
    srunner_add_suite(runner, suite_chance());
    srunner_set_tap(runner, "-");
    srunner_run_all(runner, CK_SILENT);
    srunner_free(runner);
    return EXIT_SUCCESS;
}
