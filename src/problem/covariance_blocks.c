/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Blocks of correlated observations: the connected components of the stated pairs, members in the order of
 * the observations. An observation of which only the variance is stated stays uncorrelated, with sigma =
 * sqrt(variance). */
#include "problem/read.h"

#include "core/memory.h"
#include "matrix/dense.h"

#include <math.h>
#include <stdio.h>

static int32_t root_of(int32_t *parent, int32_t i)
{
    while (parent[i] != i) i = parent[i] = parent[parent[i]];
    return i;
}

static lw_status set_sigma(lw_reading *reading, const lw_covariance_entry *entries, int64_t count,
                           lw_decimal *variance)
{
    lw_problem *p = reading->problem;
    if (p->sigma == NULL) {
        p->sigma = LW_NEW_ARRAY(double, p->m);
        p->sigma_low = LW_NEW_ZEROS(double, p->m);
        if (p->sigma == NULL || p->sigma_low == NULL)
            return lw_fail_memory(reading->error, "sigmas", (size_t)p->m * 16);
        for (int64_t i = 0; i < p->m; i++) p->sigma[i] = (double)NAN;
    }
    for (int64_t k = 0; k < count; k++) {
        const lw_covariance_entry *e = entries + k;
        if (e->a != e->b) continue;
        lw_decimal sigma = lw_decimal_sqrt(e->value);
        p->sigma[e->a] = sigma.high;
        p->sigma_low[e->a] = sigma.low;
        variance[e->a] = e->value;
    }
    for (int64_t i = 0; i < p->m; i++)
        if (variance[i].high == 0.0) {
            lw_decimal sigma = {p->sigma[i], p->sigma_low[i]};
            variance[i] = lw_decimal_multiply(sigma, sigma);
        }
    return LW_OK;
}

/* Observations that have a sigma from neither file. */
static bool refuse_missing(lw_reading *reading)
{
    lw_problem *p = reading->problem;
    lw_input input = {.reading = reading, .csv = reading->observations};
    int c = reading->sigma_column >= 0 ? reading->sigma_column
                                       : lw_csv_find(reading->observations, "observation");
    int told = 0;
    for (int64_t i = 0; i < p->m && told < LW_MOST_FAULTS; i++) {
        if (!isnan(p->sigma[i])) continue;
        lw_input_refuse(&input, i, c, "a positive sigma, or a variance in the covariance file", "%s",
                        reading->sigma_column >= 0 ? "an empty field" : "an observation without sigma");
        told++;
    }
    return told > 0;
}

/* Joins the pairs and numbers the blocks by their first observation. */
static lw_status find_blocks(lw_reading *reading, const lw_covariance_entry *entries, int64_t count,
                             lw_covariance *V)
{
    int64_t m = reading->problem->m;
    lw_status status = LW_OK;
    int32_t *parent = LW_NEW_ARRAY(int32_t, m), *size = LW_NEW_ZEROS(int32_t, m),
            *number = LW_NEW_ARRAY(int32_t, m);
    V->block_of = LW_NEW_ARRAY(int32_t, m);
    if (!parent || !size || !number || !V->block_of) {
        status = lw_fail_memory(reading->error, "covariance blocks", (size_t)m * 16);
        goto out;
    }
    for (int64_t i = 0; i < m; i++) parent[i] = (int32_t)i;
    for (int64_t k = 0; k < count; k++) {
        int32_t a = root_of(parent, entries[k].a), b = root_of(parent, entries[k].b);
        if (a != b) parent[a > b ? a : b] = a < b ? a : b;
    }
    for (int64_t i = 0; i < m; i++) size[root_of(parent, (int32_t)i)]++;
    for (int64_t i = 0; i < m; i++) {
        int32_t root = root_of(parent, (int32_t)i); /* the smallest member, so it is met first */
        if (root == i) number[i] = size[i] > 1 ? (int32_t)V->blocks++ : -1;
        V->block_of[i] = number[root];
    }
out:
    lw_free(parent);
    lw_free(size);
    lw_free(number);
    return status;
}

static lw_status lay_out(lw_reading *reading, lw_covariance *V)
{
    int64_t m = reading->problem->m, blocks = V->blocks;
    V->start = LW_NEW_ZEROS(int64_t, blocks + 1);
    V->value_start = LW_NEW_ZEROS(int64_t, blocks + 1);
    V->member = LW_NEW_ARRAY(int32_t, m);
    if (!V->start || !V->value_start || !V->member)
        return lw_fail_memory(reading->error, "covariance blocks", (size_t)m * 4);
    for (int64_t i = 0; i < m; i++)
        if (V->block_of[i] >= 0) V->start[V->block_of[i] + 1]++;
    int64_t values = 0;
    for (int64_t k = 0; k < blocks; k++) {
        int64_t size = V->start[k + 1], square = lw_bytes(size, size);
        if (__builtin_add_overflow(values, square, &values)) values = INT64_MAX;
        V->value_start[k + 1] = values;
        V->start[k + 1] += V->start[k];
    }
    lw_status status =
        lw_watch_budget(reading->watch, lw_bytes(values, 24), "the covariance blocks",
                        "the stated pairs tie too many observations into one block", reading->error);
    if (status != LW_OK) return status;
    V->value = LW_NEW_ZEROS(double, values);
    V->low = LW_NEW_ZEROS(double, values);
    return V->value && V->low ? LW_OK
                              : lw_fail_memory(reading->error, "covariance blocks", (size_t)values * 16);
}

static void put(lw_covariance *V, int64_t block, int64_t i, int64_t j, lw_decimal value)
{
    int64_t size = V->start[block + 1] - V->start[block], at = V->value_start[block];
    V->value[at + i * size + j] = V->value[at + j * size + i] = value.high;
    V->low[at + i * size + j] = V->low[at + j * size + i] = value.low;
}

static lw_status fill(lw_reading *reading, const lw_covariance_entry *entries, int64_t count,
                      const lw_decimal *variance, lw_covariance *V)
{
    int64_t m = reading->problem->m;
    int32_t *place = LW_NEW_ZEROS(int32_t, m); /* of an observation within its block */
    int32_t *used = LW_NEW_ZEROS(int32_t, V->blocks);
    if (place == NULL || used == NULL) {
        lw_free(place);
        lw_free(used);
        return lw_fail_memory(reading->error, "covariance blocks", (size_t)m * 4);
    }
    for (int64_t i = 0; i < m; i++) {
        int32_t block = V->block_of[i];
        if (block < 0) continue;
        place[i] = used[block]++;
        V->member[V->start[block] + place[i]] = (int32_t)i;
        put(V, block, place[i], place[i], variance[i]);
    }
    for (int64_t k = 0; k < count; k++) {
        const lw_covariance_entry *e = entries + k;
        if (e->a != e->b) put(V, V->block_of[e->a], place[e->a], place[e->b], e->value);
    }
    lw_free(place);
    lw_free(used);
    return LW_OK;
}

/* Observations of a block, the first few by name. */
static void name_members(const lw_problem *problem, int64_t block, char *text, size_t room)
{
    const lw_covariance *V = problem->covariance;
    int64_t size = V->start[block + 1] - V->start[block];
    size_t used = 0;
    text[0] = '\0';
    for (int64_t i = 0; i < size && used + LW_SHOWN + 32 < room; i++) {
        char shown[LW_SHOWN];
        used += (size_t)snprintf(text + used, room - used, "%s%s", i > 0 ? ", " : "",
                                 lw_show_id(problem->observations, V->member[V->start[block] + i], shown));
        if (i == 7 && size > 8) {
            (void)snprintf(text + used, room - used, " and %lld more", (long long)(size - 8));
            break;
        }
    }
}

static void refuse_block(lw_input *input, int64_t block, const lw_covariance_entry *entries, int64_t count,
                         int column)
{
    const lw_problem *problem = input->reading->problem;
    char names[760];
    int64_t row = INT64_MAX;
    for (int64_t k = 0; k < count; k++)
        if (problem->covariance->block_of[entries[k].a] == block && entries[k].row < row)
            row = entries[k].row;
    name_members(problem, block, names, sizeof names);
    lw_input_refuse(input, row, column, "a positive definite one",
                    "a covariance block that is not positive definite (observations %s)", names);
}

/* Cholesky of the correlations, which are free of units. */
static lw_status check_block(const lw_problem *problem, int64_t block, double *work, bool *positive,
                             lw_error *error)
{
    const lw_covariance *V = problem->covariance;
    const int32_t *member = V->member + V->start[block];
    int64_t size = V->start[block + 1] - V->start[block], defect;
    const double *value = V->value + V->value_start[block];
    *positive = true;
    for (int64_t i = 0; i < size; i++)
        for (int64_t j = 0; j < size; j++) {
            double c = value[i * size + j] / problem->sigma[member[i]] / problem->sigma[member[j]];
            if (!isfinite(c)) *positive = false;
            work[i * size + j] = c;
        }
    if (!*positive) return LW_OK;
    lw_error own = {0};
    lw_status status = lw_dense_cholesky(size, work, &defect, &own);
    if (status == LW_UNSOLVABLE) *positive = false;
    return status == LW_OK || status == LW_UNSOLVABLE ? LW_OK : lw_fail(error, status, "%s", own.text);
}

static lw_status check_blocks(lw_input *input, const lw_covariance_entry *entries, int64_t count, int column)
{
    const lw_covariance *V = input->reading->problem->covariance;
    int64_t largest = 0;
    lw_status status = LW_OK;
    for (int64_t k = 0; k < V->blocks; k++)
        if (V->value_start[k + 1] - V->value_start[k] > largest)
            largest = V->value_start[k + 1] - V->value_start[k];
    double *work = LW_NEW_ARRAY(double, largest);
    if (work == NULL) return lw_fail_memory(input->reading->error, "covariance blocks", (size_t)largest * 8);
    int told = 0;
    for (int64_t k = 0; k < V->blocks && status == LW_OK && told < LW_MOST_FAULTS; k++) {
        bool positive;
        status = check_block(input->reading->problem, k, work, &positive, input->reading->error);
        if (status != LW_OK || positive) continue;
        refuse_block(input, k, entries, count, column);
        told++;
    }
    lw_free(work);
    return status;
}

lw_status lw_covariance_make(lw_input *input, const lw_covariance_entry *entries, int64_t count, int column)
{
    lw_reading *reading = input->reading;
    lw_problem *problem = reading->problem;
    lw_decimal *variance = LW_NEW_ZEROS(lw_decimal, problem->m);
    lw_covariance *V = LW_NEW(lw_covariance);
    lw_status status = LW_OK;
    problem->covariance = V;
    if (variance == NULL || V == NULL) {
        status = lw_fail_memory(reading->error, "covariance blocks", (size_t)problem->m * sizeof(lw_decimal));
        goto out;
    }
    status = set_sigma(reading, entries, count, variance);
    if (status != LW_OK) goto out;
    bool complete = !refuse_missing(reading);
    if (complete) status = find_blocks(reading, entries, count, V);
    if (complete && status == LW_OK && V->blocks > 0) {
        status = lay_out(reading, V);
        if (status == LW_OK) status = fill(reading, entries, count, variance, V);
        if (status == LW_OK) status = check_blocks(input, entries, count, column);
    }
    if (status == LW_OK && V->blocks == 0) { /* variances only */
        lw_free(V->block_of);
        lw_free(V);
        problem->covariance = NULL;
    }
out:
    lw_free(variance);
    return status;
}
