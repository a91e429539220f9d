/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Arrays that grow by one element at a time while a file is read. Zero-initialise; clear when not taken. */
#ifndef LW_PROBLEM_GROWING_H
#define LW_PROBLEM_GROWING_H

#include "core/decimal.h"
#include "core/status.h"

#include <stdint.h>

typedef struct lw_numbers {
    double *high, *low; /**< low stays NULL with no_low */
    int64_t count, room;
    bool no_low;
} lw_numbers;

typedef struct lw_integers {
    int32_t *value;
    int64_t count, room;
} lw_integers;

lw_status lw_numbers_add(lw_numbers *numbers, lw_decimal value, lw_error *error);
lw_status lw_integers_add(lw_integers *integers, int32_t value, lw_error *error);
/** Cuts to size and hands over (*low may be NULL: dropped); numbers are empty afterwards. An empty list gives
 * a valid pointer, as lw_alloc does. */
lw_status lw_numbers_take(lw_numbers *numbers, double **high, double **low, lw_error *error);
lw_status lw_integers_take(lw_integers *integers, int32_t **value, lw_error *error);
void lw_numbers_clear(lw_numbers *numbers);
void lw_integers_clear(lw_integers *integers);

#endif
