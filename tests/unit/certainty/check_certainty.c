/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_certainty.h"

#include "matrix/dense.h"

#include <stdlib.h>

lw_certainty_options default_options(void)
{
    return (lw_certainty_options){
        .confidence = 0.95, .alpha = 0.001, .power = 0.80, .sigma = true, .reliability = true};
}

adjusted adjust(lw_problem *problem, const char *engine, const double *row_factor, int datum_free,
                double lambda, const lw_certainty_options *options)
{
    adjusted a = {.problem = problem};
    lw_error error = {0};
    lw_engine_choice choice = {0};
    lw_system_options system_options = {.row_factor = row_factor};
    lw_solve_options solve_options = {.engine = engine, .datum_free = datum_free};
    lw_status status = lw_system_new(problem, &system_options, NULL, &a.system, &error);
    ck_assert_msg(status == LW_OK, "system: %s", error.text);
    status = lw_decompose(a.system, lambda, &solve_options, NULL, &choice, &a.decomposition, &error);
    ck_assert_msg(status == LW_OK, "decompose: %s", error.text);
    status = a.decomposition->methods->estimate(a.decomposition, lambda, NULL, &a.estimate, &error);
    ck_assert_msg(status >= LW_OK, "estimate: %s", error.text);
    status = lw_certainty_make(a.decomposition, a.estimate, options, true, NULL, &a.certainty, &error);
    ck_assert_msg(status == LW_OK, "certainty: %s", error.text);
    return a;
}

void adjusted_clear(adjusted *a)
{
    lw_certainty_free(a->certainty);
    lw_estimate_free(a->estimate);
    lw_decomposition_free(a->decomposition);
    lw_system_free(a->system);
}

int main(void)
{
    lw_dense_single_thread();
    SRunner *runner = srunner_create(suite_selected_inverse());
    srunner_add_suite(runner, suite_levelling());
    srunner_add_suite(runner, suite_networks());
    srunner_add_suite(runner, suite_reliability());
    srunner_add_suite(runner, suite_outlier());
    srunner_add_suite(runner, suite_damped());
    srunner_add_suite(runner, suite_variance_components());
    srunner_add_suite(runner, suite_memory_faults());
    srunner_add_suite(runner, suite_probe());
    srunner_add_suite(runner, suite_sigma_kinds());
    srunner_set_tap(runner, "-");
    srunner_run_all(runner, CK_SILENT);
    srunner_free(runner);
    return EXIT_SUCCESS;
}
