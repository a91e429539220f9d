/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/memory.h"

#include "check_core.h"

#include <string.h>

START_TEST(sizes_that_overflow_are_refused)
{
    ck_assert_ptr_null(lw_alloc(SIZE_MAX / 2, 3));
    ck_assert_ptr_null(lw_alloc_zero(SIZE_MAX, 2));
    ck_assert_ptr_null(lw_alloc(1, SIZE_MAX - 8));
    char *block = lw_alloc(1, 8);
    ck_assert_ptr_nonnull(block);
    memcpy(block, "1234567", 8);
    ck_assert_ptr_null(lw_resize(block, SIZE_MAX / 2, 3));
    ck_assert_ptr_null(lw_resize(block, 1, SIZE_MAX - 8));
    ck_assert_str_eq(block, "1234567");
    lw_free(block);
    lw_free(NULL);
    void *nothing = lw_alloc(0, 8), *zeros = lw_alloc_zero(0, 0);
    ck_assert_ptr_nonnull(nothing);
    ck_assert_ptr_nonnull(zeros);
    lw_free(nothing);
    lw_free(zeros);
}
END_TEST

START_TEST(resizing_keeps_content_and_alignment)
{
    unsigned char *block = NULL;
    size_t filled = 0;
    for (size_t size = 100; size < (size_t)100 << 20; size = 3 * size + 17) {
        unsigned char *grown = lw_resize(block, size, 1);
        ck_assert_ptr_nonnull(grown);
        block = grown;
        if (size >= (size_t)1 << 20) ck_assert_uint_eq((uintptr_t)block % 64, 0);
        for (size_t i = 0; i < filled; i++)
            if (block[i] != (unsigned char)(i * 7)) ck_abort_msg("byte %zu changed", i);
        for (; filled < size && filled < 1000000; filled++) block[filled] = (unsigned char)(filled * 7);
    }
    block = lw_resize(block, 10, 1);
    ck_assert_ptr_nonnull(block);
    for (size_t i = 0; i < 10; i++) ck_assert_uint_eq(block[i], i * 7);
    lw_free(block);
}
END_TEST

START_TEST(large_zero_blocks_are_zero)
{
    for (int round = 0; round < 3; round++) {
        size_t count = (size_t)5 << 20;
        unsigned char *block = lw_alloc_zero(count, 1);
        ck_assert_ptr_nonnull(block);
        ck_assert_uint_eq((uintptr_t)block % 64, 0);
        for (size_t i = 0; i < count; i++)
            if (block[i] != 0) ck_abort_msg("byte %zu is %u", i, block[i]);
        memset(block, 255, count);
        lw_free(block);
    }
}
END_TEST

static bool refuse_third(void *state)
{
    return ++*(int *)state == 3;
}

START_TEST(gate_fails_the_chosen_allocation)
{
    int calls = 0;
    lw_memory_set_gate(refuse_third, &calls);
    void *a = lw_hook_malloc(8), *b = lw_hook_calloc(1, 8), *c = lw_hook_realloc(a, 16),
         *d = lw_copy_text("text");
    lw_memory_set_gate(NULL, NULL);
    ck_assert_ptr_nonnull(a);
    ck_assert_ptr_nonnull(b);
    ck_assert_ptr_null(c);
    ck_assert_ptr_nonnull(d);
    ck_assert_str_eq(d, "text");
    ck_assert_int_eq(calls, 4);
    lw_hook_free(a);
    lw_hook_free(b);
    lw_free(d);
}
END_TEST

START_TEST(sizes_of_the_system)
{
    lw_memory_tune();
    ck_assert(lw_memory_peak() > 0);
    ck_assert(lw_memory_available() >= 0);
    ck_assert(lw_bytes(INT64_MAX / 2, 3) == INT64_MAX);
    ck_assert(lw_bytes(3, 5) == 15);
}
END_TEST

Suite *suite_memory(void)
{
    Suite *suite = suite_create("memory");
    TCase *cases = tcase_create("memory");
    tcase_add_test(cases, sizes_that_overflow_are_refused);
    tcase_add_test(cases, resizing_keeps_content_and_alignment);
    tcase_add_test(cases, large_zero_blocks_are_zero);
    tcase_add_test(cases, gate_fails_the_chosen_allocation);
    tcase_add_test(cases, sizes_of_the_system);
    suite_add_tcase(suite, cases);
    return suite;
}
