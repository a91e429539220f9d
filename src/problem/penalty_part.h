/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the files of the penalty share among themselves; formulas in penalty.h. */
#ifndef LW_PROBLEM_PENALTY_PART_H
#define LW_PROBLEM_PENALTY_PART_H

#include "core/team.h"
#include "problem/penalty.h"

/** Rows of L as triplets. */
typedef struct lw_penalty_rows {
    int32_t *row, *column;
    double *value;
    int64_t count, room, rows;
} lw_penalty_rows;

/** One more row. */
lw_status lw_penalty_add(lw_penalty_rows *rows, int count, const int64_t *parameter, const double *value,
                         lw_error *error);
/** Rounds value[1 .. count-1] to a common last bit and sets value[0] = - their sum, which is then exact. */
void lw_penalty_balance(int count, double *value);

/** The parameters of one region that take part. */
typedef struct lw_penalty_points {
    int64_t count;
    int64_t *parameter; /**< count */
    double *place[3];   /**< count each; NULL: no such coordinate */
    double stretch[3];  /**< > 0 */
    lw_penalty_kind prefer;
} lw_penalty_points;

/** Sorted values of one coordinate, those closer than 1e-9 of their range made one. */
typedef struct lw_penalty_axis {
    int64_t count;
    double *value;
} lw_penalty_axis;
lw_status lw_penalty_axis_make(int64_t count, const double *place, lw_penalty_axis *out, lw_error *error);

/** *grid = 1 and the rows when the points are a grid on these axes, else 0 and nothing. */
lw_status lw_penalty_grid(const lw_penalty_points *points, const lw_penalty_axis axis[3],
                          lw_penalty_rows *rows, int *grid, lw_error *error);
/** names: for the message when two points are in one place. */
lw_status lw_penalty_scatter(const lw_penalty_points *points, const lw_ids *names, lw_team *team,
                             lw_penalty_rows *rows, lw_error *error);

#endif
