/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The whitened columns: their norms, the explicit matrix, the operator.
 *
 * An uncorrelated row keeps its place in a column. A column that touches a correlated block from member i on
 * fills members i, i+1, ... of it (forward substitution), so it is walked with the block gathered in a dense
 * vector. */
#include "core/memory.h"
#include "matrix/dense.h"
#include "problem/system_part.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

typedef struct entry {
    int64_t row;
    int32_t block;
    double value;
} entry;

typedef struct walk {
    entry *given, *made; /* observations each, or NULL when nothing is correlated */
    int64_t *prior_row;  /* columns: row of the weighted prior, -1 none; NULL when there are none */
} walk;

static void walk_clear(walk *work)
{
    lw_free(work->given);
    lw_free(work->made);
    lw_free(work->prior_row);
    *work = (walk){0};
}

static lw_status walk_new(const lw_system *system, walk *work, lw_error *error)
{
    *work = (walk){0};
    int failed = 0;
    if (system->problem->covariance != NULL) {
        work->given = LW_NEW_ARRAY(entry, system->observations);
        work->made = LW_NEW_ARRAY(entry, system->observations);
        failed = work->given == NULL || work->made == NULL;
    }
    if (system->priors > 0) {
        work->prior_row = LW_NEW_ARRAY(int64_t, system->columns);
        failed |= work->prior_row == NULL;
    }
    if (failed) {
        walk_clear(work);
        return lw_fail_memory(error, "whitening", (size_t)system->rows * sizeof(entry));
    }
    if (system->priors == 0) return LW_OK;
    for (int64_t c = 0; c < system->columns; c++) work->prior_row[c] = -1;
    for (int64_t k = 0; k < system->priors; k++)
        work->prior_row[system->column_of[system->prior_parameter[k]]] = system->observations + k;
    return LW_OK;
}

static int by_block(const void *a, const void *b)
{
    const entry *p = a, *q = b;
    if (p->block != q->block) return p->block < q->block ? -1 : 1;
    return (p->row > q->row) - (p->row < q->row);
}

static int by_row(const void *a, const void *b)
{
    const entry *p = a, *q = b;
    return (p->row > q->row) - (p->row < q->row);
}

/* Whitens `count` entries of one block; writes the members that it fills and returns how many. */
static int64_t fill_block(const lw_system *system, const entry *from, int64_t count, entry *to)
{
    const lw_covariance *covariance = system->problem->covariance;
    int64_t k = from->block, size = covariance->start[k + 1] - covariance->start[k], first = size, made = 0;
    const int32_t *member = covariance->member + covariance->start[k];
    double *part = system->block_scratch;
    memset(part, 0, (size_t)size * sizeof *part);
    for (int64_t e = 0; e < count; e++) {
        int32_t place = system->block_place[from[e].row];
        part[place] = from[e].value * system->row_weight[from[e].row];
        if (place < first) first = place;
    }
    lw_dense_triangle_solve(size, system->block_factor + covariance->value_start[k], 1, 1, 1, part, size);
    for (int64_t i = first; i < size; i++)
        to[made++] = (entry){member[i], (int32_t)k, part[i] * system->row_weight[member[i]]};
    return made;
}

/* Column c with correlated blocks, in work->made, rows increasing. */
static int64_t walk_correlated(const lw_system *system, const walk *work, int64_t c)
{
    const lw_sparse *A = system->problem->design;
    int64_t j = system->parameter_of[c], given = 0, made = 0;
    for (int64_t p = A->start[j]; p < A->start[j + 1]; p++) {
        int32_t i = A->index[p], block = lw_system_block(system, i);
        if (block < 0)
            work->made[made++] = (entry){i, block, A->value[p] * system->row_weight[i]};
        else
            work->given[given++] = (entry){i, block, A->value[p]};
    }
    if (given == 0) return made;
    qsort(work->given, (size_t)given, sizeof(entry), by_block);
    for (int64_t e = 0, next; e < given; e = next) {
        for (next = e + 1; next < given && work->given[next].block == work->given[e].block;) next++;
        made += fill_block(system, work->given + e, next - e, work->made + made);
    }
    qsort(work->made, (size_t)made, sizeof(entry), by_row);
    return made;
}

/* Number of entries of whitened column c; index and value are filled unless NULL, and times `by`. */
static int64_t walk_column(const lw_system *system, const walk *work, int64_t c, double by, int32_t *index,
                           double *value)
{
    const lw_sparse *A = system->problem->design;
    int64_t j = system->parameter_of[c], count = A->start[j + 1] - A->start[j];
    if (work->made != NULL) {
        count = walk_correlated(system, work, c);
        for (int64_t e = 0; index != NULL && e < count; e++) {
            index[e] = (int32_t)work->made[e].row;
            value[e] = work->made[e].value * by;
        }
    } else if (index != NULL) {
        const int32_t *row = A->index + A->start[j];
        const double *a = A->value + A->start[j];
        for (int64_t e = 0; e < count; e++) {
            index[e] = row[e];
            value[e] = a[e] * system->row_weight[row[e]] * by;
        }
    }
    if (work->prior_row == NULL || work->prior_row[c] < 0) return count;
    if (index != NULL) {
        index[count] = (int32_t)work->prior_row[c];
        value[count] = system->row_weight[work->prior_row[c]] * by;
    }
    return count + 1;
}

/* ||v||, safe from overflow and underflow. */
static double norm_of(int64_t count, const double *v)
{
    double largest = 0.0, sum = 0.0;
    for (int64_t e = 0; e < count; e++) sum += v[e] * v[e];
    if (sum > 1e-280 && sum < 1e280) return sqrt(sum);
    for (int64_t e = 0; e < count; e++) largest = fmax(largest, fabs(v[e]));
    if (largest == 0.0) return 0.0;
    sum = 0.0;
    for (int64_t e = 0; e < count; e++) sum += (v[e] / largest) * (v[e] / largest);
    return largest * sqrt(sum);
}

lw_status lw_system_scale(lw_system *system, lw_error *error)
{
    walk work = {0};
    int32_t *index = LW_NEW_ARRAY(int32_t, system->rows);
    double *value = LW_NEW_ARRAY(double, system->rows);
    lw_status status = LW_OK;
    system->scale = LW_NEW_ARRAY(double, system->columns);
    if (index == NULL || value == NULL || system->scale == NULL)
        status = lw_fail_memory(error, "column scales", (size_t)(system->rows * 12 + system->columns * 8));
    if (status == LW_OK) status = walk_new(system, &work, error);
    for (int64_t c = 0; status == LW_OK && c < system->columns; c++) {
        int64_t count = walk_column(system, &work, c, 1.0, index, value);
        system->scale[c] = lw_system_power(norm_of(count, value));
    }
    walk_clear(&work);
    lw_free(index);
    lw_free(value);
    return status;
}

lw_status lw_system_matrix(lw_system *system, const lw_watch *watch, lw_error *error)
{
    if (system->matrix != NULL) return LW_OK;
    walk work;
    int64_t count = 0;
    lw_status status = walk_new(system, &work, error);
    if (status != LW_OK) return status;
    for (int64_t c = 0; c < system->columns; c++) count += walk_column(system, &work, c, 1.0, NULL, NULL);
    status = lw_watch_budget(watch, lw_bytes(count, 12), "the whitened matrix",
                             "use an iterative engine (lsqr)", error);
    lw_sparse *A = NULL;
    if (status == LW_OK) status = lw_sparse_new(system->rows, system->columns, count, 0, &A, error);
    if (status == LW_OK) {
        count = 0;
        for (int64_t c = 0; c < system->columns; c++) {
            A->start[c] = count;
            count += walk_column(system, &work, c, system->scale[c], A->index + count, A->value + count);
        }
        A->start[system->columns] = count;
        system->matrix = A;
    }
    walk_clear(&work);
    return status;
}

/* Observations only, one weight a row, every parameter free: the design itself will do. */
static int stands_on_design(const lw_system *system)
{
    return system->priors == 0 && system->problem->covariance == NULL &&
           system->columns == system->problem->n;
}

/* factor_j times `by_j`, or NULL when that is 1 everywhere. *made is to be freed. */
static lw_status join_scales(int64_t n, const double *factor, const double *by, double **made,
                             lw_error *error)
{
    int plain = 1;
    *made = LW_NEW_ARRAY(double, n);
    if (*made == NULL) return lw_fail_memory(error, "column scales", (size_t)n * sizeof **made);
    for (int64_t j = 0; j < n; j++) {
        (*made)[j] = (factor == NULL ? 1.0 : factor[j]) * (by == NULL ? 1.0 : by[j]);
        plain &= (*made)[j] == 1.0;
    }
    if (!plain) return LW_OK;
    lw_free(*made);
    *made = NULL;
    return LW_OK;
}

lw_status lw_system_operator_times(lw_system *system, const lw_product_options *product, const double *by,
                                   const lw_watch *watch, lw_operator **out, lw_error *error)
{
    *out = NULL;
    lw_product_options options = {0};
    if (product != NULL) options = *product;
    if (options.team == NULL) options.team = lw_watch_team(watch);
    lw_operator *A = NULL;
    double *scale = NULL;
    lw_status status = LW_OK;
    int direct = stands_on_design(system),
        plain = system->problem->sigma == NULL && system->row_factor == NULL;
    options.row_scale = direct && !plain ? system->row_weight : NULL;
    if (!direct) status = lw_system_matrix(system, watch, error);
    if (status == LW_OK)
        status = join_scales(system->columns, direct ? system->scale : NULL, by, &scale, error);
    if (status == LW_OK)
        status = lw_product_new(direct ? system->problem->design : system->matrix, &options, &A, error);
    if (status == LW_OK && scale != NULL) status = lw_operator_scaled(A, 1, NULL, scale, out, error);
    if (status == LW_OK && scale == NULL) *out = A;
    if (status != LW_OK) lw_operator_free(A);
    lw_free(scale);
    return status;
}

lw_status lw_system_operator(lw_system *system, const lw_product_options *product, const lw_watch *watch,
                             lw_operator **out, lw_error *error)
{
    return lw_system_operator_times(system, product, NULL, watch, out, error);
}
