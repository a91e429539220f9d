/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Operators made of other operators. The vectors that they need between are taken when the operator is made,
 * for one vector, and for more at the first call that brings more; without memory for those the call goes
 * vector by vector. */
#include "matrix/operator.h"

#include "core/memory.h"
#include "matrix/vector.h"

#define MOST_VECTORS 8

typedef struct compound {
    lw_operator *A, *B;
    int own_A, own_B, width;
    double factor;
    double *row_scale, *column_scale;
    int64_t length[2];  /* of the vectors between */
    double *between[2]; /* width vectors each */
} compound;

static void free_compound(lw_operator *op)
{
    compound *s = op->state;
    if (!s) return;
    if (s->own_A) lw_operator_free(s->A);
    if (s->own_B) lw_operator_free(s->B);
    lw_free(s->row_scale);
    lw_free(s->column_scale);
    lw_free(s->between[0]);
    lw_free(s->between[1]);
    lw_free(s);
}

/* The operator shell; on failure the operands stay the caller's. */
static lw_status new_compound(const lw_operator_methods *methods, int64_t rows, int64_t columns,
                              int64_t first, int64_t second, lw_team *team, lw_operator **out,
                              lw_error *error)
{
    *out = NULL;
    lw_operator *op = LW_NEW(lw_operator);
    compound *s = LW_NEW(compound);
    if (!op || !s) {
        lw_free(op);
        lw_free(s);
        return lw_fail_memory(error, "an operator", sizeof *op + sizeof *s);
    }
    *op = (lw_operator){.methods = methods, .rows = rows, .columns = columns, .team = team, .state = s};
    s->width = 1;
    s->length[0] = first;
    s->length[1] = second;
    s->between[0] = LW_NEW_ARRAY(double, first);
    s->between[1] = LW_NEW_ARRAY(double, second);
    if (!s->between[0] || !s->between[1]) {
        lw_operator_free(op);
        return lw_fail_memory(error, "an operator", (size_t)(first + second) * sizeof(double));
    }
    *out = op;
    return LW_OK;
}

static void widen(compound *s, int k)
{
    int want = k < MOST_VECTORS ? k : MOST_VECTORS;
    if (want <= s->width) return;
    double *first = LW_NEW_ARRAY(double, lw_bytes(s->length[0], want));
    double *second = LW_NEW_ARRAY(double, lw_bytes(s->length[1], want));
    if (!first || !second) {
        lw_free(first);
        lw_free(second);
        return;
    }
    lw_free(s->between[0]);
    lw_free(s->between[1]);
    s->between[0] = first;
    s->between[1] = second;
    s->width = want;
}

static int fewer(const compound *s, int left)
{
    return left < s->width ? left : s->width;
}

/* ---- diag(row_scale) A diag(column_scale); the column side stands in between[0], the row side in between[1]
 * ---- */

/* out <- scale in for k vectors, and out; without a scale: in as it is. */
static const double *scale_into(int64_t n, int k, const double *scale, const double *in, double *out)
{
    if (!scale) return in;
    for (int c = 0; c < k; c++)
        for (int64_t i = 0; i < n; i++) out[c * n + i] = scale[i] * in[c * n + i];
    return out;
}

static void scaled_apply(lw_operator *op, int k, const double *x, double *y)
{
    compound *s = op->state;
    widen(s, k);
    for (int c = 0, now; c < k; c += now) {
        now = fewer(s, k - c);
        const double *in = scale_into(op->columns, now, s->column_scale, x + c * op->columns, s->between[0]);
        double *out = y + c * op->rows;
        lw_apply(s->A, now, in, out);
        scale_into(op->rows, now, s->row_scale, out, out);
    }
}

static void scaled_apply_transposed(lw_operator *op, int k, const double *y, double *x)
{
    compound *s = op->state;
    widen(s, k);
    for (int c = 0, now; c < k; c += now) {
        now = fewer(s, k - c);
        const double *in = scale_into(op->rows, now, s->row_scale, y + c * op->rows, s->between[1]);
        double *out = x + c * op->columns;
        lw_apply_transposed(s->A, now, in, out);
        scale_into(op->columns, now, s->column_scale, out, out);
    }
}

/* u <- R A C v - alpha u ; w <- C A' R u: the pass itself multiplies by R on its way out and in. */
static void scaled_step_rows(lw_operator *op, int k, const double *v, const double *alpha, double *u,
                             double *w, double *square)
{
    compound *s = op->state;
    widen(s, k);
    s->A->line_scale = s->row_scale;
    for (int c = 0, now; c < k; c += now) {
        now = fewer(s, k - c);
        const double *in = scale_into(op->columns, now, s->column_scale, v + c * op->columns, s->between[0]);
        double *out = w + c * op->columns;
        lw_step_rows(s->A, now, in, alpha + c, u + c * op->rows, out, square + c);
        scale_into(op->columns, now, s->column_scale, out, out);
    }
    s->A->line_scale = NULL;
}

static void scaled_step_columns(lw_operator *op, int k, const double *u, const double *beta, double *v,
                                double *w, double *square)
{
    compound *s = op->state;
    widen(s, k);
    s->A->line_scale = s->column_scale;
    for (int c = 0, now; c < k; c += now) {
        now = fewer(s, k - c);
        const double *in = scale_into(op->rows, now, s->row_scale, u + c * op->rows, s->between[1]);
        double *out = w + c * op->rows;
        lw_step_columns(s->A, now, in, beta + c, v + c * op->columns, out, square + c);
        scale_into(op->rows, now, s->row_scale, out, out);
    }
    s->A->line_scale = NULL;
}

static const lw_operator_methods scaled_methods = {
    .name = "scaled",
    .apply = scaled_apply,
    .apply_transposed = scaled_apply_transposed,
    .step_rows = scaled_step_rows,
    .step_columns = scaled_step_columns,
    .free_state = free_compound,
};

static lw_status copy_scale(int64_t n, const double *scale, double **out, lw_error *error)
{
    if (!scale) return LW_OK;
    *out = LW_NEW_ARRAY(double, n);
    if (!*out) return lw_fail_memory(error, "a scale", (size_t)n * sizeof(double));
    lw_copy(n, scale, *out);
    return LW_OK;
}

lw_status lw_operator_scaled(lw_operator *A, int own, const double *row_scale, const double *column_scale,
                             lw_operator **out, lw_error *error)
{
    lw_status status = new_compound(&scaled_methods, A->rows, A->columns, column_scale ? A->columns : 0,
                                    row_scale ? A->rows : 0, A->team, out, error);
    if (status) return status;
    compound *s = (*out)->state;
    status = copy_scale(A->rows, row_scale, &s->row_scale, error);
    if (!status) status = copy_scale(A->columns, column_scale, &s->column_scale, error);
    if (status) {
        lw_operator_free(*out);
        *out = NULL;
        return status;
    }
    s->A = A;
    s->own_A = own;
    /* The scale of the longer side falls inside the pass: only an operator that takes it there stays fused.
     */
    const double *inside = A->fusion == LW_FUSED_ROWS ? row_scale : column_scale;
    (*out)->fusion = !inside || A->methods->takes_line_scale ? A->fusion : LW_FUSED_NONE;
    return LW_OK;
}

/* ---- [A; factor B]: between[0] holds what belongs to A and a sum, between[1] what belongs to B ---- */

static void stacked_apply(lw_operator *op, int k, const double *x, double *y)
{
    compound *s = op->state;
    int64_t m = s->A->rows, p = s->B->rows;
    widen(s, k);
    for (int c = 0, now; c < k; c += now) {
        now = fewer(s, k - c);
        lw_apply(s->A, now, x + c * op->columns, s->between[0]);
        lw_apply(s->B, now, x + c * op->columns, s->between[1]);
        for (int d = 0; d < now; d++) {
            double *out = y + (c + d) * op->rows;
            lw_copy(m, s->between[0] + d * m, out);
            for (int64_t i = 0; i < p; i++) out[m + i] = s->factor * s->between[1][d * p + i];
        }
    }
}

static void stacked_apply_transposed(lw_operator *op, int k, const double *y, double *x)
{
    compound *s = op->state;
    int64_t m = s->A->rows, p = s->B->rows, n = op->columns;
    widen(s, k);
    for (int c = 0, now; c < k; c += now) {
        now = fewer(s, k - c);
        double *sum = s->between[0] + m * now, *out = x + c * n;
        for (int d = 0; d < now; d++) {
            const double *in = y + (c + d) * op->rows;
            lw_copy(m, in, s->between[0] + d * m);
            for (int64_t i = 0; i < p; i++) s->between[1][d * p + i] = s->factor * in[m + i];
        }
        lw_apply_transposed(s->A, now, s->between[0], out);
        lw_apply_transposed(s->B, now, s->between[1], sum);
        lw_add_scaled(n * now, 1.0, sum, out, op->team);
    }
}

static const lw_operator_methods stacked_methods = {
    .name = "stacked",
    .apply = stacked_apply,
    .apply_transposed = stacked_apply_transposed,
    .free_state = free_compound,
};

lw_status lw_operator_stacked(lw_operator *A, int own_A, double factor, lw_operator *B, int own_B,
                              lw_operator **out, lw_error *error)
{
    *out = NULL;
    if (A->columns != B->columns)
        return lw_fail(error, LW_BAD_SHAPE, "stacking operators of different widths");
    lw_status status = new_compound(&stacked_methods, A->rows + B->rows, A->columns, A->rows + A->columns,
                                    B->rows, A->team, out, error);
    if (status) return status;
    compound *s = (*out)->state;
    s->A = A;
    s->B = B;
    s->own_A = own_A;
    s->own_B = own_B;
    s->factor = factor;
    return LW_OK;
}

/* ---- A B: between[0] holds B x or A'y ---- */

static void product_apply(lw_operator *op, int k, const double *x, double *y)
{
    compound *s = op->state;
    widen(s, k);
    for (int c = 0, now; c < k; c += now) {
        now = fewer(s, k - c);
        lw_apply(s->B, now, x + c * op->columns, s->between[0]);
        lw_apply(s->A, now, s->between[0], y + c * op->rows);
    }
}

static void product_apply_transposed(lw_operator *op, int k, const double *y, double *x)
{
    compound *s = op->state;
    widen(s, k);
    for (int c = 0, now; c < k; c += now) {
        now = fewer(s, k - c);
        lw_apply_transposed(s->A, now, y + c * op->rows, s->between[0]);
        lw_apply_transposed(s->B, now, s->between[0], x + c * op->columns);
    }
}

static const lw_operator_methods product_methods = {
    .name = "product",
    .apply = product_apply,
    .apply_transposed = product_apply_transposed,
    .free_state = free_compound,
};

lw_status lw_operator_product(lw_operator *A, int own_A, lw_operator *B, int own_B, lw_operator **out,
                              lw_error *error)
{
    *out = NULL;
    if (A->columns != B->rows)
        return lw_fail(error, LW_BAD_SHAPE, "a product of operators whose sizes do not match");
    lw_status status =
        new_compound(&product_methods, A->rows, B->columns, A->columns, 0, A->team, out, error);
    if (status) return status;
    compound *s = (*out)->state;
    s->A = A;
    s->B = B;
    s->own_A = own_A;
    s->own_B = own_B;
    return LW_OK;
}
