/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/watch.h"

#include "check_core.h"

#include <string.h>

static void count_tick(void *state, const char *what, double done, double total, const char *note)
{
    ck_assert_str_eq(what, "reading");
    ck_assert(done == 1.0 && total == 2.0);
    ck_assert_str_eq(note, "");
    ++*(int *)state;
}

START_TEST(null_watch_has_the_defaults)
{
    lw_watch_tick(NULL, "reading", 1.0, 2.0, "");
    ck_assert(!lw_watch_cancelled(NULL));
    ck_assert(lw_watch_memory(NULL) == LW_DEFAULT_MEMORY);
    ck_assert(lw_watch_seed(NULL) == LW_DEFAULT_SEED);
    ck_assert_ptr_null(lw_watch_team(NULL));
    ck_assert_ptr_null(lw_watch_log(NULL));
}
END_TEST

START_TEST(ticks_and_cancel_pass_through)
{
    int ticks = 0;
    volatile sig_atomic_t cancel = 0;
    lw_watch watch = {.tick = count_tick, .tick_state = &ticks, .cancel = &cancel, .seed = 7};
    lw_watch_tick(&watch, "reading", 1.0, 2.0, "");
    lw_watch_tick(&watch, "reading", 1.0, 2.0, NULL);
    ck_assert_int_eq(ticks, 2);
    ck_assert(!lw_watch_cancelled(&watch));
    cancel = 1;
    ck_assert(lw_watch_cancelled(&watch));
    ck_assert(lw_watch_memory(&watch) == LW_DEFAULT_MEMORY);
    ck_assert(lw_watch_seed(&watch) == 7);
}
END_TEST

START_TEST(budget_is_told_in_words)
{
    lw_error error = {0};
    lw_watch watch = {.memory = 1 << 20};
    ck_assert_int_eq(lw_watch_budget(&watch, 1 << 20, "the factor", "use lsqr", &error), LW_OK);
    ck_assert_int_eq(lw_watch_budget(&watch, 3 << 20, "the factor", "use lsqr", &error), LW_NO_MEMORY);
    ck_assert_str_eq(error.text, "the factor needs 3.0 MiB, --memory allows 1.0 MiB; use lsqr");
    ck_assert_int_eq(lw_watch_budget(&watch, INT64_MAX, "the factor", NULL, &error), LW_NO_MEMORY);
    ck_assert_str_eq(error.text, "the factor needs 8.0 EiB, --memory allows 1.0 MiB");
    watch.memory = INT64_MAX;
    lw_status status = lw_watch_budget(&watch, INT64_MAX, "the factor", "", &error);
    if (status != LW_OK) ck_assert_ptr_nonnull(strstr(error.text, "the system has"));
}
END_TEST

Suite *suite_watch(void)
{
    Suite *suite = suite_create("watch");
    TCase *cases = tcase_create("watch");
    tcase_add_test(cases, null_watch_has_the_defaults);
    tcase_add_test(cases, ticks_and_cancel_pass_through);
    tcase_add_test(cases, budget_is_told_in_words);
    suite_add_tcase(suite, cases);
    return suite;
}
