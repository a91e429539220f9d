/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_problem.h"
#include "folder.h"

#include "core/memory.h"
#include "problem/check.h"

#include <string.h>

static folder at;
static lw_problem *problem;
static lw_check check;
static lw_log warnings;

static void setup(void)
{
    at = folder_new();
    problem = NULL;
    memset(&check, 0, sizeof check);
    memset(&warnings, 0, sizeof warnings);
}

static void teardown(void)
{
    lw_check_clear(&check);
    lw_log_clear(&warnings);
    lw_problem_free(problem);
    folder_remove(&at);
}

static void look(const char *design, const char *observations, const char *parameters)
{
    folder_put(&at, "design.csv", design);
    folder_put(&at, "observations.csv", observations);
    if (parameters != NULL) folder_put(&at, "parameters.csv", parameters);
    problem = folder_read(&at, NULL);
    ck_assert_int_eq(lw_check_problem(problem, &warnings, &check, NULL), LW_OK);
}

/* Two parts that only a held parameter joins, one parameter alone, one reading of held parameters only. */
START_TEST(disconnected)
{
    look("observation,parameter,coefficient\n"
         "1,a,1\n1,f,-1\n2,b,1\n2,a,-1\n3,c,1\n3,f,-1\n4,f,1\n5,c,1\n5,a,0\n",
         "observation,value,sigma\n1,1,1\n2,1,1\n3,1,1\n4,1,1\n5,2,1\n",
         "parameter,fixed,prior_sigma\na,,\nb,,\nf,0,\nc,,\nalone,,\nheld_near,,1\n");
    const lw_components *parts = &check.components;
    static const int32_t of_parameter[] = {0, 0, -1, 1, 2, 3}, of_observation[] = {0, 0, 1, -1, 1};
    ck_assert_int_eq(parts->count, 4);
    ck_assert_mem_eq(parts->of_parameter, of_parameter, sizeof of_parameter);
    ck_assert_mem_eq(parts->of_observation, of_observation, sizeof of_observation);
    ck_assert_int_eq(parts->parameters[0], 2);
    ck_assert_int_eq(parts->observations[0], 2);
    ck_assert_int_eq(parts->observations[1], 2);
    ck_assert_int_eq(parts->observations[2], 0);
    ck_assert_int_eq(check.fixed, 1);
    ck_assert_int_eq(check.weighted_priors, 1);
    ck_assert_int_eq(check.degrees_of_freedom, 5 + 1 - 5);
    ck_assert_int_eq(check.zero_row_count, 1);
    ck_assert_int_eq(check.zero_rows[0], 3);
    ck_assert_int_eq(check.zero_column_count, 1);
    ck_assert_int_eq(check.zero_columns[0], 4);
    ck_assert_int_eq(check.single_hit_count, 1);
    ck_assert_int_eq(check.single_hit[0], 1);
    ck_assert_int_eq(check.weakest_count, 5);
    ck_assert_int_eq(check.weakest[0], 4);
    ck_assert_int_eq(check.weakest[1], 5);
    ck_assert_int_eq(check.weakest[2], 1);
}
END_TEST

START_TEST(hits_and_coverage)
{
    look("observation,parameter,coefficient\n1,a,-2\n2,a,0.5\n2,b,0\n3,b,3\n",
         "observation,value\n1,1\n2,1\n3,-7\n", NULL);
    ck_assert_int_eq(check.nonzeros, 4);
    ck_assert_int_eq(check.hits[0], 2);
    ck_assert_int_eq(check.hits[1], 1);
    ck_assert_double_eq(check.coverage[0], 2.5);
    ck_assert_double_eq(check.coverage[1], 3);
    ck_assert_double_eq(check.coefficient_range.smallest, 0.5);
    ck_assert_double_eq(check.coefficient_range.median, 2);
    ck_assert_double_eq(check.value_range.largest, 7);
    ck_assert_int_eq(check.sigma_range.count, 0);
    ck_assert_uint_eq(warnings.count, 0);
}
END_TEST

START_TEST(penalty_and_conditions_reach)
{
    folder_put(&at, "penalty.csv", "row,parameter,coefficient\n1,p,1\n1,q,0\n");
    folder_put(&at, "conditions.csv", "condition,parameter,coefficient,value\nk,c,2,1\n");
    look("observation,parameter,coefficient\n1,a,1\n", "observation,value\n1,1\n", "parameter\na\np\nq\nc\n");
    ck_assert_int_eq(check.conditions, 1);
    ck_assert_int_eq(check.zero_column_count, 1);
    ck_assert_int_eq(check.zero_columns[0], 2);
}
END_TEST

/* Rows 1, 3, 6 are one equation up to factors (0.1 : 0.3 = -0.2 : -0.6 only to rounding); 2 and 4 another; 5
 * differs from them in the tenth digit. */
START_TEST(duplicate_rows)
{
    look("observation,parameter,coefficient\n1,a,0.1\n1,b,0.3\n2,b,1\n2,c,2\n3,a,-0.2\n3,b,-0.6\n4,b,5\n4,c,"
         "10\n"
         "5,b,1\n5,c,2.0000000001\n6,b,3\n6,a,1\n6,c,0\n",
         "observation,value\n1,1\n2,1\n3,1\n4,1\n5,1\n6,1\n", NULL);
    static const int64_t pairs[] = {0, 2, 1, 3, 0, 5};
    ck_assert_int_eq(check.duplicate_row_count, 3);
    ck_assert_mem_eq(check.duplicate_rows, pairs, sizeof pairs);
    ck_assert_int_eq(check.duplicate_column_count, 0);
}
END_TEST

START_TEST(duplicate_columns)
{
    look("observation,parameter,coefficient\n1,a,1\n1,b,-2\n1,c,3\n1,d,7\n2,a,2\n2,b,-4\n2,c,6\n2,d,14\n3,e,"
         "1\n3,c,0\n",
         "observation,value\n1,1\n2,1\n3,1\n", "parameter,fixed\na,\nb,\nc,\nd,1\ne,\nz1,\nz2,\n");
    static const int64_t pairs[] = {0, 1, 0, 2};
    ck_assert_int_eq(check.duplicate_column_count, 2);
    ck_assert_mem_eq(check.duplicate_columns, pairs, sizeof pairs);
}
END_TEST

START_TEST(units_mixed_up)
{
    look("observation,parameter,coefficient\n1,a,1\n2,a,1\n3,a,1\n4,a,1e9\n5,a,1\n",
         "observation,value,sigma,group\n1,12.5,0.001,m\n2,13.5,0.001,m\n3,13.9,0.001,m\n4,13011,100,mm\n5,1,"
         "1,other\n",
         NULL);
    ck_assert_uint_eq(warnings.count, 3);
    ck_assert_ptr_nonnull(strstr(warnings.text[0], "'m' and 'mm'"));
    ck_assert_ptr_nonnull(strstr(warnings.text[1], "the sigmas range"));
    ck_assert_ptr_nonnull(strstr(warnings.text[2], "the coefficients range"));
}
END_TEST

static bool fail_at(void *state)
{
    int *left = state;
    return (*left)-- == 0;
}

START_TEST(failing_allocations)
{
    look("observation,parameter,coefficient\n1,a,1\n2,a,2\n3,b,1\n",
         "observation,value,group\n1,1,g\n2,1,h\n3,2,g\n", NULL);
    lw_status status = LW_NO_MEMORY;
    int k = 0;
    for (; status == LW_NO_MEMORY && k < 1000; k++) {
        int left = k;
        lw_check_clear(&check);
        lw_memory_set_gate(fail_at, &left);
        status = lw_check_problem(problem, &warnings, &check, NULL);
        lw_memory_set_gate(NULL, NULL);
    }
    ck_assert_int_eq(status, LW_OK);
    ck_assert_int_gt(k, 10);
}
END_TEST

Suite *suite_check(void)
{
    Suite *suite = suite_create("check");
    TCase *tests = tcase_create("check");
    tcase_add_checked_fixture(tests, setup, teardown);
    tcase_add_test(tests, disconnected);
    tcase_add_test(tests, hits_and_coverage);
    tcase_add_test(tests, penalty_and_conditions_reach);
    tcase_add_test(tests, duplicate_rows);
    tcase_add_test(tests, duplicate_columns);
    tcase_add_test(tests, units_mixed_up);
    tcase_add_test(tests, failing_allocations);
    suite_add_tcase(suite, tests);
    return suite;
}
