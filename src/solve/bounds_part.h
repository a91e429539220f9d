/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the files of the box-constrained solver share among themselves; see bounds.h.
 *
 *  K = [A; lambda L] diag(weight), z = weight t, r = K t - [b; 0], g = K'r. */
#ifndef LW_SOLVE_BOUNDS_PART_H
#define LW_SOLVE_BOUNDS_PART_H

#include "solve/bounds.h"

typedef struct lw_box {
    lw_system *system;
    lw_operator *A;
    lw_team *team;
    const lw_watch *watch;
    double lambda;
    int64_t n, rows, penalty_rows, tall; /**< tall = rows + penalty_rows */
    double *weight, *low, *high;         /**< n; bounds in t */
    double *t, *g, *r;                   /**< n, n, tall */
    double *d, *s, *q, *h; /**< n: step, projected step, direction, gradient of the subproblem */
    double *Kd, *Ks;       /**< tall */
    double *z, *l;         /**< n each, work of the products */
    int8_t *set;           /**< n: -1, 0, +1 */
    double reference;      /**< ||K'b||, or the first projected gradient if larger */
    double side;           /**< ||b|| */
    int64_t steps, most;   /**< products with A */
    int64_t exchanges;
} lw_box;

void lw_box_forward(lw_box *box, const double *t, double *y);
void lw_box_adjoint(lw_box *box, const double *y, double *g);
/** r and g of t, afresh. */
void lw_box_refresh(lw_box *box);
/** Which bounds hold, from t. */
void lw_box_classify(lw_box *box);
/** p into out (may be NULL) and its norm. */
double lw_box_projected(const lw_box *box, double *out);
/** Gradient projection and conjugate gradients down to ||p|| <= goal. */
lw_stop lw_box_iterate(lw_box *box, double goal);
/** The exact finish; LW_QUALIFIED when it would take too long or did not end, t then as good as before. */
lw_status lw_box_finish(lw_box *box, lw_error *error);

#endif
