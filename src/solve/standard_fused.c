/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Undamped directions beside a diagonal penalty, without losing the one-pass step. With S = A diag(spread),
 * B = S'Q and c = Q'u:
 *
 *     rows      u1 = S v - alpha u,  w1 = S'u1  in one pass
 *               c = Q'u1,  u = u1 - Q c,  w = w1 - B c
 *     columns   v1 = S'u - beta v,   w1 = S v1  in one pass
 *               c = Q'u,   v = v1 - B c,  w = (I - Q Q') (w1 - S B c)
 */
#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/standard_part.h"

/* c <- Q'y. */
static void coefficients(lw_standard_form *form, const double *y)
{
    int64_t m = form->system->rows;
    lw_dense_vector(1, m, form->null.defect, 1.0, form->Q, m, y, 0.0, form->small);
}

/* y <- y - M c, M length x defect. */
static void subtract(lw_standard_form *form, int64_t length, const double *M, double *y)
{
    lw_dense_vector(0, length, form->null.defect, -1.0, M, length, form->small, 1.0, y);
}

static void apply(lw_operator *op, int k, const double *w, double *y)
{
    lw_standard_form *form = op->state;
    lw_apply(form->A, k, w, y);
    for (int at = 0; at < k; at++) {
        coefficients(form, y + at * op->rows);
        subtract(form, op->rows, form->Q, y + at * op->rows);
    }
}

static void apply_transposed(lw_operator *op, int k, const double *y, double *w)
{
    lw_standard_form *form = op->state;
    lw_apply_transposed(form->A, k, y, w);
    for (int at = 0; at < k; at++) {
        coefficients(form, y + at * op->rows);
        subtract(form, op->columns, form->B, w + at * op->columns);
    }
}

static void square_norms(const lw_operator *op, int k, int64_t length, const double *y, double *square)
{
    for (int v = 0; v < k; v++) square[v] = lw_dot(length, y + v * length, y + v * length, op->team);
}

static void step_rows(lw_operator *op, int k, const double *v, const double *alpha, double *u, double *w,
                      double *square)
{
    lw_standard_form *form = op->state;
    lw_step_rows(form->A, k, v, alpha, u, w, square);
    for (int at = 0; at < k; at++) {
        coefficients(form, u + at * op->rows);
        subtract(form, op->rows, form->Q, u + at * op->rows);
        subtract(form, op->columns, form->B, w + at * op->columns);
    }
    square_norms(op, k, op->rows, u, square);
}

static void step_columns(lw_operator *op, int k, const double *u, const double *beta, double *v, double *w,
                         double *square)
{
    lw_standard_form *form = op->state;
    lw_step_columns(form->A, k, u, beta, v, w, square);
    for (int at = 0; at < k; at++) {
        coefficients(form, u + at * op->rows);
        subtract(form, op->columns, form->B, v + at * op->columns);
        subtract(form, op->rows, form->AB, w + at * op->rows);
        coefficients(form, w + at * op->rows);
        subtract(form, op->rows, form->Q, w + at * op->rows);
    }
    square_norms(op, k, op->columns, v, square);
}

static const lw_operator_methods methods = {
    .name = "standard form, one pass",
    .apply = apply,
    .apply_transposed = apply_transposed,
    .step_rows = step_rows,
    .step_columns = step_columns,
};

lw_status lw_standard_fused_new(lw_standard_form *form, lw_operator **out, lw_error *error)
{
    int64_t m = form->system->rows, n = form->root.width, d = form->null.defect;
    int columns_first = form->A->fusion == LW_FUSED_COLUMNS;
    *out = NULL;
    lw_operator *op = LW_NEW(lw_operator);
    form->B = LW_NEW_ARRAY(double, lw_bytes(n, d));
    form->AB = LW_NEW_ARRAY(double, columns_first ? lw_bytes(m, d) : 0);
    if (op == NULL || form->B == NULL || form->AB == NULL) {
        lw_free(op);
        return lw_fail_memory(error, "undamped directions", (size_t)lw_bytes(m + n, 8 * d));
    }
    for (int64_t at = 0; at < d; at++) {
        lw_apply_transposed(form->A, 1, form->Q + at * m, form->B + at * n);
        if (columns_first) lw_apply(form->A, 1, form->B + at * n, form->AB + at * m);
    }
    *op = (lw_operator){.methods = &methods,
                        .rows = m,
                        .columns = n,
                        .fusion = form->A->fusion,
                        .team = form->A->team,
                        .state = form};
    *out = op;
    return LW_OK;
}
