/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/team.h"

#include "core/memory.h"

#include "check_core.h"

#include <stdatomic.h>
#include <string.h>

#define PARTS 100

typedef struct tally {
    atomic_int called[PARTS];
    lw_team *team;
} tally;

static void count_part(void *state, int part)
{
    tally *t = state;
    atomic_fetch_add(&t->called[part], 1);
}

static void run_within(void *state, int part)
{
    tally *t = state;
    if (part % 10 == 0) lw_team_run(t->team, PARTS, count_part, t);
}

START_TEST(each_part_is_called_once)
{
    for (int threads = 1; threads <= 4; threads++) {
        lw_team *team;
        ck_assert_int_eq(lw_team_new(threads, &team, NULL), LW_OK);
        ck_assert_int_eq(lw_team_threads(team), threads);
        static tally t;
        memset(&t, 0, sizeof t);
        for (int round = 0; round < 2000; round++) lw_team_run(team, round % (PARTS + 1), count_part, &t);
        for (int part = 0; part < PARTS; part++) {
            int expected = 0;
            for (int round = 0; round < 2000; round++) expected += round % (PARTS + 1) > part;
            ck_assert_int_eq(atomic_load(&t.called[part]), expected);
        }
        lw_team_free(team);
    }
}
END_TEST

START_TEST(run_within_a_part_is_inline)
{
    static tally t;
    memset(&t, 0, sizeof t);
    ck_assert_int_eq(lw_team_new(3, &t.team, NULL), LW_OK);
    lw_team_run(t.team, PARTS, run_within, &t);
    for (int part = 0; part < PARTS; part++) ck_assert_int_eq(atomic_load(&t.called[part]), PARTS / 10);
    lw_team_free(t.team);
}
END_TEST

static bool refuse(void *state)
{
    (void)state;
    return true;
}

START_TEST(unusual_teams)
{
    static tally t;
    memset(&t, 0, sizeof t);
    lw_team_run(NULL, 3, count_part, &t);
    lw_team_run(NULL, 0, count_part, &t);
    ck_assert_int_eq(atomic_load(&t.called[2]), 1);
    ck_assert_int_eq(lw_team_threads(NULL), 1);
    lw_team_free(NULL);
    lw_team *team;
    lw_error error = {0};
    ck_assert_int_eq(lw_team_new(-1, &team, &error), LW_BAD_SHAPE);
    ck_assert_ptr_null(team);
    ck_assert_int_eq(lw_team_new(0, &team, &error), LW_OK);
    ck_assert_int_ge(lw_team_threads(team), 1);
    lw_team_free(team);
    lw_memory_set_gate(refuse, NULL);
    ck_assert_int_eq(lw_team_new(2, &team, &error), LW_NO_MEMORY);
    lw_memory_set_gate(NULL, NULL);
    ck_assert_ptr_null(team);
}
END_TEST

Suite *suite_team(void)
{
    Suite *suite = suite_create("team");
    TCase *cases = tcase_create("team");
    tcase_add_test(cases, each_part_is_called_once);
    tcase_add_test(cases, run_within_a_part_is_inline);
    tcase_add_test(cases, unusual_teams);
    suite_add_tcase(suite, cases);
    return suite;
}
