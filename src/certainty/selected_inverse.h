/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The entries of N^-1 that stand on the pattern of its Cholesky factor, supernode by supernode.
 *
 *  With L = [L11; L21] the columns of one supernode and Z = N^-1 restricted to its rows,
 *
 *      Y   = L21 L11^-1
 *      Z21 = -Z22 Y
 *      Z11 = (L11 L11')^-1 - Y' Z21
 *
 *  Z22, between the rows below the diagonal block, is gathered from the supernodes that were done before
 *  (from the last to the first). Cost: about that of the numeric factorization; memory: the factor's values
 *  are overwritten (in place) or copied once, and one dense block of the widest supernode.
 *  Sources: Takahashi, Fagan & Chin, Proc. 8th PICA Conference, 1973; Erisman & Tinney, Comm. ACM
 *  18(3):177-179, 1975. */
#ifndef LW_CERTAINTY_SELECTED_INVERSE_H
#define LW_CERTAINTY_SELECTED_INVERSE_H

#include "core/watch.h"
#include "matrix/suitesparse.h"

#include <stdbool.h>

typedef struct lw_selected_inverse {
    lw_factor_view view; /**< view.value now holds the inverse; diagonal blocks are full and symmetric */
    int64_t *place;      /**< columns: place of a column of N in the factor */
    int64_t *supernode;  /**< columns: supernode of a place */
    int64_t *tree;       /**< supernodes: the last supernode of its tree; N^-1 is zero between trees */
    double *own_value;   /**< the copy, NULL when made in place */
} lw_selected_inverse;

/** The pattern alone; nothing is inverted. The view's arrays are borrowed. */
lw_status lw_selected_inverse_new(const lw_factor_view *view, lw_selected_inverse **out, lw_error *error);
/** Inverts. in_place: view->value (of the same factor as before) is overwritten, and the factor can do
 *  nothing else afterwards. Errors: LW_NO_MEMORY, LW_SYSTEM; LW_INTERRUPTED when cancelled. */
lw_status lw_selected_inverse_run(lw_selected_inverse *inverse, const lw_factor_view *view, bool in_place,
                                  const lw_watch *watch, lw_error *error);
void lw_selected_inverse_free(lw_selected_inverse *inverse);

/** Is the entry (i, j) known once inverted: in the pattern, or zero between trees? */
bool lw_selected_inverse_holds(const lw_selected_inverse *inverse, int64_t i, int64_t j);
/** Entry (i, j) of N^-1 in the order of N; NaN where it is not held. */
double lw_selected_inverse_entry(const lw_selected_inverse *inverse, int64_t i, int64_t j);

#endif
