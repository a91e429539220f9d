/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/check.h"

#include "core/memory.h"
#include "problem/proportional.h"

#include <math.h>
#include <string.h>

#define WIDE_SIGMA 1e4
#define WIDE_COEFFICIENT 1e8
#define WEAKEST 10
#define MOST_GROUP_WARNINGS 8
#define NEAR_THOUSAND 0.1 /* medians within 10 % of a factor 1000 or 1000000 */

static bool is_fixed(const lw_problem *problem, int64_t j)
{
    return problem->fixed != NULL && problem->fixed[j];
}

static bool has_prior(const lw_problem *problem, int64_t j)
{
    return problem->prior_sigma != NULL && !isnan(problem->prior_sigma[j]);
}

/* Whether column j of a matrix, which may be absent, has a coefficient other than 0. */
static bool reaches(const lw_sparse *A, int64_t j)
{
    for (int64_t p = A != NULL ? A->start[j] : 0; A != NULL && p < A->start[j + 1]; p++)
        if (A->value[p] != 0.0) return true;
    return false;
}

static void count_all(const lw_problem *problem, lw_check *out)
{
    out->observations = problem->m;
    out->parameters = problem->n;
    out->nonzeros = lw_sparse_nonzeros(problem->design);
    out->conditions = problem->conditions != NULL ? problem->conditions->rows : 0;
    for (int64_t j = 0; j < problem->n; j++) {
        out->fixed += is_fixed(problem, j);
        out->weighted_priors += has_prior(problem, j) && !is_fixed(problem, j);
    }
    out->degrees_of_freedom =
        out->observations + out->weighted_priors + out->conditions - (out->parameters - out->fixed);
}

static lw_status cover(const lw_problem *problem, lw_check *out, lw_error *error)
{
    const lw_sparse *A = problem->design;
    out->hits = LW_NEW_ZEROS(int64_t, problem->n);
    out->coverage = LW_NEW_ZEROS(double, problem->n);
    if (!out->hits || !out->coverage) return lw_fail_memory(error, "coverage", (size_t)problem->n * 16);
    for (int64_t j = 0; j < problem->n; j++)
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++) {
            out->hits[j] += A->value[p] != 0.0;
            out->coverage[j] += fabs(A->value[p]);
        }
    return LW_OK;
}

static bool weaker(const lw_check *out, int64_t a, int64_t b)
{
    if (out->hits[a] != out->hits[b]) return out->hits[a] < out->hits[b];
    return out->coverage[a] < out->coverage[b];
}

/* The weakest ten by insertion; earlier parameters stand first among equals. */
static void find_weakest(const lw_problem *problem, lw_check *out)
{
    for (int64_t j = 0; j < problem->n; j++) {
        if (is_fixed(problem, j)) continue;
        int at = out->weakest_count;
        while (at > 0 && weaker(out, j, out->weakest[at - 1])) at--;
        if (at >= WEAKEST) continue;
        int last = out->weakest_count < WEAKEST ? out->weakest_count++ : WEAKEST - 1;
        memmove(out->weakest + at + 1, out->weakest + at, (size_t)(last - at) * sizeof(int64_t));
        out->weakest[at] = j;
    }
}

static lw_status find_ranges(const lw_problem *problem, lw_check *out, lw_error *error)
{
    double *hits = LW_NEW_ARRAY(double, problem->n);
    if (hits == NULL) return lw_fail_memory(error, "coverage", (size_t)problem->n * 8);
    for (int64_t j = 0; j < problem->n; j++) hits[j] = (double)out->hits[j];
    lw_status status = lw_range_find(problem->n, hits, false, &out->hit_range, error);
    lw_free(hits);
    if (status == LW_OK)
        status = lw_range_find(out->nonzeros, problem->design->value, true, &out->coefficient_range, error);
    if (status == LW_OK) status = lw_range_find(problem->m, problem->sigma, false, &out->sigma_range, error);
    if (status == LW_OK) status = lw_range_find(problem->m, problem->value, false, &out->value_range, error);
    return status;
}

static lw_status find_zeros(const lw_problem *problem, lw_check *out, lw_error *error)
{
    out->zero_rows = LW_NEW_ARRAY(int64_t, problem->m);
    out->zero_columns = LW_NEW_ARRAY(int64_t, problem->n);
    out->single_hit = LW_NEW_ARRAY(int64_t, problem->n);
    if (!out->zero_rows || !out->zero_columns || !out->single_hit)
        return lw_fail_memory(error, "a check", (size_t)(problem->m + 2 * problem->n) * 8);
    for (int64_t i = 0; i < problem->m; i++)
        if (out->components.of_observation[i] < 0) out->zero_rows[out->zero_row_count++] = i;
    for (int64_t j = 0; j < problem->n; j++) {
        if (is_fixed(problem, j)) continue;
        if (out->hits[j] == 1) out->single_hit[out->single_hit_count++] = j;
        if (out->hits[j] == 0 && !has_prior(problem, j) && !reaches(problem->penalty, j) &&
            !reaches(problem->conditions, j))
            out->zero_columns[out->zero_column_count++] = j;
    }
    return LW_OK;
}

static void warn_of_spread(const lw_range *range, double wide, const char *what, lw_log *log)
{
    if (range->count > 0 && range->largest > wide * range->smallest)
        (void)lw_log_add(log, "%s range over a factor of %.1e, from %.6g to %.6g: are the units mixed up?",
                         what, range->largest / range->smallest, range->smallest, range->largest);
}

/* Medians of absolute values by group; NaN for a group without values. work: m. */
static void group_medians(const lw_problem *problem, int64_t groups, int64_t *start, double *work,
                          double *median)
{
    for (int64_t i = 0; i < problem->m; i++) start[problem->group[i] + 1]++;
    for (int64_t g = 0; g < groups; g++) start[g + 1] += start[g];
    for (int64_t i = 0; i < problem->m; i++) work[start[problem->group[i]]++] = fabs(problem->value[i]);
    for (int64_t g = 0, from = 0; g < groups; from = start[g++]) { /* start[g] is now the end of group g */
        bool known = start[g] > from;
        for (int64_t i = from; i < start[g]; i++) known &= !isnan(work[i]);
        median[g] = known ? lw_median(start[g] - from, work + from) : (double)NAN;
    }
}

static bool thousands_apart(double a, double b)
{
    double ratio = a > b ? a / b : b / a;
    return fabs(ratio / 1e3 - 1.0) < NEAR_THOUSAND || fabs(ratio / 1e6 - 1.0) < NEAR_THOUSAND;
}

/* Groups are compared with the group of the largest number of observations. */
static lw_status warn_of_groups(const lw_problem *problem, lw_log *log, lw_error *error)
{
    if (problem->group == NULL || log == NULL) return LW_OK;
    int64_t groups = lw_ids_count(problem->group_names), main_group = 0, most = 0;
    int64_t *start = LW_NEW_ZEROS(int64_t, groups + 1);
    double *work = LW_NEW_ARRAY(double, problem->m), *median = LW_NEW_ARRAY(double, groups);
    lw_status status = LW_OK;
    if (!start || !work || !median) {
        status = lw_fail_memory(error, "medians of groups", (size_t)(problem->m + 2 * groups) * 8);
        goto out;
    }
    group_medians(problem, groups, start, work, median);
    for (int64_t g = 0; g < groups; g++) {
        int64_t size = start[g] - (g > 0 ? start[g - 1] : 0);
        if (size > most) main_group = g;
        if (size > most) most = size;
    }
    int told = 0;
    for (int64_t g = 0; g < groups && told < MOST_GROUP_WARNINGS; g++) {
        if (g == main_group || !(median[g] > 0.0 && median[main_group] > 0.0)) continue;
        if (!thousands_apart(median[g], median[main_group])) continue;
        (void)lw_log_add(
            log,
            "the values of the groups '%s' and '%s' are a round factor of 1000 apart (medians %.6g and "
            "%.6g): are the units mixed up?",
            lw_ids_name(problem->group_names, main_group), lw_ids_name(problem->group_names, g),
            median[main_group], median[g]);
        told++;
    }
out:
    lw_free(start);
    lw_free(work);
    lw_free(median);
    return status;
}

lw_status lw_check_problem(const lw_problem *problem, lw_log *log, lw_check *out, lw_error *error)
{
    *out = (lw_check){0};
    count_all(problem, out);
    lw_status status = cover(problem, out, error);
    if (status == LW_OK) find_weakest(problem, out);
    if (status == LW_OK) status = find_ranges(problem, out, error);
    if (status == LW_OK) status = lw_components_find(problem, &out->components, error);
    if (status == LW_OK) status = find_zeros(problem, out, error);
    if (status == LW_OK)
        status =
            lw_proportional_rows(problem->design, &out->duplicate_rows, &out->duplicate_row_count, error);
    if (status == LW_OK)
        status = lw_proportional_columns(problem->design, problem->fixed, &out->duplicate_columns,
                                         &out->duplicate_column_count, error);
    if (status == LW_OK) status = warn_of_groups(problem, log, error);
    if (status != LW_OK) {
        lw_check_clear(out);
        return status;
    }
    warn_of_spread(&out->sigma_range, WIDE_SIGMA, "the sigmas", log);
    warn_of_spread(&out->coefficient_range, WIDE_COEFFICIENT, "the coefficients", log);
    return LW_OK;
}

void lw_check_clear(lw_check *check)
{
    lw_free(check->hits);
    lw_free(check->coverage);
    lw_free(check->zero_rows);
    lw_free(check->zero_columns);
    lw_free(check->single_hit);
    lw_free(check->duplicate_rows);
    lw_free(check->duplicate_columns);
    lw_components_clear(&check->components);
    *check = (lw_check){0};
}
