/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Smallest, median and largest of absolute values, by selection. */
#ifndef LW_PROBLEM_RANGE_H
#define LW_PROBLEM_RANGE_H

#include "core/status.h"

#include <stdbool.h>
#include <stdint.h>

typedef struct lw_range {
    double smallest, median, largest; /**< of absolute values */
    int64_t count;
} lw_range;

/** Of `count` values, NaN left out, and zeros too when skip_zero; all 0 when nothing is left. values NULL:
 * nothing. Cost: O(count) time, a copy of a fifth of the values, at worst of all. */
lw_status lw_range_find(int64_t count, const double *values, bool skip_zero, lw_range *out, lw_error *error);
/** Median of values that may be reordered (mean of the middle two of an even number); count >= 1. */
double lw_median(int64_t count, double *values);

#endif
