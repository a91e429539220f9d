/* SPDX-License-Identifier: GPL-3.0-or-later */
/** A linear operator A, rows x columns, as a constant table of methods and an opaque state: matrices,
 * whitening, scaling, stacking and prior-conditioning are operators, so that no solver knows of them.
 *
 *  Vectors of a block of k stand one after another (column-major). All calls are reproducible for any team.
 */
#ifndef LW_MATRIX_OPERATOR_H
#define LW_MATRIX_OPERATOR_H

#include "core/status.h"
#include "core/team.h"
#include "matrix/sparse.h"

#include <stdint.h>

typedef struct lw_operator lw_operator;

/** Which one-pass step an operator offers for a bidiagonalization (design: fuse over the longer side,
 * accumulate on the shorter one). */
typedef enum lw_fusion {
    LW_FUSED_NONE = 0,
    LW_FUSED_ROWS,   /**< u <- A v - alpha u, and in the same pass w <- A'u of the new u */
    LW_FUSED_COLUMNS /**< v <- A'u - beta v, and in the same pass w <- A v of the new v */
} lw_fusion;

typedef struct lw_operator_methods {
    const char *name;
    /** Y (rows x k) <- A X (columns x k). */
    void (*apply)(lw_operator *self, int k, const double *x, double *y);
    /** X (columns x k) <- A' Y (rows x k). */
    void (*apply_transposed)(lw_operator *self, int k, const double *y, double *x);
    /** LW_FUSED_ROWS, for k vectors: u_c <- A v_c - alpha[c] u_c ; w_c <- A' u_c ; square[c] <- ||u_c||^2.
     *  u rows x k, v and w columns x k (w must not be v). May be NULL. */
    void (*step_rows)(lw_operator *self, int k, const double *v, const double *alpha, double *u, double *w,
                      double *square);
    /** LW_FUSED_COLUMNS: v_c <- A'u_c - beta[c] v_c ; w_c <- A v_c ; square[c] <- ||v_c||^2. v columns x k, u
     * and w rows x k. */
    void (*step_columns)(lw_operator *self, int k, const double *u, const double *beta, double *v, double *w,
                         double *square);
    void (*free_state)(lw_operator *self);
    int takes_line_scale; /**< the fused step honours line_scale */
} lw_operator_methods;

struct lw_operator {
    const lw_operator_methods *methods;
    int64_t rows, columns;
    lw_fusion fusion;
    lw_team *team; /**< borrowed, may be NULL */
    /** NULL, or for the time of a fused step D = diag(line_scale) on the longer side: u <- D A v - alpha u ;
     * w <- A' D u (rows), v <- D A'u - beta v ; w <- A D v (columns). Set by a scaled operator only. */
    const double *line_scale;
    int64_t forward,
        adjoint; /**< vectors multiplied by A and by A' so far (a fused step counts one of each) */
    void *state;
};

void lw_operator_free(lw_operator *op);
void lw_apply(lw_operator *op, int k, const double *x, double *y);
void lw_apply_transposed(lw_operator *op, int k, const double *y, double *x);
void lw_step_rows(lw_operator *op, int k, const double *v, const double *alpha, double *u, double *w,
                  double *square);
void lw_step_columns(lw_operator *op, int k, const double *u, const double *beta, double *v, double *w,
                     double *square);

/** On failure the operands stay the caller's, also those that would be owned. */

/** diag(row_scale) A diag(column_scale); either scale may be NULL (ones). Scales are copied; A is owned when
 * `own`. Keeps the fusion of A when A is a matrix operator, or when the scale of its longer side is NULL;
 * else fusion none. */
lw_status lw_operator_scaled(lw_operator *A, int own, const double *row_scale, const double *column_scale,
                             lw_operator **out, lw_error *error);
/** [A; factor B], same columns. Fusion none. */
lw_status lw_operator_stacked(lw_operator *A, int own_A, double factor, lw_operator *B, int own_B,
                              lw_operator **out, lw_error *error);
/** A B. Fusion none. */
lw_status lw_operator_product(lw_operator *A, int own_A, lw_operator *B, int own_B, lw_operator **out,
                              lw_error *error);
/** From two functions, for operators that are applied by solves. */
typedef void lw_operator_function(void *state, int k, const double *in, double *out);
lw_status lw_operator_from_functions(const char *name, int64_t rows, int64_t columns,
                                     lw_operator_function *apply, lw_operator_function *apply_transposed,
                                     void *state, void (*free_state)(void *), lw_team *team,
                                     lw_operator **out, lw_error *error);

#endif
