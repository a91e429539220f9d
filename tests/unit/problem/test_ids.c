/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_problem.h"

#include "problem/ids.h"

#include <stdio.h>
#include <string.h>

static lw_ids *ids;

static void setup(void)
{
    ck_assert_int_eq(lw_ids_new(0, &ids, NULL), LW_OK);
}

static void teardown(void)
{
    lw_ids_free(ids);
}

static int64_t add(const char *text)
{
    int64_t number;
    int added;
    ck_assert_int_eq(lw_ids_add(ids, text, strlen(text), &number, &added, NULL), LW_OK);
    return added ? number : -1 - number;
}

START_TEST(numbers_in_order_of_first_appearance)
{
    ck_assert_int_eq(add("b"), 0);
    ck_assert_int_eq(add("a"), 1);
    ck_assert_int_eq(add("b"), -1);
    ck_assert_int_eq(add(""), 2);
    ck_assert_int_eq(lw_ids_count(ids), 3);
    ck_assert_str_eq(lw_ids_name(ids, 0), "b");
    ck_assert_str_eq(lw_ids_name(ids, 2), "");
    ck_assert_int_eq(lw_ids_find(ids, "a", 1), 1);
    ck_assert_int_eq(lw_ids_find(ids, "ab", 2), -1);
    ck_assert_int_eq(lw_ids_find(ids, "ab", 1), 1);
}
END_TEST

/* Around the length that a slot holds, and ids that only differ in their last byte. */
START_TEST(lengths_around_a_slot)
{
    char text[300];
    for (int length = 1; length < 300; length++) {
        memset(text, 'q', sizeof text);
        for (char last = 'a'; last < 'd'; last++) {
            int64_t number;
            int added;
            text[length - 1] = last;
            ck_assert_int_eq(lw_ids_add(ids, text, (size_t)length, &number, &added, NULL), LW_OK);
            ck_assert_int_eq(added, 1);
            ck_assert_int_eq(number, 3 * (length - 1) + last - 'a');
        }
    }
    memset(text, 'q', sizeof text);
    for (int length = 1; length < 300; length++) {
        text[length - 1] = 'b';
        ck_assert_int_eq(lw_ids_find(ids, text, (size_t)length), 3 * (length - 1) + 1);
        ck_assert_uint_eq(strlen(lw_ids_name(ids, 3 * (length - 1))), (size_t)length);
        text[length - 1] = 'q';
        ck_assert_int_eq(lw_ids_find(ids, text, (size_t)length), -1);
    }
}
END_TEST

START_TEST(many_in_batches)
{
    enum { COUNT = 100000 };
    char text[LW_CSV_BATCH][16];
    lw_field fields[2 * LW_CSV_BATCH];
    int64_t number[LW_CSV_BATCH];
    for (int pass = 0; pass < 2; pass++)
        for (int from = 0; from < COUNT; from += LW_CSV_BATCH) {
            int count = COUNT - from < LW_CSV_BATCH ? COUNT - from : LW_CSV_BATCH;
            for (int k = 0; k < count; k++) {
                int length = snprintf(text[k], sizeof text[k], "t%d", from + k);
                fields[2 * k + 1] = (lw_field){text[k], (uint32_t)length, false};
            }
            if (pass == 0)
                ck_assert_int_eq(lw_ids_add_batch(ids, fields + 1, count, 2, number, NULL), LW_OK);
            else
                lw_ids_find_batch(ids, fields + 1, count, 2, number);
            for (int k = 0; k < count; k++) ck_assert_int_eq(number[k], from + k);
        }
    ck_assert_int_eq(lw_ids_count(ids), COUNT);
    int64_t bytes;
    const char *all = lw_ids_text(ids, &bytes);
    ck_assert_str_eq(all + bytes - 7, "t99999");
}
END_TEST

Suite *suite_ids(void)
{
    Suite *suite = suite_create("ids");
    TCase *tests = tcase_create("ids");
    tcase_add_checked_fixture(tests, setup, teardown);
    tcase_add_test(tests, numbers_in_order_of_first_appearance);
    tcase_add_test(tests, lengths_around_a_slot);
    tcase_add_test(tests, many_in_batches);
    suite_add_tcase(suite, tests);
    return suite;
}
