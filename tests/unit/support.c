/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "support.h"

#include "core/decimal.h"
#include "core/memory.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static void *sure(void *block)
{
    if (block == NULL) abort();
    return block;
}

static double *copy_doubles(const double *from, int64_t count)
{
    if (from == NULL) return NULL;
    double *copy = sure(LW_NEW_ARRAY(double, count));
    memcpy(copy, from, (size_t)count * sizeof *copy);
    return copy;
}

static lw_ids *number_ids(char letter, int64_t count)
{
    lw_ids *ids = NULL;
    char text[32];
    if (lw_ids_new(count, &ids, NULL) != LW_OK) abort();
    for (int64_t i = 0; i < count; i++) {
        int length = snprintf(text, sizeof text, "%c%lld", letter, (long long)i + 1), added;
        int64_t number;
        if (lw_ids_add(ids, text, (size_t)length, &number, &added, NULL) != LW_OK) abort();
    }
    return ids;
}

lw_sparse *sparse_from_dense(int64_t m, int64_t n, const double *A)
{
    int64_t count = 0, place = 0;
    for (int64_t k = 0; k < m * n; k++) count += A[k] != 0.0;
    lw_sparse *S = NULL;
    if (lw_sparse_new(m, n, count, 0, &S, NULL) != LW_OK) abort();
    for (int64_t j = 0; j < n; j++) {
        S->start[j] = place;
        for (int64_t i = 0; i < m; i++) {
            if (A[i * n + j] == 0.0) continue;
            S->index[place] = (int32_t)i;
            S->value[place++] = A[i * n + j];
        }
    }
    S->start[n] = place;
    return S;
}

lw_problem *problem_from_sparse(lw_sparse *A, const double *value, const double *sigma)
{
    lw_problem *problem = sure(LW_NEW(lw_problem));
    problem->m = A->rows;
    problem->n = A->columns;
    problem->design = A;
    problem->observations = number_ids('o', A->rows);
    problem->parameters = number_ids('p', A->columns);
    problem->value = copy_doubles(value, A->rows);
    problem->sigma = copy_doubles(sigma, A->rows);
    problem->value_unit = sure(lw_copy_text(""));
    problem->parameter_unit = sure(lw_copy_text(""));
    problem->folder = sure(lw_copy_text("test"));
    return problem;
}

lw_problem *problem_from_dense(int64_t m, int64_t n, const double *A, const double *value,
                               const double *sigma)
{
    return problem_from_sparse(sparse_from_dense(m, n, A), value, sigma);
}

static void parse_all(int64_t count, const char *const *text, double **high, double **low)
{
    *high = sure(LW_NEW_ARRAY(double, count));
    *low = sure(LW_NEW_ARRAY(double, count));
    for (int64_t k = 0; k < count; k++) {
        lw_decimal number;
        if (lw_decimal_parse(text[k], strlen(text[k]), &number) != LW_NUMBER_FINE) abort();
        (*high)[k] = number.high;
        (*low)[k] = number.low;
    }
}

lw_problem *problem_from_text(int64_t m, int64_t n, const char *const *A, const char *const *value,
                              const char *const *sigma)
{
    double *high, *low, *value_high, *value_low;
    parse_all(m * n, A, &high, &low);
    parse_all(m, value, &value_high, &value_low);
    lw_problem *problem = problem_from_dense(m, n, high, value_high, NULL);
    problem->low_kept = true;
    problem->value_low = value_low;
    if (sigma != NULL) parse_all(m, sigma, &problem->sigma, &problem->sigma_low);
    lw_sparse *S = problem->design;
    if (S->low == NULL) S->low = sure(LW_NEW_ZEROS(double, lw_sparse_nonzeros(S)));
    for (int64_t j = 0; j < n; j++)
        for (int64_t p = S->start[j]; p < S->start[j + 1]; p++) S->low[p] = low[S->index[p] * n + j];
    lw_free(high);
    lw_free(low);
    lw_free(value_high);
    return problem;
}

void problem_set_prior(lw_problem *problem, const double *prior)
{
    problem->prior = copy_doubles(prior, problem->n);
}

static void ensure_damp_weight(lw_problem *problem)
{
    if (problem->damp_weight != NULL) return;
    problem->damp_weight = sure(LW_NEW_ARRAY(double, problem->n));
    for (int64_t j = 0; j < problem->n; j++) problem->damp_weight[j] = 1.0;
}

void problem_set_prior_sigma(lw_problem *problem, const double *prior_sigma)
{
    problem->prior_sigma = copy_doubles(prior_sigma, problem->n);
    ensure_damp_weight(problem);
    for (int64_t j = 0; j < problem->n; j++)
        if (!isnan(prior_sigma[j])) problem->damp_weight[j] = 0.0;
}

void problem_fix(lw_problem *problem, int64_t parameter, double value)
{
    if (problem->fixed == NULL) {
        problem->fixed = sure(LW_NEW_ZEROS(bool, problem->n));
        problem->fixed_value = sure(LW_NEW_ZEROS(double, problem->n));
    }
    problem->fixed[parameter] = true;
    problem->fixed_value[parameter] = value;
}

void problem_set_bounds(lw_problem *problem, const double *lower, const double *upper)
{
    problem->lower = copy_doubles(lower, problem->n);
    problem->upper = copy_doubles(upper, problem->n);
}

void problem_set_damp_weight(lw_problem *problem, const double *weight)
{
    ensure_damp_weight(problem);
    memcpy(problem->damp_weight, weight, (size_t)problem->n * sizeof *weight);
}

void problem_set_datum(lw_problem *problem, const int8_t *datum)
{
    problem->datum = sure(LW_NEW_ARRAY(int8_t, problem->n));
    memcpy(problem->datum, datum, (size_t)problem->n);
}

void problem_set_coordinate(lw_problem *problem, int axis, const double *value)
{
    lw_free(problem->coordinate[axis]);
    problem->coordinate[axis] = copy_doubles(value, problem->n);
}

void problem_set_region(lw_problem *problem, const int32_t *region)
{
    int32_t regions = 0;
    problem->region = sure(LW_NEW_ARRAY(int32_t, problem->n));
    memcpy(problem->region, region, (size_t)problem->n * sizeof *region);
    for (int64_t j = 0; j < problem->n; j++)
        if (region[j] >= regions) regions = region[j] + 1;
    problem->region_names = number_ids('r', regions);
}

static void ensure_covariance(lw_problem *problem)
{
    if (problem->covariance != NULL) return;
    lw_covariance *covariance = problem->covariance = sure(LW_NEW(lw_covariance));
    covariance->start = sure(LW_NEW_ZEROS(int64_t, problem->m + 1));
    covariance->value_start = sure(LW_NEW_ZEROS(int64_t, problem->m + 1));
    covariance->member = sure(LW_NEW_ZEROS(int32_t, problem->m));
    covariance->block_of = sure(LW_NEW_ARRAY(int32_t, problem->m));
    for (int64_t i = 0; i < problem->m; i++) covariance->block_of[i] = -1;
    if (problem->sigma != NULL) return;
    problem->sigma = sure(LW_NEW_ARRAY(double, problem->m));
    for (int64_t i = 0; i < problem->m; i++) problem->sigma[i] = 1.0;
}

void problem_add_block(lw_problem *problem, int64_t size, const int32_t *member, const double *covariance)
{
    ensure_covariance(problem);
    lw_covariance *all = problem->covariance;
    int64_t block = all->blocks++, from = all->start[block], values = all->value_start[block];
    all->value = sure(lw_resize(all->value, (size_t)(values + size * size), sizeof(double)));
    memcpy(all->value + values, covariance, (size_t)(size * size) * sizeof(double));
    for (int64_t k = 0; k < size; k++) {
        all->member[from + k] = member[k];
        all->block_of[member[k]] = (int32_t)block;
        problem->sigma[member[k]] = sqrt(covariance[k * size + k]);
    }
    all->start[block + 1] = from + size;
    all->value_start[block + 1] = values + size * size;
}

void problem_set_penalty(lw_problem *problem, int64_t rows, const double *L)
{
    problem->penalty = sparse_from_dense(rows, problem->n, L);
    problem->penalty_rows = number_ids('l', rows);
}

void problem_set_conditions(lw_problem *problem, int64_t rows, const double *C, const double *d)
{
    problem->conditions = sparse_from_dense(rows, problem->n, C);
    problem->condition_value = copy_doubles(d, rows);
    problem->condition_names = number_ids('c', rows);
}

void problem_set_group(lw_problem *problem, const int32_t *group, int groups)
{
    problem->group = sure(LW_NEW_ARRAY(int32_t, problem->m));
    memcpy(problem->group, group, (size_t)problem->m * sizeof *group);
    problem->group_names = number_ids('g', groups);
}

double next_random(uint64_t *state)
{
    *state = *state * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
    return (double)(*state >> 11) * 0x1p-52 - 1.0;
}
