/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_problem.h"

#include "problem/range.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static int compare(const void *a, const void *b)
{
    const double *x = a, *y = b;
    return *x < *y ? -1 : *x > *y;
}

/* Against a full sort, with many equal values among them. */
START_TEST(median_against_sorting)
{
    enum { MOST = 400 };
    double v[MOST], sorted[MOST];
    uint64_t state = 3;
    for (int count = 1; count <= MOST; count++) {
        for (int k = 0; k < count; k++) {
            state = state * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
            v[k] = (double)((state >> 40) % (count % 3 == 0 ? 5 : 100000));
        }
        memcpy(sorted, v, sizeof v);
        qsort(sorted, (size_t)count, sizeof(double), compare);
        double want = 0.5 * (sorted[(count - 1) / 2] + sorted[count / 2]);
        ck_assert_double_eq(lw_median(count, v), want);
    }
}
END_TEST

START_TEST(no_order_is_slow)
{
    enum { COUNT = 1000000 };
    double *v = malloc(COUNT * sizeof(double));
    for (int kind = 0; kind < 4; kind++) {
        for (int k = 0; k < COUNT; k++) v[k] = kind == 0 ? k : kind == 1 ? -k : kind == 2 ? 1 : k % 2;
        ck_assert_double_ge(lw_median(COUNT, v), -COUNT);
    }
    free(v);
}
END_TEST

START_TEST(range_of_absolute_values)
{
    const double v[] = {-4, (double)NAN, 0, 2, -1};
    lw_range range;
    ck_assert_int_eq(lw_range_find(5, v, false, &range, NULL), LW_OK);
    ck_assert_int_eq(range.count, 4);
    ck_assert_double_eq(range.smallest, 0);
    ck_assert_double_eq(range.median, 1.5);
    ck_assert_double_eq(range.largest, 4);
    ck_assert_int_eq(lw_range_find(5, v, true, &range, NULL), LW_OK);
    ck_assert_double_eq(range.smallest, 1);
    ck_assert_double_eq(range.median, 2);
    ck_assert_int_eq(lw_range_find(5, NULL, true, &range, NULL), LW_OK);
    ck_assert_int_eq(range.count, 0);
}
END_TEST

Suite *suite_range(void)
{
    Suite *suite = suite_create("range");
    TCase *tests = tcase_create("range");
    tcase_add_test(tests, median_against_sorting);
    tcase_add_test(tests, no_order_is_slow);
    tcase_add_test(tests, range_of_absolute_values);
    suite_add_tcase(suite, tests);
    return suite;
}
