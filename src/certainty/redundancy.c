/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/redundancy.h"

#include "core/memory.h"
#include "matrix/dense.h"

#include <math.h>

#define ROWS_A_PART 2048

typedef struct work {
    const lw_equations *equations;
    const lw_cofactor *cofactor;
    const double *known;
    lw_shift *shift; /* own shifts to be made on the way, or NULL */
    lw_redundancy *out;
    lw_status *status; /* of each part */
} work;

/* qa = Q a on the columns of row i, every entry of Q looked up once; returns a' Q a. */
static double row_products(const lw_cofactor *cofactor, int64_t count, const int64_t *column, const double *a,
                           double *qa)
{
    double form = 0;
    for (int64_t k = 0; k < count; k++) {
        qa[k] = lw_cofactor_entry(cofactor, column[k], column[k]) * a[k];
        for (int64_t l = 0; l < k; l++) {
            double q = lw_cofactor_entry(cofactor, column[k], column[l]);
            qa[k] += q * a[l];
            qa[l] += q * a[k];
        }
    }
    for (int64_t k = 0; k < count; k++) form += a[k] * qa[k];
    return form;
}

/* r = 1 - P C; T = P r. Rounding may leave 1 - P C a little below 0. */
static void fill_row(const work *w, int64_t i, double adjusted)
{
    double sigma = lw_equation_sigma(w->equations, i), factor = lw_equation_factor(w->equations, i);
    double weight = factor * factor / (sigma * sigma), share = 1 - weight * adjusted;
    lw_redundancy *out = w->out;
    out->adjusted[i] = adjusted;
    if (factor == 0) {
        out->redundancy[i] = (double)NAN;
        out->visible[i] = 1 / (sigma * sigma + adjusted);
        out->share[i] = sigma * sigma * out->visible[i];
        return;
    }
    if (share < 0) share = 0;
    out->redundancy[i] = share;
    out->visible[i] = weight * share;
    out->share[i] = share;
}

/* One row that is uncorrelated or set aside. qa: room for its products. */
static void make_row(const work *w, int64_t i, int64_t *column, double *a, double *qa)
{
    double factor = lw_equation_factor(w->equations, i);
    if (factor != 0 && lw_equation_block(w->equations, i) >= 0) return;
    if (w->known && !isnan(w->known[i])) {
        fill_row(w, i, w->known[i]);
        return;
    }
    int64_t count = lw_equation_row(w->equations, i, column, a);
    fill_row(w, i, row_products(w->cofactor, count, column, a, qa));
    if (!w->shift || factor == 0) return;
    double weight = factor / lw_equation_sigma(w->equations, i);
    for (int64_t k = 0; k < count; k++) qa[k] *= weight * weight;
    lw_shift_take(w->equations->system, i, count, column, qa, w->shift);
}

static void fill_part(void *state, int part)
{
    work *w = state;
    int64_t from = (int64_t)part * ROWS_A_PART, to = from + ROWS_A_PART;
    if (to > w->out->rows) to = w->out->rows;
    int64_t *column = LW_NEW_ARRAY(int64_t, w->equations->longest);
    double *a = LW_NEW_ARRAY(double, 2 * w->equations->longest);
    w->status[part] = column && a ? LW_OK : LW_NO_MEMORY;
    for (int64_t i = from; i < to && column && a; i++) make_row(w, i, column, a, a + w->equations->longest);
    lw_free(column);
    lw_free(a);
}

/* C = A_b Q A_b' of the rows of a block. room: the coefficients of all rows, `longest` apart. */
static void block_cofactors(const work *w, int64_t size, const int64_t *member, int64_t *column, double *a,
                            int64_t *count, double *C)
{
    int64_t room = w->equations->longest;
    for (int64_t i = 0; i < size; i++)
        count[i] = lw_equation_row(w->equations, member[i], column + i * room, a + i * room);
    for (int64_t j = 0; j < size; j++) {
        for (int64_t i = j; i < size; i++) {
            double sum = 0;
            for (int64_t k = 0; k < count[i]; k++)
                for (int64_t l = 0; l < count[j]; l++)
                    sum += a[i * room + k] * a[j * room + l] *
                           lw_cofactor_entry(w->cofactor, column[i * room + k], column[j * room + l]);
            C[i + j * size] = C[j + i * size] = sum;
        }
    }
}

/* T = P - P C P and redundancy = 1 - diag(C P). */
static void fill_members(const work *w, int64_t size, const int64_t *member, const double *P, const double *C,
                         double *CP)
{
    lw_dense_multiply(0, 0, size, size, size, 1, C, size, P, size, 0, CP, size);
    for (int64_t i = 0; i < size; i++) {
        double weight = P[i + i * size], seen = 0;
        for (int64_t k = 0; k < size; k++) seen += P[i + k * size] * CP[k + i * size];
        double share = 1 - seen / weight;
        if (share < 0) share = 0;
        w->out->adjusted[member[i]] = C[i + i * size];
        w->out->redundancy[member[i]] = 1 - CP[i + i * size];
        w->out->share[member[i]] = share;
        w->out->visible[member[i]] = weight * share;
    }
}

static lw_status fill_block(const work *w, int64_t block, lw_error *error)
{
    int64_t size = 0, *member = NULL, room = w->equations->longest;
    double *P = NULL;
    lw_status status = lw_equation_weights(w->equations, block, &size, &member, &P, error);
    int64_t *column = LW_NEW_ARRAY(int64_t, size * room), *count = LW_NEW_ARRAY(int64_t, size);
    double *a = LW_NEW_ARRAY(double, size *room), *C = LW_NEW_ARRAY(double, size *size);
    double *CP = LW_NEW_ARRAY(double, size *size);
    if (status == LW_OK && !(column && count && a && C && CP))
        status = lw_fail_memory(error, "redundancy of a block", (size_t)(size * size) * 16);
    if (status == LW_OK && size > 0) {
        block_cofactors(w, size, member, column, a, count, C);
        fill_members(w, size, member, P, C, CP);
    }
    lw_free(member);
    lw_free(P);
    lw_free(column);
    lw_free(count);
    lw_free(a);
    lw_free(C);
    lw_free(CP);
    return status;
}

static lw_status redundancy_alloc(int64_t rows, lw_redundancy **out, lw_error *error)
{
    lw_redundancy *r = LW_NEW(lw_redundancy);
    *out = r;
    if (r) {
        r->rows = rows;
        r->adjusted = LW_NEW_ARRAY(double, rows);
        r->redundancy = LW_NEW_ARRAY(double, rows);
        r->visible = LW_NEW_ARRAY(double, rows);
        r->share = LW_NEW_ARRAY(double, rows);
    }
    if (r && r->adjusted && r->redundancy && r->visible && r->share) return LW_OK;
    return lw_fail_memory(error, "redundancy numbers", (size_t)rows * 4 * sizeof(double));
}

lw_status lw_redundancy_new(const lw_equations *equations, const lw_cofactor *cofactor, const double *known,
                            lw_shift *shift, const lw_watch *watch, lw_redundancy **out, lw_error *error)
{
    int64_t rows = equations->system->rows;
    int parts = (int)((rows + ROWS_A_PART - 1) / ROWS_A_PART);
    work w = {.equations = equations, .cofactor = cofactor, .known = known, .shift = shift};
    lw_status status = redundancy_alloc(rows, out, error);
    w.out = *out;
    w.status = LW_NEW_ZEROS(lw_status, parts);
    if (status == LW_OK && !w.status)
        status = lw_fail_memory(error, "redundancy numbers", (size_t)parts * sizeof(lw_status));
    if (status == LW_OK) lw_team_run(lw_watch_team(watch), parts, fill_part, &w);
    for (int p = 0; p < parts && status == LW_OK; p++)
        if (w.status[p] != LW_OK)
            status = lw_fail_memory(error, "redundancy numbers", (size_t)equations->longest * 16);
    const lw_covariance *covariance = equations->system->problem->covariance;
    for (int64_t b = 0; covariance && b < covariance->blocks && status == LW_OK; b++)
        status = fill_block(&w, b, error);
    lw_free(w.status);
    if (status != LW_OK) {
        lw_redundancy_free(*out);
        *out = NULL;
        return status;
    }
    for (int64_t i = 0; i < rows; i++)
        if (!isnan(w.out->redundancy[i])) w.out->sum += w.out->redundancy[i];
    return LW_OK;
}

void lw_redundancy_free(lw_redundancy *redundancy)
{
    if (!redundancy) return;
    lw_free(redundancy->adjusted);
    lw_free(redundancy->redundancy);
    lw_free(redundancy->visible);
    lw_free(redundancy->share);
    lw_free(redundancy);
}
