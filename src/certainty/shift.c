/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/shift.h"

#include "core/memory.h"

#include <math.h>
#include <string.h>

#define ROWS_A_SOLVE 32

lw_status lw_shift_new(int64_t rows, lw_shift *out, lw_error *error)
{
    out->size = LW_NEW_ARRAY(double, rows);
    out->parameter = LW_NEW_ARRAY(int64_t, rows);
    if (!out->size || !out->parameter) return lw_fail_memory(error, "largest shifts", (size_t)rows * 16);
    for (int64_t i = 0; i < rows; i++) out->size[i] = (double)NAN, out->parameter[i] = -1;
    return LW_OK;
}

void lw_shift_clear(lw_shift *shift)
{
    lw_free(shift->size);
    lw_free(shift->parameter);
    *shift = (lw_shift){0};
}

bool lw_shift_is_cheap(const lw_equations *equations, const lw_cofactor *cofactor)
{
    double a_row = 4 * cofactor->factor_nonzeros + 8 * (double)cofactor->columns;
    const lw_covariance *covariance = equations->system->problem->covariance;
    if (cofactor->kind == LW_COFACTOR_DENSE)
        a_row = 2 * (double)cofactor->columns * (double)cofactor->columns;
    if (covariance)
        a_row += 2 * (double)equations->system->problem->m /
                 (double)(covariance->blocks > 0 ? covariance->blocks : 1);
    return (double)equations->system->rows * a_row <= LW_SHIFT_WORK;
}

/* g <- A' P e_i of the rows i of the batch. weights: P of the block that was met last. */
typedef struct block_weights {
    int64_t block, size, *member;
    double *weights;
} block_weights;

static lw_status load_block(const lw_equations *equations, int64_t block, block_weights *b, lw_error *error)
{
    if (b->block == block) return LW_OK;
    lw_free(b->member);
    lw_free(b->weights);
    *b = (block_weights){.block = block};
    return lw_equation_weights(equations, block, &b->size, &b->member, &b->weights, error);
}

static lw_status add_side(const lw_equations *equations, int64_t i, block_weights *b, int64_t *column,
                          double *a, double *g, lw_error *error)
{
    int64_t block = lw_equation_block(equations, i), at = 0;
    if (block < 0) {
        double w = lw_equation_factor(equations, i) / lw_equation_sigma(equations, i);
        int64_t count = lw_equation_row(equations, i, column, a);
        for (int64_t k = 0; k < count; k++) g[column[k]] += w * w * a[k];
        return LW_OK;
    }
    lw_status status = load_block(equations, block, b, error);
    if (status != LW_OK) return status;
    while (at < b->size && b->member[at] != i) at++;
    for (int64_t l = 0; l < b->size && at < b->size; l++) {
        double weight = b->weights[l + at * b->size];
        int64_t count = lw_equation_row(equations, b->member[l], column, a);
        for (int64_t k = 0; k < count; k++) g[column[k]] += weight * a[k];
    }
    return LW_OK;
}

void lw_shift_take(const lw_system *system, int64_t i, int64_t count, const int64_t *column, const double *z,
                   lw_shift *out)
{
    double largest = 0;
    for (int64_t k = 0; k < count; k++) {
        int64_t j = column ? column[k] : k;
        double shift = z[k] * system->scale[j];
        if (!(fabs(shift) > largest)) continue;
        largest = fabs(shift);
        out->size[i] = shift;
        out->parameter[i] = system->parameter_of[j];
    }
}

lw_status lw_shift_of_all(const lw_equations *equations, lw_cofactor *cofactor, const lw_watch *watch,
                          lw_shift *out, lw_error *error)
{
    const lw_system *system = equations->system;
    int64_t rows = system->rows, n = system->columns;
    block_weights b = {.block = -1};
    lw_status status = lw_shift_new(rows, out, error);
    int64_t *column = LW_NEW_ARRAY(int64_t, equations->longest);
    double *a = LW_NEW_ARRAY(double, equations->longest), *g = LW_NEW_ARRAY(double, n *ROWS_A_SOLVE);
    if (status == LW_OK && !(column && a && g))
        status = lw_fail_memory(error, "largest shifts", (size_t)n * 8 * ROWS_A_SOLVE);
    for (int64_t from = 0; from < rows && status >= LW_OK; from += ROWS_A_SOLVE) {
        int64_t k = rows - from < ROWS_A_SOLVE ? rows - from : ROWS_A_SOLVE;
        memset(g, 0, (size_t)(n * k) * sizeof *g);
        for (int64_t l = 0; l < k && status >= LW_OK; l++)
            if (lw_equation_factor(equations, from + l) != 0)
                status = add_side(equations, from + l, &b, column, a, g + l * n, error);
        if (status >= LW_OK) status = lw_cofactor_apply(cofactor, k, g, error);
        for (int64_t l = 0; l < k && status >= LW_OK; l++)
            lw_shift_take(system, from + l, n, NULL, g + l * n, out);
        if (lw_watch_cancelled(watch))
            status = lw_fail(error, LW_INTERRUPTED, "interrupted during the largest shifts");
    }
    lw_free(b.member);
    lw_free(b.weights);
    lw_free(column);
    lw_free(a);
    lw_free(g);
    return status > LW_OK && status != LW_INTERRUPTED ? LW_OK : status;
}

/* Adds a column to a list without repeats; returns its place. */
static int64_t place_of(int64_t column, int64_t *list, double *g, int64_t *count)
{
    int64_t at = 0;
    while (at < *count && list[at] != column) at++;
    if (at == *count) {
        list[at] = column;
        g[at] = 0;
        ++*count;
    }
    return at;
}

/* Largest entry of Q g over the columns where g = A' P e_i has entries, for every member of a block. */
static lw_status own_block(const lw_equations *equations, const lw_cofactor *cofactor, int64_t block,
                           lw_shift *out, lw_error *error)
{
    block_weights b = {.block = -1};
    lw_status status = load_block(equations, block, &b, error);
    int64_t room = equations->longest, most = b.size * room;
    int64_t *column = LW_NEW_ARRAY(int64_t, room), *list = LW_NEW_ARRAY(int64_t, most);
    double *a = LW_NEW_ARRAY(double, room), *g = LW_NEW_ARRAY(double, most), *z = LW_NEW_ARRAY(double, most);
    if (status == LW_OK && !(column && list && a && g && z))
        status = lw_fail_memory(error, "largest shifts", (size_t)most * 24);
    for (int64_t i = 0; i < b.size && status == LW_OK; i++) {
        int64_t count = 0;
        for (int64_t l = 0; l < b.size; l++) {
            int64_t entries = lw_equation_row(equations, b.member[l], column, a);
            for (int64_t k = 0; k < entries; k++)
                g[place_of(column[k], list, g, &count)] += b.weights[l + i * b.size] * a[k];
        }
        for (int64_t k = 0; k < count; k++) {
            z[k] = 0;
            for (int64_t l = 0; l < count; l++) z[k] += g[l] * lw_cofactor_entry(cofactor, list[k], list[l]);
        }
        lw_shift_take(equations->system, b.member[i], count, list, z, out);
    }
    lw_free(b.member);
    lw_free(b.weights);
    lw_free(column);
    lw_free(list);
    lw_free(a);
    lw_free(g);
    lw_free(z);
    return status;
}

lw_status lw_shift_of_blocks(const lw_equations *equations, const lw_cofactor *cofactor, lw_shift *out,
                             lw_error *error)
{
    const lw_covariance *covariance = equations->system->problem->covariance;
    lw_status status = LW_OK;
    for (int64_t b = 0; covariance && b < covariance->blocks && status == LW_OK; b++)
        status = own_block(equations, cofactor, b, out, error);
    return status;
}
