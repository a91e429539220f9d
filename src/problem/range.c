/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/range.h"

#include "core/memory.h"

#include <math.h>
#include <stdlib.h>

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

static int by_value(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Keeps of many values those between two places of a sorted sample that most likely enclose the middle, when they do: the
 * passes have no branch that depends on a value. *before: how many smaller ones were left out. Values that are left out are lost.
 * Source: Floyd & Rivest, CACM 18(3):165-172, 1975. */
static int64_t narrow(int64_t count, double *v, int64_t middle, int64_t *before)
{
    enum { SAMPLE = 1024, MARGIN = 96 };
    double sample[SAMPLE];
    uint64_t state = 1;
    *before = 0;
    if (count < 64 * SAMPLE) return count;
    for (int k = 0; k < SAMPLE; k++) {
        state = state * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
        sample[k] = v[(int64_t)((state >> 16) % (uint64_t)count)];
    }
    qsort(sample, SAMPLE, sizeof *sample, by_value);
    double low = sample[SAMPLE / 2 - MARGIN], high = sample[SAMPLE / 2 + MARGIN];
    int64_t less = 0, most = 0, kept = 0;
    for (int64_t i = 0; i < count; i++) {
        less += v[i] < low;
        most += v[i] <= high;
    }
    if (less >= middle || most <= middle) return count;
    for (int64_t i = 0; i < count; i++) {
        double a = v[i];
        v[kept] = a;
        kept += (a >= low) & (a <= high);
    }
    *before = less;
    return kept;
}

double lw_median(int64_t count, double *values)
{
    int64_t middle = count / 2, before, odd = count % 2;
    count = narrow(count, values, middle, &before);
    middle -= before;
    select_place(count, values, middle);
    if (odd) return values[middle];
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
