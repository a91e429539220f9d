/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <check.h>

Suite *suite_quantize(void);
Suite *suite_words(void);
Suite *suite_data(void);
Suite *suite_report(void);

int main(void)
{
    SRunner *runner = srunner_create(suite_quantize());
    srunner_add_suite(runner, suite_words());
    srunner_add_suite(runner, suite_data());
    srunner_add_suite(runner, suite_report());
    srunner_set_tap(runner, "-");
    srunner_run_all(runner, CK_SILENT);
    srunner_free(runner);
    return 0;
}
