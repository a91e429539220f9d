/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/standard_part.h"

#include "core/memory.h"

#include <math.h>
#include <string.h>
#include <time.h>

#define MOST_UNDAMPED 2000
#define SUSPICIOUS 1e-13 /* pivot ratio of the factor below which null vectors may have been missed */

void lw_standard_root_clear(lw_standard_root *root)
{
    lw_free(root->inverse);
    lw_free(root->spread);
    lw_cholesky_free(root->factor);
    lw_free(root->column_of);
    lw_free(root->work);
    *root = (lw_standard_root){0};
}

static double now(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

/* Unit vectors of the undamped columns, in model units. */
static lw_status diagonal_root(const lw_system *system, lw_standard_root *root, lw_penalty_null *null,
                               lw_error *error)
{
    int64_t n = system->columns, d = 0;
    const double *l = system->penalty_diagonal;
    for (int64_t j = 0; j < n; j++) d += l[j] == 0.0;
    if (d > MOST_UNDAMPED)
        return lw_fail(error, LW_QUALIFIED, "the penalty leaves more than %d directions undamped",
                       MOST_UNDAMPED);
    root->kind = LW_ROOT_DIAGONAL;
    root->width = n;
    root->inverse = LW_NEW_ARRAY(double, n);
    root->spread = LW_NEW_ARRAY(double, n);
    null->pin = LW_NEW_ARRAY(int64_t, d);
    if (root->inverse == NULL || root->spread == NULL || null->pin == NULL)
        return lw_fail_memory(error, "standard form", (size_t)n * 8);
    lw_status status = lw_sparse_new(n, d, d, 0, &null->basis, error);
    if (status != LW_OK) return status;
    for (int64_t j = 0; j < n; j++) {
        root->inverse[j] = l[j] == 0.0 ? 0.0 : 1.0 / l[j];
        root->spread[j] = l[j] == 0.0 ? 1.0 : root->inverse[j];
        if (l[j] != 0.0) continue;
        null->pin[null->defect] = j;
        null->basis->start[null->defect] = null->defect;
        null->basis->index[null->defect] = (int32_t)j;
        null->basis->value[null->defect++] = 1.0;
    }
    null->basis->start[d] = d;
    return LW_OK;
}

/* L in model units. */
static lw_status unscale(const lw_system *system, lw_sparse **out, lw_error *error)
{
    const lw_sparse *L = system->penalty;
    lw_status status = lw_sparse_new(L->rows, L->columns, lw_sparse_nonzeros(L), 0, out, error);
    for (int64_t j = 0; status == LW_OK && j < L->columns; j++) {
        (*out)->start[j] = L->start[j];
        for (int64_t p = L->start[j]; p < L->start[j + 1]; p++) {
            (*out)->index[p] = L->index[p];
            (*out)->value[p] = L->value[p] / system->scale[j];
        }
    }
    if (status == LW_OK) (*out)->start[L->columns] = lw_sparse_nonzeros(L);
    return status;
}

/* Columns without the pins: column_of, and the Gram matrix of L on them. */
static lw_status gram_without_pins(const lw_sparse *L, const lw_penalty_null *null, lw_standard_root *root,
                                   lw_sparse **W, lw_error *error)
{
    int64_t n = L->columns, count = 0;
    lw_sparse *part = NULL;
    char *pinned = LW_NEW_ZEROS(char, n);
    lw_free(root->column_of);
    root->width = n - null->defect;
    root->column_of = LW_NEW_ARRAY(int64_t, root->width);
    lw_status status = LW_OK;
    if (pinned == NULL || root->column_of == NULL)
        status = lw_fail_memory(error, "standard form", (size_t)n * 9);
    if (status == LW_OK) status = lw_sparse_new(L->rows, root->width, lw_sparse_nonzeros(L), 0, &part, error);
    if (status == LW_OK) {
        for (int64_t d = 0; d < null->defect; d++) pinned[null->pin[d]] = 1;
        root->width = 0;
        for (int64_t j = 0; j < n; j++) {
            if (pinned[j]) continue;
            root->column_of[root->width] = j;
            part->start[root->width++] = count;
            for (int64_t p = L->start[j]; p < L->start[j + 1]; p++, count++) {
                part->index[count] = L->index[p];
                part->value[count] = L->value[p];
            }
        }
        part->start[root->width] = count;
        status = lw_sparse_gram(part, NULL, W, error);
    }
    lw_free(pinned);
    lw_sparse_free(part);
    return status;
}

/* Factors what the pins leave; *doubtful = 1 when it cannot be, or hardly. */
static lw_status factor_rest(const lw_sparse *L, const lw_penalty_null *null, const lw_watch *watch,
                             lw_standard_root *root, int *doubtful, lw_error *error)
{
    lw_sparse *W = NULL;
    lw_cholesky_size size;
    int64_t defect;
    *doubtful = 0;
    lw_cholesky_free(root->factor);
    root->factor = NULL;
    lw_status status = gram_without_pins(L, null, root, &W, error);
    if (status == LW_OK && root->width > 0) {
        double start = now();
        status = lw_cholesky_analyse(W, watch, &root->factor, &size, error);
        if (status == LW_OK && lw_watch_budget(watch, size.bytes, "the factor of L'L", "", NULL) != LW_OK)
            status = lw_fail(error, LW_QUALIFIED, "the factor of L'L does not fit --memory");
        if (status == LW_OK) status = lw_cholesky_factorize(root->factor, W, watch, &defect, error);
        root->seconds += now() - start;
        if (status == LW_UNSOLVABLE) {
            *doubtful = 2;
            status = LW_OK;
        } else if (status == LW_OK) {
            *doubtful = lw_cholesky_rcond(root->factor) < SUSPICIOUS;
        }
    }
    lw_sparse_free(W);
    return status;
}

static lw_status factor_root(const lw_system *system, const lw_watch *watch, lw_standard_root *root,
                             lw_penalty_null *null, lw_error *error)
{
    lw_sparse *L = NULL;
    int doubtful = 0;
    root->kind = LW_ROOT_FACTOR;
    lw_status status = unscale(system, &L, error);
    lw_watch_tick(watch, "factoring the penalty", 0.0, 0.0, "");
    for (int thorough = 0; status == LW_OK && thorough < 2; thorough++) {
        lw_penalty_null_clear(null);
        status = lw_penalty_null_find(system, L, thorough, MOST_UNDAMPED, watch, null, error);
        if (status == LW_OK) status = factor_rest(L, null, watch, root, &doubtful, error);
        if (!doubtful) break;
    }
    if (status == LW_OK && doubtful > 1)
        status = lw_fail(error, LW_QUALIFIED, "L'L is too ill-conditioned for a factor");
    if (status == LW_OK) {
        root->work = LW_NEW_ARRAY(double, lw_bytes(root->width, LW_STANDARD_BLOCK));
        if (root->work == NULL)
            status =
                lw_fail_memory(error, "standard form", (size_t)lw_bytes(root->width, 8 * LW_STANDARD_BLOCK));
    }
    lw_sparse_free(L);
    return status;
}

lw_status lw_standard_root_make(const lw_system *system, int damped, const lw_watch *watch,
                                lw_standard_root *root, lw_penalty_null *null, lw_error *error)
{
    *root = (lw_standard_root){.columns = system->columns, .width = system->columns, .scale = system->scale};
    *null = (lw_penalty_null){0};
    if (!damped) return LW_OK;
    if (system->penalty == NULL) return diagonal_root(system, root, null, error);
    return factor_root(system, watch, root, null, error);
}

static void half_solve(lw_standard_root *root, int half, int k, double *x)
{
    if (root->width == 0) return;
    lw_status status = lw_cholesky_half_solve(root->factor, half, k, x, NULL);
    if (status == LW_OK) return;
    root->failed = status;
    for (int64_t i = 0; i < root->width * k; i++) x[i] = (double)NAN;
}

void lw_standard_root_apply(lw_standard_root *root, int k, const double *w, double *z)
{
    int64_t n = root->columns, width = root->width;
    if (root->kind == LW_ROOT_NONE) memcpy(z, w, (size_t)(n * k) * sizeof *z);
    if (root->kind == LW_ROOT_DIAGONAL)
        for (int v = 0; v < k; v++)
            for (int64_t j = 0; j < n; j++) z[j + v * n] = root->inverse[j] * w[j + v * n];
    if (root->kind != LW_ROOT_FACTOR) return;
    memcpy(root->work, w, (size_t)(width * k) * sizeof *w);
    half_solve(root, 1, k, root->work);
    memset(z, 0, (size_t)(n * k) * sizeof *z);
    for (int v = 0; v < k; v++)
        for (int64_t i = 0; i < width; i++) {
            int64_t j = root->column_of[i];
            z[j + v * n] = root->work[i + v * width] / root->scale[j];
        }
}

void lw_standard_root_transposed(lw_standard_root *root, int k, const double *z, double *w)
{
    int64_t n = root->columns, width = root->width;
    if (root->kind == LW_ROOT_NONE) memcpy(w, z, (size_t)(n * k) * sizeof *z);
    if (root->kind == LW_ROOT_DIAGONAL)
        for (int v = 0; v < k; v++)
            for (int64_t j = 0; j < n; j++) w[j + v * n] = root->inverse[j] * z[j + v * n];
    if (root->kind != LW_ROOT_FACTOR) return;
    for (int v = 0; v < k; v++)
        for (int64_t i = 0; i < width; i++) {
            int64_t j = root->column_of[i];
            w[i + v * width] = z[j + v * n] / root->scale[j];
        }
    half_solve(root, 0, k, w);
}
