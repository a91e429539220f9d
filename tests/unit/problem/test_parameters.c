/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_problem.h"
#include "folder.h"

#include <math.h>
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

START_TEST(everything_that_is_known)
{
    folder_put(
        &at, "parameters.csv",
        "parameter,prior,prior_sigma,lower,upper,fixed,damp_weight,datum,point,axis,region,x,y,z,site\n"
        "y,0.1,0.5,-1,2,,,yes,P,east,r1,1,2,,north field\n"
        "x,,,,,3.3,,no,P,north,,,,-5,\n"
        "w,7,2,8,,,4,,Q,up,r2,0,0,0,q\n"
        "v,,,,9,,,yes,,,r1,1,1,1,v\n");
    lw_problem *p = folder_read(&at, NULL);
    static const double damp_weight[] = {0, 1, 4, 1}, prior[] = {0.1, 0, 7, 0};
    static const int8_t datum[] = {1, 0, 0, 1},
                        axis[] = {LW_AXIS_EAST, LW_AXIS_NORTH, LW_AXIS_UP, LW_AXIS_NONE};
    static const int32_t point[] = {0, 0, 1, -1}, region[] = {0, -1, 1, 0};
    ck_assert_int_eq(p->n, 4);
    ck_assert_str_eq(lw_ids_name(p->parameters, 0), "y");
    ck_assert_mem_eq(p->prior, prior, sizeof prior);
    ck_assert_double_eq(p->prior_low[0], -0x1p-55 / 5.0);
    ck_assert_double_eq(p->prior_sigma[0], 0.5);
    ck_assert(isnan(p->prior_sigma[1]));
    ck_assert_double_eq(p->lower[0], -1);
    ck_assert(isinf(p->lower[1]) && p->lower[1] < 0);
    ck_assert(isinf(p->upper[2]) && p->upper[2] > 0);
    ck_assert(!p->fixed[0] && p->fixed[1] && !p->fixed[2]);
    ck_assert_double_eq(p->fixed_value[1], 3.3);
    ck_assert_double_ne(p->fixed_low[1], 0);
    ck_assert_double_eq(p->fixed_value[0], 0);
    ck_assert_mem_eq(p->damp_weight, damp_weight, sizeof damp_weight);
    ck_assert_mem_eq(p->datum, datum, sizeof datum);
    ck_assert_mem_eq(p->axis, axis, sizeof axis);
    ck_assert_mem_eq(p->point, point, sizeof point);
    ck_assert_mem_eq(p->region, region, sizeof region);
    ck_assert_str_eq(lw_ids_name(p->point_names, 1), "Q");
    ck_assert_double_eq(p->coordinate[1][0], 2);
    ck_assert(isnan(p->coordinate[2][0]));
    ck_assert_double_eq(p->coordinate[2][1], -5);
    ck_assert_int_eq(p->parameter_carried.columns, 1);
    ck_assert_str_eq(lw_carried_text(&p->parameter_carried, 0, 0), "north field");
    ck_assert_int_eq(p->design->start[1], 2); /* y stands first */
    ck_assert_int_eq(p->design->start[4], 5); /* w and v have no equation, which is no fault of the files */
    lw_problem_free(p);
}
END_TEST

START_TEST(columns_that_are_absent)
{
    folder_put(&at, "parameters.csv", "parameter,prior_sigma,datum\nx,,\ny,2,\n");
    lw_problem *p = folder_read(&at, NULL);
    ck_assert_ptr_null(p->prior);
    ck_assert_ptr_null(p->fixed);
    ck_assert_ptr_null(p->lower);
    ck_assert_ptr_null(p->datum); /* all blank: says nothing */
    ck_assert_ptr_null(p->point);
    ck_assert_ptr_null(p->coordinate[0]);
    ck_assert_double_eq(p->damp_weight[0], 1);
    ck_assert_double_eq(p->damp_weight[1], 0);
    lw_problem_free(p);
}
END_TEST

static const struct {
    const char *text, *message;
} fault[] = {
    {"parameter\nx\n",
     "design.csv:4:3: found the id 'y', which is not there, expected a parameter of the parameters file\n"
     "design.csv:5:3: found the id 'y', which is not there, expected a parameter of the parameters file"},
    {"parameter,lower,upper\nx,1,2\ny,3,2.5\n",
     "parameters.csv:3:5: found the upper bound '2.5', expected at least the lower bound '3'"},
    {"parameter,prior_sigma\nx,0\ny,-1\n", "parameters.csv:2:3: found '0', expected a positive number\n"
                                           "parameters.csv:3:3: found '-1', expected a positive number"},
    {"parameter,fixed,prior_sigma\nx,1,\ny,2,1\n",
     "parameters.csv:3:3: found '2' beside a prior_sigma, expected either fixed or prior_sigma: a held value "
     "is exact and "
     "takes no weighted prior"},
    {"parameter,damp_weight\nx,-2\ny,0\n",
     "parameters.csv:2:3: found '-2', expected a number that is not negative"},
    {"parameter,datum\nx,yes\ny,true\n", "parameters.csv:3:3: found 'true', expected yes or no"},
    {"parameter,axis\nx,east\ny,e\n", "parameters.csv:3:3: found 'e', expected east, north, up, x, y or z"},
    {"parameter,x\nx,1\ny,1;5\n", "parameters.csv:3:3: found '1;5' (no number), expected a number"},
    {"parameter,prior\nx,1\ny,2\nx,1\n",
     "parameters.csv:4:1: found parameter 'x' again, expected every parameter once"},
    {"parameter,prior\nx,1\ny,2\n,1\n", "parameters.csv:4:1: found an empty field, expected an id"},
    {"parameter,lower\nx,-inf\ny,2\n",
     "parameters.csv:2:3: found '-inf' (a number that is not finite), expected a number"},
    {"parameter\n", "parameters.csv:1:1: found no row under the header, expected one parameter at least"},
};

START_TEST(each_fault)
{
    folder_put(&at, "parameters.csv", fault[_i].text);
    ck_assert_str_eq(folder_refused(&at, NULL), fault[_i].message);
}
END_TEST

START_TEST(missing_column_is_told)
{
    folder_put(&at, "parameters.csv", "name,prior\nx,1\n");
    const char *message = folder_refused(&at, NULL);
    ck_assert_ptr_nonnull(strstr(message, "parameters.csv:1:1: no column 'parameter'"));
    ck_assert_ptr_null(strchr(message, '\n'));
}
END_TEST

Suite *suite_parameters(void)
{
    Suite *suite = suite_create("parameters");
    TCase *tests = tcase_create("parameters");
    tcase_add_checked_fixture(tests, setup, teardown);
    tcase_add_test(tests, everything_that_is_known);
    tcase_add_test(tests, columns_that_are_absent);
    tcase_add_loop_test(tests, each_fault, 0, (int)(sizeof fault / sizeof *fault));
    tcase_add_test(tests, missing_column_is_told);
    suite_add_tcase(suite, tests);
    return suite;
}
