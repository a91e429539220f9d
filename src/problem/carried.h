/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Collects the columns that the program does not know, row by row, into lw_carried. */
#ifndef LW_PROBLEM_CARRIED_H
#define LW_PROBLEM_CARRIED_H

#include "problem/input.h"

typedef struct lw_carrier {
    lw_carried kept;
    int *column; /**< kept.columns: column in the file */
    int64_t used, text_room, row_room;
} lw_carrier;

/** Takes every column of the file but the known ones (names, NULL-terminated). One that is named like an
 * output column is a fault at its place in the header. */
lw_status lw_carrier_start(lw_input *input, const char *const *known, lw_carrier *out);
/** Adds a row; fields of the whole row. */
lw_status lw_carrier_add(lw_carrier *carrier, const lw_field *row, lw_error *error);
void lw_carrier_take(lw_carrier *carrier, lw_carried *out);
void lw_carrier_clear(lw_carrier *carrier);

#endif
