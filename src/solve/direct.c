/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/direct.h"

#include "core/memory.h"
#include "matrix/vector.h"

#define LONGEST_IN_FACTOR 200 /* nonzeros of a condition that stands in a sparse factor */

int64_t lw_direct_defect(const lw_direct *self)
{
    return self->datum.weight ? self->datum.space.defect : 0;
}

int64_t lw_direct_penalty_rows(const lw_direct *self, double lambda)
{
    return lambda > 0 ? self->base.system->penalty_rows : 0;
}

int64_t lw_direct_stacked(const lw_direct *self, double lambda)
{
    return self->base.system->rows + lw_direct_penalty_rows(self, lambda) +
           (self->extra ? self->extra->rows : 0);
}

lw_status lw_direct_stack(lw_direct *self, double lambda, lw_sparse **out, lw_error *error)
{
    lw_sparse *damped = NULL, *A = self->base.system->matrix;
    lw_status status = LW_OK;
    *out = NULL;
    if (lambda > 0) status = lw_sparse_stack(1, A, lambda, self->penalty, &damped, error);
    if (status < 0) return status;
    if (self->extra)
        status = lw_sparse_stack(1, damped ? damped : A, 1, self->extra, out, error);
    else if (damped)
        *out = damped, damped = NULL;
    else /* a copy, so that the caller owns it */
        status = lw_sparse_add(1, A, 0, A, out, error);
    lw_sparse_free(damped);
    return status;
}

void lw_direct_apply(const lw_direct *self, double lambda, int64_t k, const double *z, double *y)
{
    const lw_sparse *A = self->base.system->matrix;
    int64_t p = lw_direct_penalty_rows(self, lambda), stacked = lw_direct_stacked(self, lambda);
    for (int64_t c = 0; c < k; c++, z += A->columns, y += stacked) {
        lw_sparse_apply(A, 1, z, y);
        if (p > 0) {
            lw_sparse_apply(self->penalty, 1, z, y + A->rows);
            lw_scale(p, lambda, y + A->rows, NULL);
        }
        if (self->extra) lw_sparse_apply(self->extra, 1, z, y + A->rows + p);
    }
}

void lw_direct_apply_transposed(const lw_direct *self, double lambda, int64_t k, const double *y, double *z)
{
    const lw_sparse *A = self->base.system->matrix, *L = self->penalty, *E = self->extra;
    int64_t p = lw_direct_penalty_rows(self, lambda), stacked = lw_direct_stacked(self, lambda);
    for (int64_t c = 0; c < k; c++, z += A->columns, y += stacked) {
        for (int64_t j = 0; j < A->columns; j++) {
            double sum = 0, damped = 0;
            for (int64_t e = A->start[j]; e < A->start[j + 1]; e++) sum += A->value[e] * y[A->index[e]];
            for (int64_t e = p ? L->start[j] : 0; p && e < L->start[j + 1]; e++)
                damped += L->value[e] * y[A->rows + L->index[e]];
            for (int64_t e = E ? E->start[j] : 0; E && e < E->start[j + 1]; e++)
                sum += E->value[e] * y[A->rows + p + E->index[e]];
            z[j] = sum + lambda * damped;
        }
    }
}

/* Which conditions stand in the factor: those of at most `longest` nonzeros. */
static lw_status pick_conditions(lw_direct *self, lw_error *error)
{
    const lw_sparse *C = self->base.system->condition;
    if (!C || C->rows == 0) return LW_OK;
    lw_free(self->extra_condition);
    self->extra_conditions = 0;
    self->extra_condition = LW_NEW_ARRAY(int64_t, C->rows);
    int64_t *length = LW_NEW_ZEROS(int64_t, C->rows);
    if (!self->extra_condition || !length) {
        lw_free(length);
        return lw_fail_memory(error, "the conditions", (size_t)C->rows * 8);
    }
    for (int64_t e = 0; e < lw_sparse_nonzeros(C); e++) length[C->index[e]]++;
    for (int64_t i = 0; i < C->rows; i++)
        if (length[i] <= self->longest) self->extra_condition[self->extra_conditions++] = i;
    lw_free(length);
    return LW_OK;
}

/* Triplets of C_i over E'. place: condition -> row of extra, -1 not in the factor. */
static int64_t list_extra(const lw_direct *self, const int32_t *place, int32_t *row, int32_t *column,
                          double *value)
{
    const lw_sparse *C = self->base.system->condition;
    int64_t count = 0;
    for (int64_t j = 0; place && j < C->columns; j++) {
        for (int64_t e = C->start[j]; e < C->start[j + 1]; e++) {
            if (place[C->index[e]] < 0) continue;
            row[count] = place[C->index[e]];
            column[count] = (int32_t)j;
            value[count++] = C->value[e];
        }
    }
    for (int64_t k = 0; k < self->datum.space.defect; k++) {
        row[count] = (int32_t)(self->extra_conditions + k);
        column[count] = (int32_t)self->datum.space.held[k];
        value[count++] = 1;
    }
    return count;
}

lw_status lw_direct_make_extra(lw_direct *self, lw_error *error)
{
    const lw_system *system = self->base.system;
    const lw_sparse *C = system->conditions > 0 ? system->condition : NULL;
    lw_sparse_free(self->extra);
    self->extra = NULL;
    self->extra_number++;
    lw_status status = pick_conditions(self, error);
    int64_t rows = self->extra_conditions + self->datum.space.defect;
    if (status < 0 || rows == 0) return status;
    int64_t room = (C ? lw_sparse_nonzeros(C) : 0) + self->datum.space.defect;
    int32_t *place = C ? LW_NEW_ARRAY(int32_t, C->rows) : NULL, *row = LW_NEW_ARRAY(int32_t, room);
    int32_t *column = LW_NEW_ARRAY(int32_t, room);
    double *value = LW_NEW_ARRAY(double, room);
    if ((C && !place) || !row || !column || !value) {
        status = lw_fail_memory(error, "the rows of conditions and held columns", (size_t)room * 16);
    } else {
        for (int64_t i = 0; C && i < C->rows; i++) place[i] = -1;
        for (int64_t i = 0; i < self->extra_conditions; i++) place[self->extra_condition[i]] = (int32_t)i;
        int64_t repeated, count = list_extra(self, place, row, column, value);
        status = lw_sparse_from_triplets(rows, system->columns, count, row, column, value, NULL, 1,
                                         &self->extra, &repeated, error);
    }
    lw_free(place);
    lw_free(row);
    lw_free(column);
    lw_free(value);
    return status;
}

/* L as a sparse matrix, p x columns. */
static lw_status make_penalty(lw_direct *self, lw_error *error)
{
    const lw_system *system = self->base.system;
    if (system->penalty) return lw_sparse_add(1, system->penalty, 0, system->penalty, &self->penalty, error);
    int64_t n = system->columns;
    lw_status status = lw_sparse_new(n, n, n, 0, &self->penalty, error);
    if (status < 0) return status;
    for (int64_t j = 0; j < n; j++) {
        self->penalty->start[j] = j;
        self->penalty->index[j] = (int32_t)j;
        self->penalty->value[j] = system->penalty_diagonal ? system->penalty_diagonal[j] : system->scale[j];
    }
    self->penalty->start[n] = n;
    return LW_OK;
}

lw_status lw_direct_new(lw_system *system, const lw_decomposition_methods *methods,
                        const lw_factor_methods *factor, void *state, const lw_solve_options *options,
                        const lw_watch *watch, lw_direct **out, lw_error *error)
{
    *out = NULL;
    lw_direct *self = LW_NEW(lw_direct);
    if (!self) {
        lw_direct shell = {.factor = factor, .state = state};
        factor->free_state(&shell);
        return lw_fail_memory(error, "the decomposition", sizeof *self);
    }
    self->base = (lw_decomposition){methods, system};
    self->factor = factor;
    self->state = state;
    if (options) self->options = *options;
    self->watch = (lw_watch){
        .memory = lw_watch_memory(watch), .seed = lw_watch_seed(watch), .log = lw_watch_log(watch)};
    self->longest = LONGEST_IN_FACTOR;
    self->lambda = self->refined_lambda = (double)NAN;
    lw_status status = lw_system_matrix(system, watch, error);
    if (status >= 0) status = make_penalty(self, error);
    if (status >= 0) status = lw_conditions_check(system, error);
    if (status >= 0) status = lw_direct_make_extra(self, error);
    if (status < 0) {
        lw_direct_free(&self->base);
        return status;
    }
    *out = self;
    return LW_OK;
}

/* The factor failed: find the defect; let conditions that stand outside the factor cure it, free it, or say
 * what it is. */
static lw_status cure(lw_direct *self, double lambda, const lw_watch *watch, lw_error *error)
{
    double *basis = NULL;
    int64_t vectors = 0, defect = 0;
    int outside = self->extra_conditions < self->base.system->conditions, cured = 0,
        may_free = self->options.datum_free;
    lw_status status = self->factor->null_vectors(self, lambda, may_free || outside, watch, &basis, &vectors,
                                                  &defect, error);
    self->searched = status == LW_OK;
    if (status == LW_OK && defect > 0) {
        if (may_free || outside) status = lw_datum_hold(self, lambda, basis, defect, watch, error);
        if (status == LW_OK && outside) status = lw_conditions_cure(self, &cured, error);
        if (status == LW_OK && !cured && may_free)
            status = lw_datum_free(self, error);
        else if (status == LW_OK && !cured)
            status = lw_datum_explain(self, lambda, vectors, basis, error);
    }
    lw_free(basis);
    if (status == LW_OK && error) *error = (lw_error){0};
    return status;
}

lw_status lw_direct_prepare(lw_direct *self, double lambda, const lw_watch *watch, lw_error *error)
{
    if (self->lambda == lambda) return LW_OK;
    if (!watch) watch = &self->watch;
    lw_status status = LW_OK;
    int damped = lambda > 0;
    self->lambda = (double)NAN;
    self->base_lambda = lambda;
    self->condition = (double)NAN;
    lw_conditions_clear(&self->conditions);
    if (damped != self->damped) {
        self->damped = damped;
        self->searched = 0;
        if (self->datum.space.defect > 0) {
            lw_datum_clear(&self->datum);
            status = lw_direct_make_extra(self, error);
        }
    }
    if (status >= 0) status = self->factor->factorize(self, lambda, watch, error);
    if (status == LW_UNSOLVABLE && self->datum.space.defect == 0) status = cure(self, lambda, watch, error);
    if (status == LW_OK && self->base.system->conditions > 0) status = lw_conditions_make(self, error);
    if (status == LW_OK) self->lambda = lambda;
    return status;
}

void lw_direct_free(lw_decomposition *base)
{
    lw_direct *self = (lw_direct *)base;
    if (!self) return;
    self->factor->free_state(self);
    lw_sparse_free(self->penalty);
    lw_sparse_free(self->extra);
    lw_free(self->extra_condition);
    lw_datum_clear(&self->datum);
    lw_conditions_clear(&self->conditions);
    lw_exact_state_clear(&self->refined);
    lw_exact_free(self->exact);
    lw_free(self->left);
    lw_free(self->right);
    lw_free(self);
}
