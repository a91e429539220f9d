/* SPDX-License-Identifier: GPL-3.0-or-later */
/* conditions.csv and penalty.csv. */
#include "check_problem.h"
#include "folder.h"

#include <string.h>

static folder at;

static void setup(void)
{
    at = folder_small();
}

static void teardown(void)
{
    folder_remove(&at);
}

#define CONDITIONS "condition,parameter,coefficient,value\n"
#define PENALTY "row,parameter,coefficient\n"

START_TEST(conditions)
{
    folder_put(&at, "conditions.csv", CONDITIONS "k2,y,1,0.1\nk1,x,0.3,5\nk2,x,-1,\nk1,y,2,5.0\n");
    lw_problem *p = folder_read(&at, NULL);
    static const int32_t index[] = {0, 1, 0, 1};
    static const double value[] = {-1, 0.3, 1, 2}, d[] = {0.1, 5};
    ck_assert_int_eq(p->conditions->rows, 2);
    ck_assert_int_eq(p->conditions->columns, 2);
    ck_assert_str_eq(lw_ids_name(p->condition_names, 0), "k2");
    ck_assert_mem_eq(p->conditions->index, index, sizeof index);
    ck_assert_mem_eq(p->conditions->value, value, sizeof value);
    ck_assert_double_ne(p->conditions->low[1], 0);
    ck_assert_mem_eq(p->condition_value, d, sizeof d);
    ck_assert_double_eq(p->condition_low[0], -0x1p-55 / 5.0);
    lw_problem_free(p);
}
END_TEST

START_TEST(low_parts_of_conditions_are_always_there)
{
    folder_put(&at, "conditions.csv", CONDITIONS "k,x,1,0\n");
    folder_put(&at, "penalty.csv", PENALTY "r,x,1\nr,y,-1\ns,y,0.5\n");
    lw_read_options options = {.keep_low = false};
    lw_problem *p = folder_read(&at, &options);
    ck_assert_ptr_nonnull(p->conditions->low);
    ck_assert_double_eq(p->conditions->low[0], 0);
    ck_assert_int_eq(p->penalty->rows, 2);
    ck_assert_int_eq(lw_sparse_nonzeros(p->penalty), 3);
    ck_assert_str_eq(lw_ids_name(p->penalty_rows, 1), "s");
    ck_assert_int_eq(p->input_count, 4);
    lw_problem_free(p);
}
END_TEST

static const struct {
    const char *file, *text, *message;
} fault[] = {
    {"conditions.csv", CONDITIONS "k,x,1,0\nk,y,1,2\n",
     "conditions.csv:3:7: found '2', expected a blank field, or the value that the condition has already"},
    {"conditions.csv", CONDITIONS "k,x,1,\n",
     "conditions.csv:2:7: found an empty field, expected the value of the condition on one of its rows"},
    {"conditions.csv", CONDITIONS "k,w,1,0\n",
     "conditions.csv:2:3: found the id 'w', which is not there, expected a parameter "
     "of the problem"},
    {"conditions.csv", CONDITIONS "k,x,1,0\nk,x,1,\n",
     "conditions.csv:3:1: found the pair 'k', 'x' again, expected every pair "
     "once (--repeated add sums them)"},
    {"conditions.csv", CONDITIONS ",x,1,0\n", "conditions.csv:2:1: found an empty field, expected an id"},
    {"penalty.csv", PENALTY "r,x,e\n", "penalty.csv:2:5: found 'e' (no number), expected a number"},
    {"penalty.csv", PENALTY,
     "penalty.csv:1:1: found no row under the header, expected one coefficient at least"},
};

START_TEST(each_fault)
{
    folder_put(&at, fault[_i].file, fault[_i].text);
    ck_assert_str_eq(folder_refused(&at, NULL), fault[_i].message);
}
END_TEST

Suite *suite_conditions(void)
{
    Suite *suite = suite_create("conditions");
    TCase *tests = tcase_create("conditions");
    tcase_add_checked_fixture(tests, setup, teardown);
    tcase_add_test(tests, conditions);
    tcase_add_test(tests, low_parts_of_conditions_are_always_there);
    tcase_add_loop_test(tests, each_fault, 0, (int)(sizeof fault / sizeof *fault));
    suite_add_tcase(suite, tests);
    return suite;
}
