/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the dense files share: the library's headers, its integer range, its outcomes. Included by dense*.c
 * only. */
#ifndef LW_MATRIX_DENSE_LAPACK_H
#define LW_MATRIX_DENSE_LAPACK_H

#include "core/status.h"

#include <cblas.h>
#include <lapacke.h>
#include <stdint.h>

/** Largest size that the library's integer holds. */
#define LW_LAPACK_MOST ((int64_t)(sizeof(lapack_int) == 4 ? INT32_MAX : INT64_MAX))

/** LW_OK when three sizes are within the range, else LW_BAD_SHAPE. */
lw_status lw_dense_check(lw_error *error, int64_t a, int64_t b, int64_t c);
/** LW_OK for info 0, else LW_SYSTEM naming the routine. */
lw_status lw_dense_outcome(lw_error *error, const char *routine, lapack_int info);
/** A leading dimension: at least 1. */
lapack_int lw_leading(int64_t rows);

#endif
