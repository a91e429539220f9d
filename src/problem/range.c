/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/range.h"

#include "core/memory.h"

#include <math.h>

static void swap(double *a, double *b)
{
    double t = *a;
    *a = *b;
    *b = t;
}

/* A pivot that no order of the input makes bad: the median of three places drawn by a fixed generator. */
static double pivot_of(const double *v, int64_t from, int64_t to, uint64_t *state)
{
    double p[3];
    for (int k = 0; k < 3; k++) {
        *state = *state * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
        p[k] = v[from + (int64_t)((*state >> 16) % (uint64_t)(to - from))];
    }
    return fmax(fmin(p[0], p[1]), fmin(fmax(p[0], p[1]), p[2]));
}

/* Puts the k-th smallest value at place k, no larger ones before it (Hoare, CACM 4(7):321-322, 1961, with the
 * equal values between the two parts, so that many equal ones cost nothing). */
static void select_place(int64_t count, double *v, int64_t k)
{
    uint64_t state = 1;
    for (int64_t from = 0, to = count; to - from > 1;) {
        double pivot = pivot_of(v, from, to, &state);
        int64_t less = from, more = to; /* below pivot before `less`, above it from `more` on */
        for (int64_t i = from; i < more;) {
            if (v[i] < pivot)
                swap(v + i++, v + less++);
            else if (v[i] > pivot)
                swap(v + i, v + --more);
            else
                i++;
        }
        if (k >= less && k < more) return;
        if (k < less)
            to = less;
        else
            from = more;
    }
}

double lw_median(int64_t count, double *values)
{
    int64_t middle = count / 2;
    select_place(count, values, middle);
    if (count % 2 == 1) return values[middle];
    double below = values[0];
    for (int64_t i = 1; i < middle; i++) below = fmax(below, values[i]);
    return below + 0.5 * (values[middle] - below);
}

lw_status lw_range_find(int64_t count, const double *values, bool skip_zero, lw_range *out, lw_error *error)
{
    *out = (lw_range){0};
    if (values == NULL) return LW_OK;
    double *kept = LW_NEW_ARRAY(double, count);
    if (kept == NULL) return lw_fail_memory(error, "a median", (size_t)count * sizeof(double));
    int64_t n = 0;
    double smallest = (double)INFINITY, largest = 0.0;
    for (int64_t i = 0; i < count; i++) {
        double a = fabs(values[i]);
        if (isnan(a) || (skip_zero && a == 0.0)) continue;
        kept[n++] = a;
        smallest = fmin(smallest, a);
        largest = fmax(largest, a);
    }
    if (n > 0) *out = (lw_range){smallest, lw_median(n, kept), largest, n};
    lw_free(kept);
    return LW_OK;
}
