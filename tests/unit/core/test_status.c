/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/status.h"

#include "check_core.h"

#include <string.h>

START_TEST(failure_replaces_the_message)
{
    lw_error error = {0};
    ck_assert_int_eq(lw_fail(&error, LW_BAD_INPUT, "%s:%d:%d: bad", "a.csv", 3, 1), LW_BAD_INPUT);
    ck_assert_str_eq(error.text, "a.csv:3:1: bad");
    ck_assert_int_eq(error.faults, 1);
    ck_assert_int_eq(lw_fail(&error, LW_SYSTEM, "again: %s", error.text), LW_SYSTEM);
    ck_assert_str_eq(error.text, "again: a.csv:3:1: bad");
    ck_assert_int_eq(error.status, LW_SYSTEM);
    ck_assert_int_eq(lw_fail(NULL, LW_UNSOLVABLE, "nobody listens"), LW_UNSOLVABLE);
}
END_TEST

START_TEST(faults_are_listed_up_to_the_limit)
{
    lw_error error = {0};
    for (int i = 0; i < 100; i++)
        ck_assert_int_eq(lw_fail_also(&error, LW_BAD_INPUT, "line %d", i), LW_BAD_INPUT);
    ck_assert_int_eq(error.faults, 100);
    int lines = 1;
    for (const char *c = error.text; *c != '\0'; c++) lines += *c == '\n';
    ck_assert_int_eq(lines, LW_MOST_FAULTS);
    ck_assert_int_eq(strncmp(error.text, "line 0\nline 1\n", 14), 0);
    ck_assert_ptr_null(strstr(error.text, "line 20"));
    ck_assert_int_eq(lw_fail_also(NULL, LW_BAD_INPUT, "x"), LW_BAD_INPUT);
}
END_TEST

START_TEST(long_messages_are_cut_not_overrun)
{
    char text[2 * LW_ERROR_TEXT];
    memset(text, 'x', sizeof text - 1);
    text[sizeof text - 1] = '\0';
    lw_error error = {0};
    lw_fail(&error, LW_SYSTEM, "%s", text);
    ck_assert_uint_eq(strlen(error.text), LW_ERROR_TEXT - 1);
    lw_fail_also(&error, LW_SYSTEM, "no room");
    ck_assert_uint_eq(strlen(error.text), LW_ERROR_TEXT - 1);
    ck_assert_int_eq(error.faults, 2);
    ck_assert_int_eq(lw_fail_memory(&error, "the factor", 4096), LW_NO_MEMORY);
    ck_assert_str_eq(error.text, "out of memory: the factor needs 4096 bytes");
}
END_TEST

START_TEST(every_status_has_a_name)
{
    for (int s = LW_BAD_SHAPE; s <= LW_QUALIFIED; s++)
        if (s != -1) ck_assert_str_ne(lw_status_name((lw_status)s), "unknown status");
    ck_assert_str_eq(lw_status_name(LW_NOT_CONVERGED), "not converged");
    ck_assert_str_eq(lw_status_name((lw_status)99), "unknown status");
}
END_TEST

Suite *suite_status(void)
{
    Suite *suite = suite_create("status");
    TCase *cases = tcase_create("status");
    tcase_add_test(cases, failure_replaces_the_message);
    tcase_add_test(cases, faults_are_listed_up_to_the_limit);
    tcase_add_test(cases, long_messages_are_cut_not_overrun);
    tcase_add_test(cases, every_status_has_a_name);
    suite_add_tcase(suite, cases);
    return suite;
}
