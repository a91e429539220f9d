/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the files of the standard form share among themselves; see standard_form.h. */
#ifndef LW_SOLVE_STANDARD_PART_H
#define LW_SOLVE_STANDARD_PART_H

#include "matrix/dense.h"
#include "matrix/suitesparse.h"
#include "solve/standard_form.h"
#include "solve/standard_null.h"

/** Vectors that are worked on at a time. */
#define LW_STANDARD_BLOCK 8

/** L^#, with ||L L^# w|| = ||w||:
 *
 *      none      L^# = I
 *      diagonal  L^# = diag(1 / l_j), 0 where l_j = 0; width = columns
 *      factor    L without its pinned columns has full rank and L_f'L_f = R'R:
 *                (L^# w)_f = R^-1 w, 0 on the pins; width = columns - pins
 *
 *  L_f is taken in model units, where it does not carry the column scales. */
typedef enum lw_root_kind { LW_ROOT_NONE = 0, LW_ROOT_DIAGONAL, LW_ROOT_FACTOR } lw_root_kind;

typedef struct lw_standard_root {
    lw_root_kind kind;
    int64_t width, columns;
    double *inverse; /**< columns, diagonal: 1 / l_j or 0 */
    double *spread;  /**< the same with 1 for 0: A diag(spread) is what the products are made for */
    lw_cholesky *factor;
    int64_t *column_of;  /**< width: column of place k */
    const double *scale; /**< columns, borrowed from the system */
    double *work;        /**< width x LW_STANDARD_BLOCK */
    lw_status failed;    /**< of a solve, 0 none; what came out is NaN */
    double seconds;      /**< of factoring */
} lw_standard_root;

struct lw_standard_form {
    lw_system *system;
    lw_standard_root root;
    lw_penalty_null null; /**< basis: columns in z once A N is made, A N of length 1 */
    lw_dense_qr qr;       /**< of A N */
    double *Q;            /**< rows x defect */
    double *small;        /**< defect */
    double *tall;         /**< rows x LW_STANDARD_BLOCK, when defect > 0 */
    double *model;        /**< columns x LW_STANDARD_BLOCK */
    double *side;
    lw_operator *A; /**< A diag(spread), or A */
    lw_operator *op;
    double *B, *AB; /**< one-pass step: A'Q, columns x defect, and A B, rows x defect */
};

/** to <- from / spread, k vectors: what form->A takes for z. */
void lw_standard_form_narrow(const lw_standard_form *form, int64_t k, const double *from, double *to);

/** (I - Q Q') A diag(spread) as an operator that keeps the one-pass step of the product; `form` borrowed.
 *  What a column of an undamped parameter has is in the span of Q, so nothing of it is left. */
lw_status lw_standard_fused_new(lw_standard_form *form, lw_operator **out, lw_error *error);

/** The root and the null vectors (in model units). LW_QUALIFIED where the factor does not fit the memory,
 *  where there are too many null vectors, or where L'L is too ill-conditioned for a factor. */
lw_status lw_standard_root_make(const lw_system *system, int damped, const lw_watch *watch,
                                lw_standard_root *root, lw_penalty_null *null, lw_error *error);
void lw_standard_root_clear(lw_standard_root *root);
/** k <= LW_STANDARD_BLOCK vectors. */
void lw_standard_root_apply(lw_standard_root *root, int k, const double *w, double *z);
void lw_standard_root_transposed(lw_standard_root *root, int k, const double *z, double *w);

#endif
