/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Files of linear rows over the parameters that have ids of their own: penalty.csv and conditions.csv. */
#ifndef LW_PROBLEM_LINEAR_ROWS_H
#define LW_PROBLEM_LINEAR_ROWS_H

#include "problem/growing.h"
#include "problem/read.h"

typedef struct lw_linear_rows {
    const char *name, *header; /**< given: column of the row ids, expected header */
    bool with_low, with_value; /**< given: keep low parts; there is a column `value` */
    lw_input input;
    int row, parameter, coefficient, value; /**< columns */
    lw_ids *ids;
    lw_triplets *triplets;
    lw_numbers values; /**< with_value: one a row id */
} lw_linear_rows;

lw_status lw_linear_rows_open(lw_reading *reading, const char *path, lw_linear_rows *rows);
lw_status lw_linear_rows_read(lw_linear_rows *rows);
lw_status lw_linear_rows_close(lw_linear_rows *rows);

#endif
