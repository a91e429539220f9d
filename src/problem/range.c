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

/* The middle value (or the mean of both) when `middle` smaller ones stand before it; reorders. */
static double middle_of(int64_t count, double *v, int64_t middle, bool odd)
{
    select_place(count, v, middle);
    if (odd) return v[middle];
    double below = v[0];
    for (int64_t i = 1; i < middle; i++) below = fmax(below, v[i]);
    return below + 0.5 * (v[middle] - below);
}

double lw_median(int64_t count, double *values)
{
    return middle_of(count, values, count / 2, count % 2 == 1);
}

static int by_value(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Which values count, and the absolute values between which they are looked at. */
typedef struct window {
    const double *values;
    int64_t count;
    bool skip_zero;
    double low, high;
} window;

static bool counts(const window *w, double a)
{
    return (a >= 0.0) & !(w->skip_zero & (a == 0.0)); /* not NaN */
}

/* Two places of a sorted sample that most likely enclose the middle of many values, so that few need to be
 * copied. Source: Floyd & Rivest, CACM 18(3):165-172, 1975. */
static void narrow(window *w)
{
    enum { SAMPLE = 1024, MARGIN = 96, TRIES = 4 * SAMPLE };
    double sample[SAMPLE];
    uint64_t state = 1;
    int taken = 0;
    if (w->count < 64 * SAMPLE) return;
    for (int k = 0; k < TRIES && taken < SAMPLE; k++) {
        state = state * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
        double a = fabs(w->values[(int64_t)((state >> 16) % (uint64_t)w->count)]);
        if (counts(w, a)) sample[taken++] = a;
    }
    if (taken < SAMPLE) return;
    qsort(sample, SAMPLE, sizeof *sample, by_value);
    w->low = sample[SAMPLE / 2 - MARGIN];
    w->high = sample[SAMPLE / 2 + MARGIN];
}

static void count_window(const window *w, int64_t *less, int64_t *most)
{
    *less = *most = 0;
    for (int64_t i = 0; i < w->count; i++) {
        double a = fabs(w->values[i]);
        *less += counts(w, a) & (a < w->low);
        *most += counts(w, a) & (a <= w->high);
    }
}

static lw_status find_median(window *w, int64_t n, double *median, lw_error *error)
{
    int64_t less, most, kept = 0;
    narrow(w);
    count_window(w, &less, &most);
    if (less >= n / 2 || most <= n / 2) {
        w->low = 0.0;
        w->high = (double)INFINITY;
        less = 0;
        most = n;
    }
    double *v =
        LW_NEW_ARRAY(double, most - less + 1); /* one place more: written before it is known to count */
    if (v == NULL) return lw_fail_memory(error, "a median", (size_t)(most - less) * sizeof(double));
    for (int64_t i = 0; i < w->count; i++) {
        double a = fabs(w->values[i]);
        v[kept] = a;
        kept += counts(w, a) & (a >= w->low) & (a <= w->high);
    }
    *median = middle_of(kept, v, n / 2 - less, n % 2 == 1);
    lw_free(v);
    return LW_OK;
}

lw_status lw_range_find(int64_t count, const double *values, bool skip_zero, lw_range *out, lw_error *error)
{
    window w = {values, count, skip_zero, 0.0, (double)INFINITY};
    int64_t n = 0;
    double smallest = (double)INFINITY, largest = 0.0, median = 0.0;
    *out = (lw_range){0};
    if (values == NULL) return LW_OK;
    for (int64_t i = 0; i < count; i++) {
        double a = fabs(values[i]);
        if (!counts(&w, a)) continue;
        n++;
        smallest = fmin(smallest, a);
        largest = fmax(largest, a);
    }
    lw_status status = n > 0 ? find_median(&w, n, &median, error) : LW_OK;
    if (status == LW_OK && n > 0) *out = (lw_range){smallest, median, largest, n};
    return status;
}
