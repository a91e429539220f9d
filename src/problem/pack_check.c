/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A checksum does not keep anyone from forging a pack, so everything that later code relies on is checked. */
#include "problem/pack_file.h"

#include <math.h>
#include <string.h>

static bool number_holds(double v, lw_pack_rule rule)
{
    switch (rule) {
    case LW_PACK_FINITE:
        return isfinite(v);
    case LW_PACK_POSITIVE:
        return isfinite(v) && v > 0.0;
    case LW_PACK_POSITIVE_OR_NAN:
        return isnan(v) || (isfinite(v) && v > 0.0);
    case LW_PACK_NOT_NEGATIVE:
        return isfinite(v) && v >= 0.0;
    case LW_PACK_FINITE_OR_NAN:
        return !isinf(v);
    default:
        return !isnan(v);
    }
}

static bool array_holds(const lw_problem *problem, const lw_pack_array *a, const void *data, int64_t count)
{
    if (lw_pack_element(a->rule) == 1) {
        const unsigned char *byte = data;
        unsigned char most = a->rule == LW_PACK_FLAG ? 1 : (unsigned char)LW_AXIS_Z;
        for (int64_t k = 0; k < count; k++)
            if (byte[k] > most) return false;
    } else if (lw_pack_element(a->rule) == sizeof(int32_t)) {
        const lw_ids *names = lw_pack_pointer(problem, a->names);
        int64_t least = a->rule == LW_PACK_LABEL ? 0 : -1, most = names != NULL ? lw_ids_count(names) : 0;
        const int32_t *label = data;
        for (int64_t k = 0; k < count; k++)
            if (label[k] < least || label[k] >= most) return false;
    } else {
        const double *number = data;
        for (int64_t k = 0; k < count; k++)
            if (!number_holds(number[k], a->rule)) return false;
    }
    return true;
}

/* Name of the first array that is not as it must be, or NULL. */
static const char *faulty_array(const lw_problem *problem, const lw_pack_sizes *sizes)
{
    for (int k = 0; k < lw_pack_array_count; k++) {
        const lw_pack_array *a = lw_pack_arrays + k;
        const void *data = lw_pack_pointer(problem, a->offset);
        if (a->partner != 0 && (lw_pack_pointer(problem, a->partner) == NULL) != (data == NULL))
            return a->name;
        if (data != NULL && !array_holds(problem, a, data, lw_pack_count(a->length, sizes))) return a->name;
    }
    for (int64_t j = 0; problem->lower != NULL && problem->upper != NULL && j < problem->n; j++)
        if (problem->lower[j] > problem->upper[j]) return "lower";
    for (int64_t j = 0; problem->fixed != NULL && problem->prior_sigma != NULL && j < problem->n; j++)
        if (problem->fixed[j] && !isnan(problem->prior_sigma[j])) return "fixed";
    return NULL;
}

static bool matrix_holds(const lw_sparse *A, int64_t rows, int64_t columns)
{
    if (A->rows != rows || A->columns != columns) return false;
    int64_t nonzeros = A->start[columns];
    for (int64_t j = 0; j < columns; j++)
        if (A->start[j + 1] < A->start[j] || A->start[j + 1] > nonzeros) return false;
    for (int64_t j = 0; j < columns; j++)
        for (int64_t p = A->start[j], last = -1; p < A->start[j + 1]; last = A->index[p++])
            if (A->index[p] <= last || A->index[p] >= rows || !isfinite(A->value[p]) ||
                (A->low != NULL && !isfinite(A->low[p])))
                return false;
    return true;
}

static bool block_holds(const lw_problem *problem, int64_t k)
{
    const lw_covariance *V = problem->covariance;
    int64_t size = V->start[k + 1] - V->start[k];
    const double *value = V->value + V->value_start[k], *low = V->low + V->value_start[k];
    for (int64_t i = 0; i < size; i++) {
        int32_t member = V->member[V->start[k] + i];
        if (member < 0 || member >= problem->m || V->block_of[member] != k) return false;
        if (i > 0 && member <= V->member[V->start[k] + i - 1]) return false;
        for (int64_t j = 0; j < size; j++) {
            int64_t at = i * size + j;
            if (!isfinite(value[at]) || !isfinite(low[at]) || value[at] != value[j * size + i]) return false;
        }
        if (!(value[i * size + i] > 0.0)) return false;
    }
    return true;
}

/* Sizes first, so that no block reaches beyond its arrays. */
static bool covariance_holds(const lw_problem *problem)
{
    const lw_covariance *V = problem->covariance;
    int64_t correlated = 0, members = V->start[V->blocks], values = V->value_start[V->blocks];
    if (problem->sigma == NULL || V->start[0] != 0 || V->value_start[0] != 0 || members > problem->m)
        return false;
    for (int64_t k = 0; k < V->blocks; k++) {
        if (V->start[k] < 0 || V->start[k + 1] > members || V->start[k + 1] < V->start[k]) return false;
        int64_t size = V->start[k + 1] - V->start[k], from = V->value_start[k], to = V->value_start[k + 1];
        if (size < 2 || from < 0 || to > values || to - from != size * size) return false;
    }
    for (int64_t k = 0; k < V->blocks; k++)
        if (!block_holds(problem, k)) return false;
    for (int64_t i = 0; i < problem->m; i++) {
        if (V->block_of[i] < -1 || V->block_of[i] >= V->blocks) return false;
        correlated += V->block_of[i] >= 0;
    }
    return correlated == members;
}

/* Rows with names of their own: both or neither, and as many. */
static bool rows_hold(const lw_sparse *A, const lw_ids *names, int64_t columns)
{
    if (A == NULL || names == NULL) return A == NULL && names == NULL;
    return matrix_holds(A, lw_ids_count(names), columns);
}

lw_status lw_pack_check(const lw_problem *problem, const lw_pack_sizes *sizes, const char *path,
                        lw_error *error)
{
    const char *fault = NULL;
    if (problem->observations == NULL || lw_ids_count(problem->observations) != problem->m ||
        problem->value == NULL)
        fault = "observations";
    else if (problem->parameters == NULL || lw_ids_count(problem->parameters) != problem->n)
        fault = "parameters";
    else if (!matrix_holds(problem->design, problem->m, problem->n))
        fault = "design";
    else if (!rows_hold(problem->penalty, problem->penalty_rows, problem->n))
        fault = "penalty";
    else if (!rows_hold(problem->conditions, problem->condition_names, problem->n) ||
             sizes->conditions != (problem->conditions != NULL ? problem->conditions->rows : 0) ||
             (problem->conditions != NULL && problem->conditions->low == NULL))
        fault = "conditions";
    else if (problem->covariance != NULL && !covariance_holds(problem))
        fault = "blocks";
    else
        fault = faulty_array(problem, sizes);
    if (fault == NULL) return LW_OK;
    return lw_fail(error, LW_BAD_INPUT,
                   "%s: found a section '%s' that no problem can have, expected the pack as it was written",
                   path, fault);
}
