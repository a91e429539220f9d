/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/equation.h"

#include "core/memory.h"
#include "matrix/dense.h"

lw_status lw_equations_new(const lw_system *system, lw_equations *out, lw_error *error)
{
    *out = (lw_equations){.system = system, .longest = 1};
    lw_status status = lw_sparse_transpose(system->problem->design, &out->by_row, error);
    if (status != LW_OK) return status;
    const lw_sparse *r = out->by_row;
    for (int64_t i = 0; i < r->columns; i++)
        if (r->start[i + 1] - r->start[i] > out->longest) out->longest = r->start[i + 1] - r->start[i];
    return LW_OK;
}

void lw_equations_clear(lw_equations *equations)
{
    lw_sparse_free(equations->by_row);
    *equations = (lw_equations){0};
}

int64_t lw_equation_row(const lw_equations *equations, int64_t i, int64_t *column, double *a)
{
    const lw_system *system = equations->system;
    const lw_sparse *r = equations->by_row;
    int64_t count = 0;
    if (i >= system->observations) {
        column[0] = system->column_of[system->prior_parameter[i - system->observations]];
        a[0] = column[0] < 0 ? 0 : system->scale[column[0]];
        return column[0] < 0 ? 0 : 1;
    }
    for (int64_t e = r->start[i]; e < r->start[i + 1]; e++) {
        int64_t c = system->column_of[r->index[e]];
        if (c < 0 || r->value[e] == 0) continue;
        column[count] = c;
        a[count++] = r->value[e] * system->scale[c];
    }
    return count;
}

double lw_equation_sigma(const lw_equations *equations, int64_t i)
{
    const lw_system *system = equations->system;
    if (i >= system->observations)
        return system->problem->prior_sigma[system->prior_parameter[i - system->observations]];
    return system->problem->sigma ? system->problem->sigma[i] : 1;
}

double lw_equation_factor(const lw_equations *equations, int64_t i)
{
    return equations->system->row_factor ? equations->system->row_factor[i] : 1;
}

int64_t lw_equation_block(const lw_equations *equations, int64_t i)
{
    const lw_covariance *c = equations->system->problem->covariance;
    return c && i < equations->system->observations ? c->block_of[i] : -1;
}

lw_status lw_equation_weights(const lw_equations *equations, int64_t block, int64_t *size, int64_t **member,
                              double **weights, lw_error *error)
{
    const lw_covariance *c = equations->system->problem->covariance;
    int64_t all = c->start[block + 1] - c->start[block], used = 0, defect = 0;
    const int32_t *of = c->member + c->start[block];
    const double *covariance = c->value + c->value_start[block];
    int64_t *list = LW_NEW_ARRAY(int64_t, all), *at = LW_NEW_ARRAY(int64_t, all);
    double *P = LW_NEW_ARRAY(double, all *all);
    lw_status status = list && at && P
                           ? LW_OK
                           : lw_fail_memory(error, "weights of a block", (size_t)(all * all) * sizeof *P);
    *member = NULL;
    *weights = NULL;
    *size = 0;
    for (int64_t k = 0; k < all && status == LW_OK; k++)
        if (lw_equation_factor(equations, of[k]) != 0) at[used] = k, list[used++] = of[k];
    for (int64_t j = 0; j < used && status == LW_OK; j++) {
        double w = lw_equation_factor(equations, list[j]);
        for (int64_t i = 0; i < used; i++) P[i + j * used] = covariance[at[i] + at[j] * all];
        P[j + j * used] /= w * w;
    }
    if (status == LW_OK && used > 0) status = lw_dense_cholesky(used, P, &defect, error);
    if (status == LW_OK && used > 0) status = lw_dense_cholesky_invert(used, P, error);
    lw_free(at);
    if (status != LW_OK) {
        lw_free(list);
        lw_free(P);
        return status;
    }
    *size = used;
    *member = list;
    *weights = P;
    return LW_OK;
}
