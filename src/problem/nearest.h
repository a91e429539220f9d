/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Nearest neighbours of points in one to three dimensions by a k-d tree (Bentley, Comm. ACM 18(9):509-517,
 *  1975). */
#ifndef LW_PROBLEM_NEAREST_H
#define LW_PROBLEM_NEAREST_H

#include "core/status.h"
#include "core/team.h"

#include <stdint.h>

#define LW_NEAREST_MOST 24

typedef struct lw_nearest lw_nearest;

typedef struct lw_neighbour {
    int64_t point;
    double square; /**< of the distance */
} lw_neighbour;

/** place[a]: count values of axis a, a < dimension; copied. Cost: n log n. */
lw_status lw_nearest_new(int dimension, int64_t count, double *const *place, lw_nearest **out,
                         lw_error *error);
void lw_nearest_free(lw_nearest *tree);
/** The k <= LW_NEAREST_MOST nearest other points of point i, nearest first; equal distances by coordinates,
 *  so that the order of the points does not matter. Returns how many there are: min(k, count - 1). */
int lw_nearest_find(const lw_nearest *tree, int64_t i, int k, lw_neighbour *out);
/** The same for all points: those of point i at out[i k] on. */
void lw_nearest_find_all(const lw_nearest *tree, int k, lw_team *team, lw_neighbour *out);

#endif
