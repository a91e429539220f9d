/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Files after the examples of Boisvert, Pozo & Remington, NISTIR 5935, 1996. */
#include "table/market.h"

#include "core/memory.h"

#include "check_table.h"
#include "scratch.h"

#include <string.h>

#define BANNER "%%MatrixMarket matrix coordinate real general\n"

START_TEST(general_matrix)
{
    scratch file = scratch_text(
        "design.mtx", "%%matrixmarket MATRIX coordinate real general\r\n% a comment\r\n\r\n 5 5 3\r\n"
                      "1 1 1.000e+00\r\n2   2\t0.1\r\n\n% more\n5 4 -3.332e+01");
    lw_market market;
    lw_error error = {0};
    ck_assert_msg(lw_market_read(file.path, NULL, &market, &error) == LW_OK, "%s", error.text);
    ck_assert(market.rows == 5 && market.columns == 5 && market.entries == 3);
    ck_assert(market.row[2] == 4 && market.column[2] == 3 && market.value[2] == -33.32);
    ck_assert_int_eq(market.line[0], 5);
    ck_assert_int_eq(market.line[1], 6);
    ck_assert_int_eq(market.line[2], 9);
    ck_assert_ptr_nonnull(market.low);
    ck_assert(market.low[0] == 0.0 && market.value[1] == 0.1 && market.low[1] == -0x1.999999999999ap-58);
    ck_assert_uint_eq(strlen(market.sha256), 64);
    ck_assert_int_gt(market.bytes, 0);
    lw_market_clear(&market);
    lw_market_clear(NULL);
    scratch_remove(&file);
}
END_TEST

START_TEST(symmetric_pattern_and_integer)
{
    scratch file = scratch_text(
        "a.mtx", "%%MatrixMarket matrix coordinate integer symmetric\n3 3 3\n1 1 4\n3 1 -2\n3 3 7\n");
    lw_market market;
    ck_assert_int_eq(lw_market_read(file.path, NULL, &market, NULL), LW_OK);
    ck_assert_int_eq(market.entries, 4);
    ck_assert(market.row[1] == 2 && market.column[1] == 0 && market.row[2] == 0 && market.column[2] == 2);
    ck_assert(market.value[2] == -2.0 && market.line[2] == 4);
    ck_assert_ptr_null(market.low);
    lw_market_clear(&market);
    scratch_remove(&file);
    file = scratch_text("a.mtx", "%%MatrixMarket matrix coordinate pattern general\n2 3 2\n1 3\n2 1\n");
    ck_assert_int_eq(lw_market_read(file.path, NULL, &market, NULL), LW_OK);
    ck_assert(market.value[0] == 1.0 && market.value[1] == 1.0 && market.column[0] == 2);
    lw_market_clear(&market);
    scratch_remove(&file);
}
END_TEST

static void expect(const char *content, const char *message)
{
    scratch file = scratch_text("a.mtx", content);
    lw_market market;
    lw_error error = {0};
    ck_assert_int_eq(lw_market_read(file.path, NULL, &market, &error), LW_BAD_INPUT);
    ck_assert_ptr_null(market.row);
    ck_assert_str_eq(scratch_strip(&file, error.text), message);
    scratch_remove(&file);
}

START_TEST(faults_have_their_places)
{
    expect("", "a.mtx:1:1: found nothing, expected %%MatrixMarket");
    expect("1 2 3\n", "a.mtx:1:1: found '1', expected %%MatrixMarket");
    expect("%%MatrixMarket matrix array real general\n", "a.mtx:1:23: found 'array', expected coordinate");
    expect("%%MatrixMarket matrix coordinate complex general\n",
           "a.mtx:1:34: found 'complex', expected real, integer or pattern");
    expect("%%MatrixMarket matrix coordinate real hermitian\n",
           "a.mtx:1:39: found 'hermitian', expected general or symmetric");
    expect(BANNER, "a.mtx:2:1: found nothing, expected rows, columns and entries, three whole numbers");
    expect(BANNER "2 2\n",
           "a.mtx:2:4: found nothing, expected rows, columns and entries, three whole numbers");
    expect(BANNER "2 2 9000000000000\n1 1 1\n",
           "a.mtx:2:5: found '9000000000000', expected no more entries than the file has lines");
    expect(BANNER "2 2 2\n3 1 1\n1 x 1\n", "a.mtx:3:1: found '3', expected a row number of the matrix\n"
                                           "a.mtx:4:3: found 'x', expected a column number of the matrix");
    expect(BANNER "2 2 2\n1 1 one\n1 2 nan\n", "a.mtx:3:5: found 'one', expected a decimal number\n"
                                               "a.mtx:4:5: found 'nan', expected a finite decimal number");
    expect(BANNER "2 2 1\n1 1 1 9\n", "a.mtx:3:7: found '9', expected the end of the line");
    expect(BANNER "2 2 2\n1 1 1\n",
           "a.mtx:4:1: found nothing, expected as many entries as the size line states");
    expect(BANNER "2 2 1\n1 1 1\n1 2 1\n",
           "a.mtx:4:1: found '1', expected no more entries than the size line states");
    expect("%%MatrixMarket matrix coordinate real symmetric\n2 2 1\n1 2 1\n",
           "a.mtx:3:3: found '2', expected an entry on or below the diagonal");
    expect("%%MatrixMarket matrix coordinate real symmetric\n2 3 1\n1 2 1\n",
           "a.mtx:2:1: found '2 3 1', expected a square symmetric matrix");
}
END_TEST

static bool refuse_at(void *state)
{
    return (*(int *)state)-- == 0;
}

START_TEST(failing_allocations_are_told)
{
    scratch file = scratch_text("a.mtx", BANNER "2 2 2\n1 1 0.1\n2 2 1\n");
    for (int fail = 0;; fail++) {
        int left = fail;
        lw_market market;
        lw_error error = {0};
        lw_memory_set_gate(refuse_at, &left);
        lw_status status = lw_market_read(file.path, NULL, &market, &error);
        lw_memory_set_gate(NULL, NULL);
        lw_market_clear(&market);
        ck_assert_int_lt(fail, 40);
        if (left >= 0) break;
        ck_assert_int_eq(status, LW_NO_MEMORY);
        ck_assert_str_ne(error.text, "");
    }
    scratch_remove(&file);
}
END_TEST

Suite *suite_market(void)
{
    Suite *suite = suite_create("market");
    TCase *cases = tcase_create("market");
    tcase_add_test(cases, general_matrix);
    tcase_add_test(cases, symmetric_pattern_and_integer);
    tcase_add_test(cases, faults_have_their_places);
    tcase_add_test(cases, failing_allocations_are_told);
    suite_add_tcase(suite, cases);
    return suite;
}
