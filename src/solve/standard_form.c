/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/standard_form.h"

#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/standard_part.h"

#include <math.h>
#include <string.h>

void lw_standard_form_free(lw_standard_form *form)
{
    if (form == NULL) return;
    if (form->op != form->A) lw_operator_free(form->op);
    lw_operator_free(form->A);
    lw_free(form->B);
    lw_free(form->AB);
    lw_standard_root_clear(&form->root);
    lw_penalty_null_clear(&form->null);
    lw_dense_qr_clear(&form->qr);
    lw_free(form->Q);
    lw_free(form->small);
    lw_free(form->tall);
    lw_free(form->model);
    lw_free(form->side);
    lw_free(form);
}

lw_operator *lw_standard_form_operator(lw_standard_form *form)
{
    return form->op;
}

int64_t lw_standard_form_width(const lw_standard_form *form)
{
    return form->root.width;
}

const double *lw_standard_form_side(const lw_standard_form *form)
{
    return form->side;
}

int64_t lw_standard_form_undamped(const lw_standard_form *form)
{
    return form->null.defect;
}

double lw_standard_form_factor_seconds(const lw_standard_form *form)
{
    return form->root.seconds;
}

/* c <- Q'y, y <- y - Q c, for k vectors. */
void lw_standard_form_project(lw_standard_form *form, int64_t k, double *y)
{
    int64_t m = form->system->rows, d = form->null.defect;
    for (int64_t v = 0; d > 0 && v < k; v++, y += m) {
        lw_dense_vector(1, m, d, 1.0, form->Q, m, y, 0.0, form->small);
        lw_dense_vector(0, m, d, -1.0, form->Q, m, form->small, 1.0, y);
    }
}

/* y <- (I - Q Q') A L^# w. */
static void apply(void *state, int k, const double *w, double *y)
{
    lw_standard_form *form = state;
    int64_t width = form->root.width, m = form->system->rows;
    for (int at = 0; at < k; at += LW_STANDARD_BLOCK) {
        int some = k - at < LW_STANDARD_BLOCK ? k - at : LW_STANDARD_BLOCK;
        lw_standard_root_apply(&form->root, some, w + at * width, form->model);
        lw_apply(form->A, some, form->model, y + at * m);
        lw_standard_form_project(form, some, y + at * m);
    }
}

/* w <- L^#' A' (I - Q Q') y. */
static void apply_transposed(void *state, int k, const double *y, double *w)
{
    lw_standard_form *form = state;
    int64_t width = form->root.width, m = form->system->rows, d = form->null.defect;
    for (int at = 0; at < k; at += LW_STANDARD_BLOCK) {
        int some = k - at < LW_STANDARD_BLOCK ? k - at : LW_STANDARD_BLOCK;
        const double *from = y + at * m;
        if (d > 0) {
            memcpy(form->tall, from, (size_t)(m * some) * sizeof *from);
            lw_standard_form_project(form, some, form->tall);
            from = form->tall;
        }
        lw_apply_transposed(form->A, some, from, form->model);
        lw_standard_root_transposed(&form->root, some, form->model, w + at * width);
    }
}

/* Up to three parameters on which undetermined directions rest. */
static lw_status undetermined(const lw_standard_form *form, lw_error *error)
{
    const lw_system *system = form->system;
    const lw_ids *ids = system->problem->parameters;
    int64_t missing = form->null.defect - form->qr.rank, named = missing < 3 ? missing : 3;
    const char *name[3] = {"", "", ""};
    for (int64_t k = 0; k < named; k++) {
        int64_t column = form->null.pin[form->qr.pivot[form->qr.rank + k]];
        name[k] = lw_ids_name(ids, system->parameter_of[column]);
    }
    return lw_fail(error, LW_UNSOLVABLE,
                   "the data do not determine %lld direction%s that the penalty leaves undamped: parameter%s "
                   "'%s'%s%s%s%s%s%s%s; "
                   "give a prior_sigma, a damp_weight, or --also-smallest",
                   (long long)missing, missing == 1 ? "" : "s", missing == 1 ? "" : "s", name[0],
                   named > 1 ? ", '" : "", name[1], named > 1 ? "'" : "", named > 2 ? ", '" : "", name[2],
                   named > 2 ? "'" : "", missing > 3 ? " and others" : "");
}

void lw_standard_form_narrow(const lw_standard_form *form, int64_t k, const double *from, double *to)
{
    int64_t n = form->system->columns;
    const double *spread = form->root.spread;
    for (int64_t v = 0; v < k; v++, from += n, to += n)
        for (int64_t j = 0; j < n; j++) to[j] = spread == NULL ? from[j] : from[j] / spread[j];
}

/* A N, each column (and its null vector) brought to length 1 where it is not zero. */
static lw_status multiply_null(lw_standard_form *form, double **out, lw_error *error)
{
    int64_t m = form->system->rows, n = form->system->columns, d = form->null.defect;
    lw_sparse *N = form->null.basis;
    double *AN = LW_NEW_ARRAY(double, lw_bytes(m, d));
    *out = AN;
    if (AN == NULL) return lw_fail_memory(error, "undamped directions", (size_t)lw_bytes(m * d, 8));
    for (int64_t at = 0; at < d; at += LW_STANDARD_BLOCK) {
        int64_t some = d - at < LW_STANDARD_BLOCK ? d - at : LW_STANDARD_BLOCK;
        memset(form->model, 0, (size_t)(n * some) * sizeof *form->model);
        for (int64_t v = 0; v < some; v++)
            for (int64_t p = N->start[at + v]; p < N->start[at + v + 1]; p++)
                form->model[N->index[p] + v * n] = N->value[p] /= form->system->scale[N->index[p]];
        lw_standard_form_narrow(form, some, form->model, form->model);
        lw_apply(form->A, (int)some, form->model, AN + at * m);
    }
    for (int64_t v = 0; v < d; v++) {
        double norm = lw_norm(m, AN + v * m, NULL);
        if (!(norm > 0.0)) continue;
        lw_scale(m, 1.0 / norm, AN + v * m, NULL);
        for (int64_t p = N->start[v]; p < N->start[v + 1]; p++) N->value[p] /= norm;
    }
    return LW_OK;
}

/* A N = Q T; data that do not determine a null vector are an error. */
static lw_status project_null(lw_standard_form *form, const lw_watch *watch, lw_error *error)
{
    int64_t m = form->system->rows, d = form->null.defect;
    double *AN = NULL;
    if (d == 0) return LW_OK;
    if (lw_watch_budget(watch, lw_bytes(lw_bytes(m, d), 16), "undamped directions", "", NULL) != LW_OK)
        return lw_fail(error, LW_QUALIFIED,
                       "the %lld undamped directions of %lld equations do not fit --memory", (long long)d,
                       (long long)m);
    int64_t tall = m > d ? m : d;
    lw_status status = multiply_null(form, &AN, error);
    if (status == LW_OK) {
        status = lw_dense_qr_make(m, d, AN, 1e-11, &form->qr, error);
        AN = NULL;
    }
    lw_free(AN);
    if (status == LW_OK && form->qr.rank < d) return undetermined(form, error);
    if (status == LW_OK) lw_standard_warn(lw_watch_log(watch), d, form->qr.rcond);
    form->Q = LW_NEW_ZEROS(double, lw_bytes(tall, d));
    form->small = LW_NEW_ARRAY(double, d);
    form->tall = LW_NEW_ARRAY(double, m *LW_STANDARD_BLOCK);
    if (status == LW_OK && (form->Q == NULL || form->small == NULL || form->tall == NULL))
        return lw_fail_memory(error, "undamped directions", (size_t)lw_bytes(m * d, 8));
    for (int64_t v = 0; status == LW_OK && v < d; v++) form->Q[v + v * m] = 1.0;
    return status == LW_OK ? lw_dense_qr_apply_q(&form->qr, d, form->Q, error) : status;
}

/* A diagonal root keeps the one-pass step of the products: it is column scaling. */
static lw_status make_operator(lw_standard_form *form, lw_error *error)
{
    if (form->root.kind != LW_ROOT_FACTOR && form->null.defect == 0) {
        form->op = form->A;
        return LW_OK;
    }
    if (form->root.kind == LW_ROOT_DIAGONAL) return lw_standard_fused_new(form, &form->op, error);
    return lw_operator_from_functions("standard form", form->system->rows, form->root.width, apply,
                                      apply_transposed, form, NULL, form->A->team, &form->op, error);
}

lw_status lw_standard_form_new(lw_system *system, int damped, const lw_product_options *product,
                               const lw_watch *watch, lw_standard_form **out, lw_error *error)
{
    *out = NULL;
    lw_standard_form *form = LW_NEW(lw_standard_form);
    if (form == NULL) return lw_fail_memory(error, "standard form", sizeof *form);
    form->system = system;
    lw_status status = lw_standard_root_make(system, damped, watch, &form->root, &form->null, error);
    if (status == LW_OK)
        status = lw_system_operator_times(system, product, form->root.spread, watch, &form->A, error);
    if (status == LW_OK) {
        form->model = LW_NEW_ARRAY(double, lw_bytes(system->columns, LW_STANDARD_BLOCK));
        form->side = LW_NEW_ARRAY(double, system->rows);
        if (form->model == NULL || form->side == NULL)
            status = lw_fail_memory(error, "standard form",
                                    (size_t)lw_bytes(system->columns, 8 * LW_STANDARD_BLOCK));
    }
    if (status == LW_OK) status = project_null(form, watch, error);
    if (status == LW_OK) {
        lw_copy(system->rows, system->b, form->side);
        lw_standard_form_project(form, 1, form->side);
        status = make_operator(form, error);
    }
    if (status != LW_OK) {
        lw_standard_form_free(form);
        return status;
    }
    *out = form;
    return LW_OK;
}

static lw_status root_status(const lw_standard_form *form, lw_error *error)
{
    if (form->root.failed == LW_NO_MEMORY) return lw_fail_memory(error, "a solve with the factor of L'L", 0);
    if (form->root.failed != LW_OK) return lw_fail(error, LW_SYSTEM, "a solve with the factor of L'L failed");
    return LW_OK;
}

lw_status lw_standard_form_root(lw_standard_form *form, int64_t k, const double *w, double *z,
                                lw_error *error)
{
    for (int64_t at = 0; at < k; at += LW_STANDARD_BLOCK) {
        int some = (int)(k - at < LW_STANDARD_BLOCK ? k - at : LW_STANDARD_BLOCK);
        lw_standard_root_apply(&form->root, some, w + at * form->root.width, z + at * form->system->columns);
    }
    return root_status(form, error);
}

lw_status lw_standard_form_root_transposed(lw_standard_form *form, int64_t k, const double *z, double *w,
                                           lw_error *error)
{
    for (int64_t at = 0; at < k; at += LW_STANDARD_BLOCK) {
        int some = (int)(k - at < LW_STANDARD_BLOCK ? k - at : LW_STANDARD_BLOCK);
        lw_standard_root_transposed(&form->root, some, z + at * form->system->columns,
                                    w + at * form->root.width);
    }
    return root_status(form, error);
}

/* z = L^# w + N T^-1 Q'(side - A L^# w). */
lw_status lw_standard_form_back_from(lw_standard_form *form, int64_t k, const double *side, int64_t stride,
                                     const double *w, double *z, lw_error *error)
{
    int64_t m = form->system->rows, n = form->system->columns, d = form->null.defect;
    lw_status status = lw_standard_form_root(form, k, w, z, error);
    for (int64_t v = 0; status == LW_OK && d > 0 && v < k; v++, z += n, side += stride) {
        const lw_sparse *N = form->null.basis;
        lw_standard_form_narrow(form, 1, z, form->model);
        lw_apply(form->A, 1, form->model, form->tall);
        lw_scale_add(m, 1.0, side, -1.0, form->tall, NULL);
        lw_dense_vector(1, m, d, 1.0, form->Q, m, form->tall, 0.0, form->small);
        lw_dense_qr_solve_r(&form->qr, 0, 1, form->small, d);
        for (int64_t c = 0; c < d; c++) {
            int64_t column = form->qr.pivot[c];
            for (int64_t p = N->start[column]; p < N->start[column + 1]; p++)
                z[N->index[p]] += N->value[p] * form->small[c];
        }
    }
    return status;
}

lw_status lw_standard_form_back(lw_standard_form *form, int64_t k, const double *w, double *z,
                                lw_error *error)
{
    return lw_standard_form_back_from(form, k, form->system->b, 0, w, z, error);
}
