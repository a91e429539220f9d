/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Every refusal with its place, what was found and what was expected. */
#include "check_problem.h"
#include "folder.h"

#include <stdio.h>
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

#define DESIGN "observation,parameter,coefficient\n"
#define OBSERVATIONS "observation,value,sigma\n"

static const struct {
    const char *file, *text, *message;
} fault[] = {
    {"design.csv", DESIGN "a,x,one\nb,x,1\nb,y,1\nc,y,1\nd,x,2\n",
     "design.csv:2:5: found 'one' (no number), expected a number"},
    {"design.csv", DESIGN "a,x,1\nb,x,1\nb,y,1\nc,y,1\nd,x,inf\n",
     "design.csv:6:5: found 'inf' (a number that is not finite), expected a number"},
    {"design.csv", DESIGN "a,x,1\nb,x,1\nb,y,1\nc,y,1\nd,x,0x2\n",
     "design.csv:6:5: found '0x2' (no number), expected a number"},
    {"design.csv", DESIGN "a,x,1\nb,x,1\nb,y,1\nc,y,1\nd,x,2m\n",
     "design.csv:6:5: found '2m' (no number), expected a number"},
    {"design.csv", DESIGN "a,x,1\nb,x,1\nb,y,1\nc,y,1\nd,x,1e999\n",
     "design.csv:6:5: found '1e999' (a number too large for a double), expected a number"},
    {"design.csv", DESIGN "a,x,1\nb,x,1\nb,y,\nc,y,1\nd,x,2\n",
     "design.csv:4:5: found an empty field, expected a number"},
    {"design.csv", DESIGN "a,x,1\nb,x,1\nb,y,1\n,y,1\nc,y,2\nd,x,2\n",
     "design.csv:5:1: found an empty field, expected an id"},
    {"design.csv", DESIGN "a,x,1\nb,x,1\nb,,1\nc,y,2\nd,x,2\n",
     "design.csv:4:3: found an empty field, expected an id"},
    {"design.csv", DESIGN "a,x,1\nb,x,1\nb,y,1\nc,y,1\nd,x,2\nzz,x,1\n",
     "design.csv:7:1: found the id 'zz', which is not there, expected an observation of the observations "
     "file"},
    {"design.csv", DESIGN,
     "design.csv:1:1: found no row under the header, expected one coefficient at least"},
    {"design.csv", "# c\n" DESIGN,
     "design.csv:2:1: found no row under the header, expected one coefficient at least"},
    {"observations.csv", OBSERVATIONS, NULL},
    {"observations.csv", OBSERVATIONS "a,1,0\nb,3,-0.1\nc,2.1,\nd,nan,0.2\n",
     "observations.csv:2:5: found '0', expected a positive number\n"
     "observations.csv:3:5: found '-0.1', expected a positive number\n"
     "observations.csv:4:7: found an empty field, expected a positive number\n"
     "observations.csv:5:3: found 'nan' (a number that is not finite), expected a number"},
    {"observations.csv", OBSERVATIONS "a,1,0.1\nb,3,0.1\nc,2.1,0.1\nd,2.2,0.2\ne,1,0.1\n",
     "observations.csv:6:1: found observation 'e' with no equation, expected one coefficient at least in the "
     "design"},
    {"observations.csv", OBSERVATIONS "a,1,0.1\nb,3,0.1\nc,2.1,0.1\nd,2.2,0.2\na,1,0.1\n",
     "observations.csv:6:1: found observation 'a' again, expected every observation once"},
    {"observations.csv", OBSERVATIONS "a,1,0.1\nb,3,0.1\nc,2.1,0.1\nd,2.2,0.2\n,1,0.1\n",
     "observations.csv:6:1: found an empty field, expected an id"},
    {"observations.csv", OBSERVATIONS "a,1,1e-400\nb,3,0.1\nc,2.1,0.1\nd,2.2,0.2\n",
     "observations.csv:2:5: found '1e-400', expected a positive number"},
};

START_TEST(each_fault)
{
    folder_put(&at, fault[_i].file, fault[_i].text);
    const char *message = folder_refused(&at, NULL);
    if (fault[_i].message != NULL) ck_assert_str_eq(message, fault[_i].message);
}
END_TEST

/* Faults that the table layer finds are told with their place too, and the rows that depend on them are not
 * blamed. */
START_TEST(ragged_rows)
{
    folder_put(&at, "design.csv", DESIGN "a,x,1\nb,x,1\nb,y,1\nc,y\nd,x,2\n");
    const char *message = folder_refused(&at, NULL);
    ck_assert_ptr_nonnull(strstr(message, "design.csv:5:"));
    ck_assert_ptr_null(strstr(message, "no equation"));
    ck_assert_ptr_null(strchr(message, '\n'));
}
END_TEST

START_TEST(unknown_ids_are_no_faults_beside_a_faulty_file)
{
    folder_put(&at, "observations.csv", OBSERVATIONS "a,1,0.1\nb,3\nc,2.1,0.1\nd,2.2,0.2\n");
    const char *message = folder_refused(&at, NULL);
    ck_assert_ptr_null(strchr(message, '\n'));
    ck_assert_ptr_nonnull(strstr(message, "observations.csv:3:"));
}
END_TEST

START_TEST(both_files_are_told)
{
    folder_put(&at, "observations.csv", OBSERVATIONS "a,x,0.1\nb,3,0.1\nc,2.1,0.1\nd,2.2,0.2\n");
    folder_put(&at, "design.csv", DESIGN "a,x,1\nb,x,1\nb,y,1,\nc,y,1\nd,x,?\n");
    const char *message = folder_refused(&at, NULL);
    ck_assert_ptr_nonnull(strstr(message, "observations.csv:2:3:"));
    ck_assert_ptr_nonnull(strstr(message, "design.csv:4:"));
    ck_assert_ptr_nonnull(strstr(message, "design.csv:6:5:"));
}
END_TEST

START_TEST(twenty_and_no_more)
{
    char text[4096] = DESIGN;
    for (int k = 0; k < 100; k++) (void)snprintf(text + strlen(text), 32, "a,p%d,x\n", k);
    folder_put(&at, "design.csv", text);
    const char *message = folder_refused(&at, NULL);
    int lines = 1;
    for (const char *c = message; *c != '\0'; c++) lines += *c == '\n';
    ck_assert_int_eq(lines, LW_MOST_FAULTS);
}
END_TEST

START_TEST(reserved_names)
{
    static const char *const reserved[] = {"residual", "estimate", NULL};
    lw_read_options options = {.reserved = reserved};
    folder_put(&at, "observations.csv",
               "# times\nobservation,\"my, day\",value,residual\na,,1,0.1\nb,,3,0.1\nc,,2.1,0.1\nd,,2.2,0\n");
    ck_assert_str_eq(folder_refused(&at, &options),
                     "observations.csv:2:29: found a column 'residual', expected another "
                     "name: an output column has it");
    lw_problem_free(folder_read(&at, NULL));
}
END_TEST

START_TEST(control_bytes_are_shown_escaped)
{
    folder_put(&at, "design.csv", DESIGN "a,x,1\nb,x,1\nb,y,1\nc,y,1\nd,x,\x1b[2J\n");
    ck_assert_str_eq(folder_refused(&at, NULL),
                     "design.csv:6:5: found '\\x1b[2J' (no number), expected a number");
}
END_TEST

Suite *suite_faults(void)
{
    Suite *suite = suite_create("faults");
    TCase *tests = tcase_create("faults");
    tcase_add_checked_fixture(tests, setup, teardown);
    tcase_add_loop_test(tests, each_fault, 0, (int)(sizeof fault / sizeof *fault));
    tcase_add_test(tests, ragged_rows);
    tcase_add_test(tests, unknown_ids_are_no_faults_beside_a_faulty_file);
    tcase_add_test(tests, both_files_are_told);
    tcase_add_test(tests, twenty_and_no_more);
    tcase_add_test(tests, reserved_names);
    tcase_add_test(tests, control_bytes_are_shown_escaped);
    suite_add_tcase(suite, tests);
    return suite;
}
