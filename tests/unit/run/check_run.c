/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <check.h>
#include <stdlib.h>

Suite *suite_folder(void);

int main(void)
{
    SRunner *runner = srunner_create(suite_folder());
    srunner_set_tap(runner, "-");
    srunner_run_all(runner, CK_SILENT);
    srunner_free(runner);
    return EXIT_SUCCESS;
}
