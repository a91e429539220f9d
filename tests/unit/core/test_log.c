/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/log.h"

#include "core/memory.h"

#include "check_core.h"

START_TEST(sentences_stand_once_in_order)
{
    lw_log log = {0};
    for (int i = 0; i < 50; i++) ck_assert_int_eq(lw_log_add(&log, "sentence %d", i % 20), LW_OK);
    ck_assert_uint_eq(log.count, 20);
    ck_assert_str_eq(log.text[0], "sentence 0");
    ck_assert_str_eq(log.text[19], "sentence 19");
    lw_log_clear(&log);
    ck_assert_uint_eq(log.count, 0);
    lw_log_clear(&log);
    lw_log_clear(NULL);
    ck_assert_int_eq(lw_log_add(NULL, "nobody"), LW_OK);
}
END_TEST

static bool refuse_at(void *state)
{
    return (*(int *)state)-- == 0;
}

START_TEST(failing_allocations_are_told)
{
    for (int fail = 0; fail < 2; fail++) {
        lw_log log = {0};
        int left = fail;
        lw_memory_set_gate(refuse_at, &left);
        lw_status status = lw_log_add(&log, "a");
        lw_memory_set_gate(NULL, NULL);
        ck_assert_int_eq(status, LW_NO_MEMORY);
        ck_assert_uint_eq(log.count, 0);
        lw_log_clear(&log);
    }
}
END_TEST

Suite *suite_log(void)
{
    Suite *suite = suite_create("log");
    TCase *cases = tcase_create("log");
    tcase_add_test(cases, sentences_stand_once_in_order);
    tcase_add_test(cases, failing_allocations_are_told);
    suite_add_tcase(suite, cases);
    return suite;
}
