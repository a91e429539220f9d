/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Operators: counted calls, and the operator of two functions. */
#include "matrix/operator.h"

#include "core/memory.h"

void lw_operator_free(lw_operator *op)
{
    if (!op) return;
    if (op->methods && op->methods->free_state) op->methods->free_state(op);
    lw_free(op);
}

void lw_apply(lw_operator *op, int k, const double *x, double *y)
{
    op->forward += k;
    op->methods->apply(op, k, x, y);
}

void lw_apply_transposed(lw_operator *op, int k, const double *y, double *x)
{
    op->adjoint += k;
    op->methods->apply_transposed(op, k, y, x);
}

void lw_step_rows(lw_operator *op, int k, const double *v, const double *alpha, double *u, double *w,
                  double *square)
{
    op->forward += k;
    op->adjoint += k;
    op->methods->step_rows(op, k, v, alpha, u, w, square);
}

void lw_step_columns(lw_operator *op, int k, const double *u, const double *beta, double *v, double *w,
                     double *square)
{
    op->forward += k;
    op->adjoint += k;
    op->methods->step_columns(op, k, u, beta, v, w, square);
}

typedef struct functions {
    lw_operator_methods methods; /* with the caller's name */
    lw_operator_function *apply, *apply_transposed;
    void *state;
    void (*free_state)(void *);
} functions;

static void functions_apply(lw_operator *op, int k, const double *x, double *y)
{
    functions *f = op->state;
    f->apply(f->state, k, x, y);
}

static void functions_apply_transposed(lw_operator *op, int k, const double *y, double *x)
{
    functions *f = op->state;
    f->apply_transposed(f->state, k, y, x);
}

static void functions_free(lw_operator *op)
{
    functions *f = op->state;
    if (f && f->free_state) f->free_state(f->state);
    lw_free(f);
}

lw_status lw_operator_from_functions(const char *name, int64_t rows, int64_t columns,
                                     lw_operator_function *apply, lw_operator_function *apply_transposed,
                                     void *state, void (*free_state)(void *), lw_team *team,
                                     lw_operator **out, lw_error *error)
{
    *out = NULL;
    lw_operator *op = LW_NEW(lw_operator);
    functions *f = LW_NEW(functions);
    if (!op || !f) {
        lw_free(op);
        lw_free(f);
        return lw_fail_memory(error, "an operator", sizeof *op + sizeof *f);
    }
    *f = (functions){.methods = {.name = name,
                                 .apply = functions_apply,
                                 .apply_transposed = functions_apply_transposed,
                                 .free_state = functions_free},
                     .apply = apply,
                     .apply_transposed = apply_transposed,
                     .state = state,
                     .free_state = free_state};
    *op = (lw_operator){.methods = &f->methods, .rows = rows, .columns = columns, .team = team, .state = f};
    *out = op;
    return LW_OK;
}
