/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/component.h"

#include "core/memory.h"

static int32_t root_of(int32_t *parent, int32_t j)
{
    while (parent[j] != j) j = parent[j] = parent[parent[j]];
    return j;
}

static bool is_fixed(const lw_problem *problem, int64_t j)
{
    return problem->fixed != NULL && problem->fixed[j];
}

/* Joins all free parameters of an observation to the first of them, which is left in first. */
static void join(const lw_problem *problem, int32_t *parent, int32_t *first)
{
    const lw_sparse *A = problem->design;
    for (int64_t i = 0; i < problem->m; i++) first[i] = -1;
    for (int64_t j = 0; j < problem->n; j++) {
        parent[j] = (int32_t)j;
        if (is_fixed(problem, j)) continue;
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++) {
            int32_t *at = first + A->index[p];
            if (A->value[p] == 0.0) continue;
            if (*at < 0) {
                *at = (int32_t)j;
                continue;
            }
            int32_t a = root_of(parent, *at), b = root_of(parent, (int32_t)j);
            if (a != b) parent[a > b ? a : b] = a < b ? a : b; /* the smallest is the root */
        }
    }
}

lw_status lw_components_find(const lw_problem *problem, lw_components *out, lw_error *error)
{
    int64_t m = problem->m, n = problem->n;
    *out = (lw_components){0};
    int32_t *parent = LW_NEW_ARRAY(int32_t, n);
    out->of_parameter = LW_NEW_ARRAY(int32_t, n);
    out->of_observation = LW_NEW_ARRAY(int32_t, m);
    if (!parent || !out->of_parameter || !out->of_observation) goto no_memory;
    join(problem, parent, out->of_observation);
    for (int64_t j = 0; j < n; j++) {
        int32_t root = root_of(parent, (int32_t)j);
        out->of_parameter[j] = is_fixed(problem, j) ? -1
                               : root == j          ? (int32_t)out->count++
                                                    : out->of_parameter[root];
    }
    out->parameters = LW_NEW_ZEROS(int64_t, out->count);
    out->observations = LW_NEW_ZEROS(int64_t, out->count);
    if (!out->parameters || !out->observations) goto no_memory;
    for (int64_t j = 0; j < n; j++)
        if (out->of_parameter[j] >= 0) out->parameters[out->of_parameter[j]]++;
    for (int64_t i = 0; i < m; i++) {
        if (out->of_observation[i] < 0) continue;
        out->of_observation[i] = out->of_parameter[out->of_observation[i]];
        out->observations[out->of_observation[i]]++;
    }
    lw_free(parent);
    return LW_OK;
no_memory:
    lw_free(parent);
    lw_components_clear(out);
    return lw_fail_memory(error, "connected components", (size_t)(m + 3 * n) * 4);
}

void lw_components_clear(lw_components *components)
{
    lw_free(components->of_parameter);
    lw_free(components->of_observation);
    lw_free(components->parameters);
    lw_free(components->observations);
    *components = (lw_components){0};
}
