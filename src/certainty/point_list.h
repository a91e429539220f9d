/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Points of a problem with their coordinates as columns, and the pairs of points that observations join. */
#ifndef LW_CERTAINTY_POINT_LIST_H
#define LW_CERTAINTY_POINT_LIST_H

#include "problem/system.h"

#include <stdbool.h>

typedef struct lw_point_list {
    int64_t points;
    int64_t *column; /**< points x 3: east (x), north (y), up (z); -1 held or not there */
    int8_t *axes;    /**< points x 3: 1 where the point has that axis, held or free */
    int64_t *pair;   /**< pairs with free coordinates, from < to, as from * points + to, increasing */
    int64_t pairs;
} lw_point_list;

/** *out NULL, with LW_OK, when the problem has no points with axes. */
lw_status lw_point_list_new(const lw_system *system, lw_point_list **out, lw_error *error);
void lw_point_list_free(lw_point_list *list);
/** 2 or 3; 0 where the point has no horizontal position. */
int lw_point_dimension(const lw_point_list *list, int64_t point);
/** Has it an ellipse: a horizontal position with a free coordinate? */
bool lw_point_is_free(const lw_point_list *list, int64_t point);

#endif
