/* SPDX-License-Identifier: GPL-3.0-or-later */
/** How a sparse matrix is laid out for one-pass products. The matrix is seen as `lines` (its longer side)
 * whose entries point into the shorter side.
 *
 *  block 1: line j holds entries start[j] .. start[j+1]-1.
 *  block 4: lines 4b .. 4b+3 share one index list, start[b] .. start[b+1]-1, padded to a multiple of four by
 * repeating its last index; the values of four consecutive indices form a tile of 16, line by line: value of
 * index p and line 4b+l at 16 (p / 4) + 4 l + p % 4, zero where the line has no entry. */
#ifndef LW_MATRIX_PRODUCT_LAYOUT_H
#define LW_MATRIX_PRODUCT_LAYOUT_H

#include "core/status.h"
#include "core/team.h"
#include "matrix/product.h"
#include "matrix/sparse.h"

#include <stdint.h>

typedef struct lw_lines {
    int64_t lines, shorter;
    int64_t blocks; /**< lines, or a quarter of them */
    int block;      /**< 1 or 4 */
    lw_storage storage;
    const int64_t *start; /**< blocks + 1 */
    const int32_t *index; /**< start[blocks] */
    const double *value;  /**< double storage */
    const float *single;  /**< single storage */
    int64_t *own_start;   /**< what of the above belongs to the layout */
    int32_t *own_index;
    void *own_value;
    lw_sparse *transposed; /**< the matrix whose arrays are used, when the layout owns it */
    double fill;           /**< places / nonzeros of blocks of four */
    int64_t bytes;         /**< owned */
} lw_lines;

/** Lays out the columns of A as lines. line_scale (columns of A) and short_scale (rows of A) may be NULL;
 * they are multiplied into the values. plain: no blocks of four. A is borrowed for the life of the layout.
 * Errors: LW_NO_MEMORY. */
lw_status lw_lines_make(const lw_sparse *A, lw_storage storage, int plain, const double *line_scale,
                        const double *short_scale, lw_team *team, lw_lines *out, lw_error *error);
/** The matrix that was laid out becomes the layout's own. */
void lw_lines_keep(lw_lines *lines, lw_sparse *transposed);
void lw_lines_clear(lw_lines *lines);

#endif
