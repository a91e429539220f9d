/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_table.h"

#include <stdlib.h>

int main(void)
{
    SRunner *runner = srunner_create(suite_digest());
    srunner_add_suite(runner, suite_csv_read());
    srunner_add_suite(runner, suite_csv_fault());
    srunner_add_suite(runner, suite_csv_write());
    srunner_add_suite(runner, suite_market());
    srunner_add_suite(runner, suite_json());
    srunner_set_tap(runner, "-");
    srunner_run_all(runner, CK_SILENT);
    srunner_free(runner);
    return EXIT_SUCCESS;
}
