/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the programs of the bench share: matrix files, clocks, and lines of results "name value" on standard
 * output.
 *
 *  A matrix file (written by generate.py): int64 m, n, nonzeros, 0; int64 start[n + 1]; int32
 * index[nonzeros], padded to 8 bytes; double value[nonzeros], b[m], sigma[m], coordinate[3 n]. Compressed
 * columns, row indices increasing. */
#ifndef LW_BENCH_BENCH_H
#define LW_BENCH_BENCH_H

#include "core/status.h"
#include "core/watch.h"
#include "problem/problem.h"

#include <stdint.h>

typedef struct bench_clock {
    double wall, processor; /**< seconds since some start */
} bench_clock;

bench_clock bench_now(void);
/** Prints "NAME_wall" and "NAME_cpu" seconds since `from`. */
void bench_tell(const char *name, bench_clock from);
void bench_tell_number(const char *name, double value);
/** Prints "peak", the largest resident size of this program so far, in bytes. */
void bench_tell_peak(void);
/** Ends the program with a message unless status >= 0. */
void bench_check(lw_status status, const lw_error *error);
void *bench_sure(void *block);
/** The problem of a matrix file, as read from CSV without low parts; coordinates NULL when the file has NaN
 * there. */
lw_problem *bench_problem(const char *path);
/** Uniform random numbers in -1 .. 1, always the same. */
double *bench_random(int64_t count);
/** Middle of an odd or even number of values, which are sorted in place. */
double bench_median(int count, double *value);
/** Starts memory and BLAS as the program does. */
void bench_start(void);

#endif
