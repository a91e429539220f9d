/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Nonzeros as a file lists them, kept in chunks that never move, and the one scatter that makes compressed
 * columns of them. 16 bytes a nonzero (24 with low parts) beside the matrix; the chunks are freed before
 * anything is sorted. */
#ifndef LW_PROBLEM_TRIPLETS_H
#define LW_PROBLEM_TRIPLETS_H

#include "core/watch.h"
#include "matrix/sparse.h"

#include <stdbool.h>
#include <stdint.h>

typedef struct lw_triplets lw_triplets;

/** Where the next `count` triplets are written. row -1: no triplet (a faulty line), so that the number of a
 * triplet stays the number of its row in the file. low is NULL without low parts. */
typedef struct lw_triplet_room {
    int32_t *row, *column;
    double *value, *low;
} lw_triplet_room;

/** Pairs that came more than once: how many triplets were added to an earlier one, and the numbers of some of
 * the later ones in the order of the file. */
typedef struct lw_repeated {
    int64_t count;
    int shown;
    int64_t later[LW_MOST_FAULTS];
    int32_t row[LW_MOST_FAULTS], column[LW_MOST_FAULTS]; /**< their places */
} lw_repeated;

lw_status lw_triplets_new(bool with_low, const lw_watch *watch, lw_triplets **out, lw_error *error);
void lw_triplets_free(lw_triplets *triplets);
int64_t lw_triplets_count(const lw_triplets *triplets);
/** Room for count <= LW_CSV_BATCH triplets, which all must then be written; they count at once. */
lw_status lw_triplets_reserve(lw_triplets *triplets, int count, lw_triplet_room *room, lw_error *error);
/** Sorted compressed columns; triplets of the same place are summed in order of value, so that the order of
 * the file does not change a byte. low is dropped when every low part is 0. The triplets are used up. Cost:
 * one pass to count, one to scatter; columns that do not come sorted by row are sorted by two transpositions.
 */
lw_status lw_triplets_matrix(lw_triplets *triplets, int64_t rows, int64_t columns, lw_sparse **out,
                             lw_repeated *repeated, lw_error *error);

#endif
