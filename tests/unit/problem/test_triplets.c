/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_problem.h"

#include "core/memory.h"
#include "problem/triplets.h"

#include <stdlib.h>
#include <string.h>

typedef struct entry {
    int32_t row, column;
    double value, low;
} entry;

static lw_sparse *matrix_of(const entry *entries, int64_t count, int64_t rows, int64_t columns, bool low,
                            lw_repeated *repeated)
{
    lw_triplets *triplets;
    lw_sparse *A;
    ck_assert_int_eq(lw_triplets_new(low, NULL, &triplets, NULL), LW_OK);
    for (int64_t k = 0; k < count; k++) {
        lw_triplet_room room;
        ck_assert_int_eq(lw_triplets_reserve(triplets, 1, &room, NULL), LW_OK);
        room.row[0] = entries[k].row;
        room.column[0] = entries[k].column;
        room.value[0] = entries[k].value;
        if (low) room.low[0] = entries[k].low;
    }
    ck_assert_int_eq(lw_triplets_count(triplets), count);
    ck_assert_int_eq(lw_triplets_matrix(triplets, rows, columns, &A, repeated, NULL), LW_OK);
    lw_triplets_free(triplets);
    return A;
}

/* 0 .. count-1 in an order of a fixed linear congruence. */
static void shuffle(entry *entries, int64_t count)
{
    uint64_t state = 7;
    for (int64_t k = count - 1; k > 0; k--) {
        state = state * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
        int64_t q = (int64_t)((state >> 33) % (uint64_t)(k + 1));
        entry t = entries[k];
        entries[k] = entries[q];
        entries[q] = t;
    }
}

START_TEST(shuffled_gives_the_same_matrix)
{
    enum { ROWS = 300, COLUMNS = 70, COUNT = ROWS * COLUMNS / 2 };
    entry *entries = malloc(COUNT * sizeof(entry));
    int64_t count = 0;
    lw_repeated repeated;
    for (int32_t i = 0; i < ROWS; i++)
        for (int32_t j = i % 2; j < COLUMNS; j += 2)
            entries[count++] = (entry){i, j, 1.0 / (1 + i + j), 1e-20 * (i - j)};
    ck_assert_int_eq(count, COUNT);
    lw_sparse *A = matrix_of(entries, COUNT, ROWS, COLUMNS, true, &repeated);
    shuffle(entries, COUNT);
    lw_sparse *B = matrix_of(entries, COUNT, ROWS, COLUMNS, true, &repeated);
    ck_assert_int_eq(repeated.count, 0);
    ck_assert_int_eq(lw_sparse_nonzeros(B), COUNT);
    ck_assert_mem_eq(A->start, B->start, (COLUMNS + 1) * sizeof(int64_t));
    ck_assert_mem_eq(A->index, B->index, COUNT * sizeof(int32_t));
    ck_assert_mem_eq(A->value, B->value, COUNT * sizeof(double));
    ck_assert_mem_eq(A->low, B->low, COUNT * sizeof(double));
    lw_sparse_free(A);
    lw_sparse_free(B);
    free(entries);
}
END_TEST

/* 1 + 2^-60 - 1 in any order: exact in double-double, in order of value. */
START_TEST(repeated_are_summed_in_order_of_value)
{
    entry entries[] = {{0, 0, 1.0, 0}, {1, 1, 5.0, 0}, {0, 0, 0x1p-60, 0}, {0, 0, -1.0, 0}, {1, 0, 3.0, 0}};
    lw_repeated repeated;
    for (int turn = 0; turn < 6; turn++) {
        lw_sparse *A = matrix_of(entries, 5, 2, 2, true, &repeated);
        ck_assert_int_eq(repeated.count, 2);
        ck_assert_int_eq(repeated.shown, 2);
        ck_assert_int_eq(lw_sparse_nonzeros(A), 3);
        ck_assert_double_eq(A->value[0], 0x1p-60);
        ck_assert_double_eq(A->value[1], 3.0);
        ck_assert_double_eq(A->value[2], 5.0);
        lw_sparse_free(A);
        shuffle(entries, 5);
    }
}
END_TEST

START_TEST(the_later_of_a_pair_is_told)
{
    const entry entries[] = {{0, 0, 1, 0}, {-1, -1, 0, 0}, {1, 0, 1, 0},
                             {0, 1, 1, 0}, {1, 0, 2, 0},   {0, 0, 4, 0}};
    lw_repeated repeated;
    lw_sparse *A = matrix_of(entries, 6, 2, 2, false, &repeated);
    ck_assert_int_eq(repeated.count, 2);
    ck_assert_int_eq(repeated.shown, 2);
    ck_assert_int_eq(repeated.later[0], 4);
    ck_assert_int_eq(repeated.row[0], 1);
    ck_assert_int_eq(repeated.later[1], 5);
    lw_sparse_free(A);
}
END_TEST

START_TEST(low_parts_of_zero_are_dropped)
{
    const entry entries[] = {{0, 0, 1, 0}, {1, 0, 2, 0}};
    lw_repeated repeated;
    lw_sparse *A = matrix_of(entries, 2, 2, 1, true, &repeated);
    ck_assert_ptr_null(A->low);
    lw_sparse_free(A);
    A = matrix_of(NULL, 0, 3, 2, true, &repeated);
    ck_assert_int_eq(lw_sparse_nonzeros(A), 0);
    lw_sparse_free(A);
}
END_TEST

Suite *suite_triplets(void)
{
    Suite *suite = suite_create("triplets");
    TCase *tests = tcase_create("triplets");
    tcase_add_test(tests, shuffled_gives_the_same_matrix);
    tcase_add_test(tests, repeated_are_summed_in_order_of_value);
    tcase_add_test(tests, the_later_of_a_pair_is_told);
    tcase_add_test(tests, low_parts_of_zero_are_dropped);
    suite_add_tcase(suite, tests);
    return suite;
}
