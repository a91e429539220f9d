/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Products with a sparse matrix, as an operator: one pass over the matrix for a bidiagonalization step,
 * threads by a partition that the problem fixes, sums in a fixed order.
 *
 *  Orientation by the shorter side: the fused pass runs over the longer side and accumulates on the shorter
 * one. Four adjacent columns (rows) share their index list when the measured fill of such blocks is below
 * about 2 (design: numerics.md); single storage rounds the values once and uses the same rounded values in
 * every product, sums stay double. */
#ifndef LW_MATRIX_PRODUCT_H
#define LW_MATRIX_PRODUCT_H

#include "matrix/operator.h"

typedef enum lw_storage { LW_STORE_DOUBLE = 0, LW_STORE_SINGLE = 1 } lw_storage;

/** Two passes over the layout that a fused step would have, or over plain compressed lines. */
enum { LW_TWO_PASS_SAME = 1, LW_TWO_PASS_PLAIN = 2 };

typedef struct lw_product_options {
    lw_storage storage;
    int two_pass; /**< for comparison in the bench, no fused step: LW_TWO_PASS_SAME or LW_TWO_PASS_PLAIN; 0:
                     fused */
    const double *row_scale; /**< rows, or NULL; multiplied into the stored values, not kept */
    lw_team *team;
} lw_product_options;

/** How the matrix was laid out, for reports and the bench. */
typedef struct lw_product_layout {
    lw_fusion fusion;
    int block;     /**< 1 or 4 lines share an index list */
    double fill;   /**< stored places / nonzeros of blocks of 4, as measured */
    int parts;     /**< of the fixed partition */
    int64_t bytes; /**< of the layout */
} lw_product_layout;

/** A is borrowed and must outlive the operator only when layout keeps it (row-compressed input is transposed
 * into the layout, column-compressed input may be used as it stands). Cost: a pass or two over A. Errors:
 * LW_NO_MEMORY. */
lw_status lw_product_new(const lw_sparse *A, const lw_product_options *options, lw_operator **out,
                         lw_error *error);
void lw_product_describe(const lw_operator *op, lw_product_layout *out);
/** Bytes that lw_product_new would take for A, beyond A. */
int64_t lw_product_bytes(const lw_sparse *A, const lw_product_options *options);

#endif
