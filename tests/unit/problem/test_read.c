/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_problem.h"
#include "folder.h"

#include "core/memory.h"

#include <math.h>
#include <string.h>
#include <unistd.h>

static folder at;

static void setup(void)
{
    at = folder_small();
}

static void teardown(void)
{
    folder_remove(&at);
}

static void same_small(const lw_problem *problem)
{
    static const int64_t start[] = {0, 3, 5};
    static const int32_t index[] = {0, 1, 3, 1, 2};
    static const double value[] = {1, 1, 2, 1, 1}, observed[] = {1, 3, 2.1, 2.2},
                        sigma[] = {0.1, 0.1, 0.1, 0.2};
    ck_assert_int_eq(problem->m, 4);
    ck_assert_int_eq(problem->n, 2);
    ck_assert_str_eq(lw_ids_name(problem->observations, 3), "d");
    ck_assert_str_eq(lw_ids_name(problem->parameters, 1), "y");
    ck_assert_mem_eq(problem->design->start, start, sizeof start);
    ck_assert_mem_eq(problem->design->index, index, sizeof index);
    ck_assert_mem_eq(problem->design->value, value, sizeof value);
    ck_assert_mem_eq(problem->value, observed, sizeof observed);
    ck_assert_mem_eq(problem->sigma, sigma, sizeof sigma);
}

START_TEST(small_problem)
{
    lw_read_options options = {.keep_low = true, .value_unit = "m"};
    lw_problem *problem = folder_read(&at, &options);
    same_small(problem);
    ck_assert(problem->low_kept);
    ck_assert_ptr_null(problem->design->low); /* whole numbers */
    ck_assert_ptr_null(problem->group);
    ck_assert_ptr_null(problem->prior);
    ck_assert_ptr_null(problem->covariance);
    ck_assert_ptr_null(problem->conditions);
    ck_assert_str_eq(problem->value_unit, "m");
    ck_assert_str_eq(problem->parameter_unit, "");
    ck_assert_str_eq(problem->folder, at.path);
    ck_assert_int_eq(problem->input_count, 2);
    ck_assert_int_eq(problem->inputs[0].bytes, (int64_t)strlen(small_observations));
    lw_problem_free(problem);
}
END_TEST

/* sha256sum of GNU coreutils on the same bytes. */
START_TEST(inputs_are_digested)
{
    lw_problem *problem = folder_read(&at, NULL);
    ck_assert_str_eq(problem->inputs[1].sha256,
                     "9275c65785a4ed13d12162d45af305c5d6aa239932853603ebe071b3fb706ffc");
    ck_assert_str_eq(problem->inputs[0].sha256,
                     "83d37485b80e68939f33aebfe4c6a8c8604a807431bb27dba898d6e32238f1f8");
    lw_problem_free(problem);
}
END_TEST

static const struct {
    const char *name, *design, *observations;
} legal[] = {
    {"other order of columns", "coefficient,observation,parameter\n1,a,x\n1,b,x\n1,b,y\n1,c,y\n2,d,x\n",
     NULL},
    {"CRLF", "observation,parameter,coefficient\r\na,x,1\r\nb,x,1\r\nb,y,1\r\nc,y,1\r\nd,x,2\r\n", NULL},
    {"byte-order mark and comments",
     "\xef\xbb\xbf# rays\nobservation,parameter,coefficient\na,x,1\nb,x,1\nb,y,1\nc,y,1\nd,x,2\n",
     "# times\n# in s\nobservation,value,sigma\na,1,0.1\nb,3,0.1\nc,2.1,0.1\nd,2.2,0.2\n"},
    {"quotes", "observation,parameter,coefficient\n\"a\",\"x\",\"1\"\nb,x,1\nb,\"y\",1\nc,y,1\nd,x,2\n",
     NULL},
    {"no final newline", "observation,parameter,coefficient\na,x,1\nb,x,1\nb,y,1\nc,y,1\nd,x,2", NULL},
    {"other notations", "observation,parameter,coefficient\na,x,+1.0\nb,x,1e0\nb,y,10E-1\nc,y,.1e1\nd,x,2.\n",
     NULL},
    {"carried column", NULL,
     "observation,day,value,sigma\na,mon,1,0.1\nb,,3,0.1\nc,tue,2.1,0.1\nd,wed,2.2,0.2\n"},
};

START_TEST(odd_but_legal)
{
    folder_put(&at, "design.csv", legal[_i].design != NULL ? legal[_i].design : small_design);
    folder_put(&at, "observations.csv",
               legal[_i].observations != NULL ? legal[_i].observations : small_observations);
    lw_problem *problem = folder_read(&at, NULL);
    same_small(problem);
    lw_problem_free(problem);
}
END_TEST

START_TEST(without_sigma_with_groups_and_carried)
{
    folder_put(&at, "observations.csv",
               "observation,note,value,group,\"line, no\"\na,,1,g2,1\nb,\"says "
               "\"\"hm\"\"\",3,g1,2\nc,x,2.1,g2,\nd,y,2.2,,4\n");
    lw_problem *problem = folder_read(&at, NULL);
    ck_assert_ptr_null(problem->sigma);
    ck_assert_int_eq(lw_ids_count(problem->group_names), 3);
    ck_assert_int_eq(problem->group[0], 0);
    ck_assert_int_eq(problem->group[1], 1);
    ck_assert_int_eq(problem->group[2], 0);
    ck_assert_int_eq(problem->group[3], 2);
    const lw_carried *carried = &problem->observation_carried;
    ck_assert_int_eq(carried->columns, 2);
    ck_assert_int_eq(carried->rows, 4);
    ck_assert_str_eq(carried->name[1], "line, no");
    ck_assert_str_eq(lw_carried_text(carried, 0, 0), "");
    ck_assert_str_eq(lw_carried_text(carried, 1, 0), "says \"hm\"");
    ck_assert_str_eq(lw_carried_text(carried, 2, 1), "");
    ck_assert_str_eq(lw_carried_text(carried, 3, 1), "4");
    lw_problem_free(problem);
}
END_TEST

/* 0.1 = high + low; the double nearest to 0.1 is larger by 5.551115123125783e-18 (exact: 2^-55 / 5). */
START_TEST(decimals_are_kept)
{
    folder_put(&at, "design.csv", "observation,parameter,coefficient\na,x,0.1\nb,x,1\nc,x,0.5\nd,x,2\n");
    lw_problem *problem = folder_read(&at, NULL);
    ck_assert_double_eq(problem->design->low[0], -0x1p-55 / 5.0);
    ck_assert_double_eq(problem->design->low[1], 0.0);
    ck_assert_double_eq(problem->sigma_low[0], -0x1p-55 / 5.0);
    lw_problem_free(problem);
    lw_read_options options = {.keep_low = false};
    problem = folder_read(&at, &options);
    ck_assert_ptr_null(problem->design->low);
    ck_assert(!problem->low_kept);
    lw_problem_free(problem);
}
END_TEST

START_TEST(repeated_are_added_when_asked)
{
    folder_put(
        &at, "design.csv",
        "observation,parameter,coefficient\na,x,1\nb,x,1\nb,y,1\nc,y,0.5\nd,x,2\nc,y,0.25\nc,y,0.25\n");
    ck_assert_str_eq(
        folder_refused(&at, NULL),
        "design.csv:7:1: found the pair 'c', 'y' again, expected every pair once (--repeated add sums them)\n"
        "design.csv:8:1: found the pair 'c', 'y' again, expected every pair once (--repeated add sums them)");
    lw_read_options options = {.keep_low = true, .add_repeated = true};
    lw_problem *problem = folder_read(&at, &options);
    same_small(problem);
    ck_assert_int_eq(problem->repeated_added, 2);
    lw_problem_free(problem);
}
END_TEST

START_TEST(files_elsewhere)
{
    ck_assert_int_eq(unlink(folder_file(&at, "design.csv")), 0);
    folder_put(&at, "other.csv", small_design);
    char path[400];
    (void)strcpy(path, folder_file(&at, "other.csv"));
    lw_read_options options = {.keep_low = true, .design = path};
    lw_problem *problem = folder_read(&at, &options);
    same_small(problem);
    ck_assert_str_eq(problem->inputs[1].path, path);
    lw_problem_free(problem);
    ck_assert_str_eq(folder_refused(&at, NULL),
                     "design.csv:1:1: found no such file, expected the design "
                     "(observation,parameter,coefficient), as design.csv or design.mtx");
}
END_TEST

START_TEST(matrix_market)
{
    ck_assert_int_eq(unlink(folder_file(&at, "design.csv")), 0);
    folder_put(&at, "observations.csv", "observation,value,sigma\n2,3,0.1\n1,1,0.1\n3,2.1,0.1\n4,2.2,0.2\n");
    folder_put(&at, "design.mtx",
               "%%MatrixMarket matrix coordinate real general\n% rays\n4 3 5\n"
               "1 1 1\n2 1 1\n2 2 1\n3 2 1\n4 1 2\n");
    lw_problem *problem = folder_read(&at, NULL);
    static const int32_t index[] = {0, 1, 3, 0, 2};
    ck_assert_int_eq(problem->n, 3);
    ck_assert_str_eq(lw_ids_name(problem->parameters, 2), "3");
    ck_assert_mem_eq(problem->design->index, index, sizeof index);
    ck_assert_int_eq(problem->design->start[3], 5);
    ck_assert_int_eq(problem->input_count, 2);
    lw_problem_free(problem);
}
END_TEST

static const struct {
    const char *market, *observations, *parameters, *message;
} market_fault[] = {
    {"%%MatrixMarket matrix coordinate real general\n2 1 1\n1 1 1\n", "observation,value\n1,1\n2,1\n", NULL,
     "observations.csv:3:1: found observation '2' with no equation, expected one coefficient at least in the "
     "design"},
    {"%%MatrixMarket matrix coordinate real general\n%\n3 1 2\n1 1 1\n2 1 1\n",
     "observation,value\n1,1\n2,1\n", NULL,
     "design.mtx:3:1: found 3 rows, expected 2, one for each observation"},
    {"%%MatrixMarket matrix coordinate real general\n2 1 2\n1 1 1\n2 1 1\n", "observation,value\n1,1\nb,1\n",
     NULL, "design.mtx:4:1: found the row 2, expected an observation of the observations file"},
    {"%%MatrixMarket matrix coordinate real general\n2 2 2\n1 1 1\n2 2 1\n", "observation,value\n1,1\n2,1\n",
     "parameter\n1\nx\n", "design.mtx:4:1: found the column 2, expected a parameter of the parameters file"},
    {"%%MatrixMarket matrix coordinate real general\n2 1 3\n1 1 1\n2 1 1\n1 1 3\n",
     "observation,value\n1,1\n2,1\n", NULL,
     "design.mtx:5:1: found the pair 1, 1 again, expected every pair once (--repeated add sums them)"},
};

START_TEST(matrix_market_faults)
{
    ck_assert_int_eq(unlink(folder_file(&at, "design.csv")), 0);
    folder_put(&at, "observations.csv", market_fault[_i].observations);
    folder_put(&at, "design.mtx", market_fault[_i].market);
    if (market_fault[_i].parameters != NULL) folder_put(&at, "parameters.csv", market_fault[_i].parameters);
    ck_assert_str_eq(folder_refused(&at, NULL), market_fault[_i].message);
}
END_TEST

START_TEST(two_designs_are_refused)
{
    folder_put(&at, "design.mtx", "%%MatrixMarket matrix coordinate real general\n4 1 1\n1 1 1\n");
    ck_assert_str_eq(folder_refused(&at, NULL),
                     "design.mtx:1:1: found beside design.csv, expected one of the two");
}
END_TEST

START_TEST(no_folder)
{
    lw_error error = {0};
    lw_problem *problem;
    ck_assert_int_eq(lw_problem_read("no/such/folder", NULL, NULL, &problem, &error), LW_BAD_INPUT);
    ck_assert_ptr_null(problem);
    ck_assert_str_eq(error.text, "no/such/folder: found no such folder, expected a problem folder");
    ck_assert_int_eq(lw_problem_read("no/such/folder", NULL, NULL, &problem, NULL), LW_BAD_INPUT);
}
END_TEST

/* Inspect looks at what could be read. */
START_TEST(tolerated_faults)
{
    lw_read_options options = {.keep_low = true, .tolerate = true};
    static lw_error error;
    lw_problem *problem;
    folder_put(&at, "design.csv",
               "observation,parameter,coefficient\na,x,1\nb,x,one\nb,y,1\nzz,y,1\nd,x,2\n");
    ck_assert_int_eq(lw_problem_read(at.path, &options, NULL, &problem, &error), LW_BAD_INPUT);
    ck_assert_int_eq(error.faults, 2);
    ck_assert_ptr_nonnull(problem);
    ck_assert_int_eq(problem->m, 4);
    ck_assert_int_eq(problem->n, 2);
    ck_assert_int_eq(lw_sparse_nonzeros(problem->design), 3);
    lw_problem_free(problem);
    folder_put(&at, "observations.csv", "name\na\n");
    ck_assert_int_eq(lw_problem_read(at.path, &options, NULL, &problem, &error), LW_BAD_INPUT);
    ck_assert_int_eq(problem->m, 0);
    lw_problem_free(problem);
}
END_TEST

static bool fail_at(void *state)
{
    int *left = state;
    return (*left)-- == 0;
}

/* Every allocation in turn fails: no crash, no leak, no memory is said. */
START_TEST(failing_allocations)
{
    folder_put(&at, "parameters.csv", "parameter,prior,fixed,point,axis,note\nx,1,,P,east,n\ny,,2,P,up,\n");
    folder_put(&at, "covariance.csv", "observation_a,observation_b,covariance\na,b,0.001\n");
    folder_put(&at, "penalty.csv", "row,parameter,coefficient\n1,x,1\n1,y,-1\n");
    folder_put(&at, "conditions.csv", "condition,parameter,coefficient,value\nk,x,1,0\nk,y,0.1,\n");
    static lw_error error;
    lw_problem *problem;
    lw_status status = LW_NO_MEMORY;
    int k = 0;
    for (; status == LW_NO_MEMORY && k < 10000; k++) {
        int left = k;
        lw_memory_set_gate(fail_at, &left);
        status = lw_problem_read(at.path, NULL, NULL, &problem, &error);
        lw_memory_set_gate(NULL, NULL);
        ck_assert_msg(status == LW_OK || status == LW_NO_MEMORY, "%d: %s", k, error.text);
    }
    ck_assert_int_gt(k, 20);
    ck_assert_int_eq(status, LW_OK);
    lw_problem_free(problem);
}
END_TEST

Suite *suite_read(void)
{
    Suite *suite = suite_create("read");
    TCase *tests = tcase_create("read");
    tcase_add_checked_fixture(tests, setup, teardown);
    tcase_add_test(tests, small_problem);
    tcase_add_test(tests, inputs_are_digested);
    tcase_add_loop_test(tests, odd_but_legal, 0, (int)(sizeof legal / sizeof *legal));
    tcase_add_test(tests, without_sigma_with_groups_and_carried);
    tcase_add_test(tests, decimals_are_kept);
    tcase_add_test(tests, repeated_are_added_when_asked);
    tcase_add_test(tests, files_elsewhere);
    tcase_add_test(tests, matrix_market);
    tcase_add_loop_test(tests, matrix_market_faults, 0, (int)(sizeof market_fault / sizeof *market_fault));
    tcase_add_test(tests, two_designs_are_refused);
    tcase_add_test(tests, no_folder);
    tcase_add_test(tests, tolerated_faults);
    tcase_add_test(tests, failing_allocations);
    suite_add_tcase(suite, tests);
    return suite;
}
