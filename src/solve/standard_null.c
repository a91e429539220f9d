/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/standard_null.h"

#include "core/memory.h"
#include "matrix/dense.h"

#include <math.h>
#include <string.h>

#define NULL_BELOW 1e-10
#define POLYNOMIALS 8
#define FIRST_BLOCK 12
#define LARGEST_BLOCK 96

/* Null vectors as they are found. */
typedef struct haul {
    lw_penalty_null *null;
    int64_t room, entries, entry_room, most;
    int64_t *start;
    int32_t *index;
    double *value;
    int full; /* a component's whole trial space was null: there may be more */
} haul;

void lw_penalty_null_clear(lw_penalty_null *null)
{
    lw_sparse_free(null->basis);
    lw_free(null->pin);
    *null = (lw_penalty_null){0};
}

static lw_status make_room(haul *got, int64_t vectors, int64_t entries, lw_error *error)
{
    if (got->null->defect + vectors > got->most)
        return lw_fail(error, LW_QUALIFIED, "the penalty leaves more than %lld directions undamped",
                       (long long)got->most);
    if (got->null->defect + vectors + 1 > got->room) {
        int64_t room = 2 * got->room + vectors + 16;
        int64_t *start = lw_resize(got->start, (size_t)room, sizeof *start);
        if (start != NULL) got->start = start;
        int64_t *pin = lw_resize(got->null->pin, (size_t)room, sizeof *pin);
        if (pin != NULL) got->null->pin = pin;
        if (start == NULL || pin == NULL) return lw_fail_memory(error, "null vectors", (size_t)room * 16);
        got->room = room;
        got->start[0] = 0;
    }
    if (got->entries + entries > got->entry_room) {
        int64_t room = got->entry_room + got->entry_room / 2 + entries;
        int32_t *index = lw_resize(got->index, (size_t)room, sizeof *index);
        if (index != NULL) got->index = index;
        double *value = lw_resize(got->value, (size_t)room, sizeof *value);
        if (value != NULL) got->value = value;
        if (index == NULL || value == NULL) return lw_fail_memory(error, "null vectors", (size_t)room * 12);
        got->entry_room = room;
    }
    return LW_OK;
}

/* Takes k null vectors N (size x k) of a component and pins k of its columns, where N' has its largest
 * pivots. */
static lw_status take_vectors(haul *got, int64_t size, const int64_t *column, int64_t k, const double *N,
                              lw_error *error)
{
    lw_status status = make_room(got, k, k * size, error);
    if (status != LW_OK || k == 0) return status;
    double *turned = LW_NEW_ARRAY(double, size *k);
    lw_dense_qr qr = {0};
    if (turned == NULL) return lw_fail_memory(error, "null vectors", (size_t)(size * k) * 8);
    for (int64_t i = 0; i < size; i++)
        for (int64_t v = 0; v < k; v++) turned[v + i * k] = N[i + v * size];
    status = lw_dense_qr_make(k, size, turned, 0.0, &qr, error);
    for (int64_t v = 0; status == LW_OK && v < k; v++) {
        int64_t number = got->null->defect++;
        got->null->pin[number] = column[qr.pivot[v]];
        for (int64_t i = 0; i < size; i++) {
            got->index[got->entries] = (int32_t)column[i];
            got->value[got->entries++] = N[i + v * size];
        }
        got->start[number + 1] = got->entries;
    }
    lw_dense_qr_clear(&qr);
    return status;
}

lw_status lw_penalty_orthonormal(const lw_penalty_graph *graph, int64_t c, int64_t columns, int q, double *X,
                                 int *rank, lw_error *error)
{
    const int64_t *column = graph->column + graph->column_start[c];
    int64_t size = graph->column_start[c + 1] - graph->column_start[c], least = size < q ? size : q;
    double *part = LW_NEW_ARRAY(double, size *q), *Q = LW_NEW_ZEROS(double, size *least);
    lw_dense_qr qr = {0};
    lw_status status =
        part == NULL || Q == NULL ? lw_fail_memory(error, "null vectors", (size_t)(size * q) * 16) : LW_OK;
    *rank = 0;
    if (status == LW_OK) {
        for (int v = 0; v < q; v++)
            for (int64_t i = 0; i < size; i++) part[i + v * size] = X[column[i] + v * columns];
        status = lw_dense_qr_make(size, q, part, 1e-8, &qr, error);
        part = NULL;
    }
    if (status == LW_OK) {
        for (int64_t v = 0; v < least; v++) Q[v + v * size] = 1.0;
        status = lw_dense_qr_apply_q(&qr, least, Q, error);
        *rank = (int)qr.rank;
        for (int v = 0; v < q; v++)
            for (int64_t i = 0; i < size; i++) X[column[i] + v * columns] = v < *rank ? Q[i + v * size] : 0.0;
    }
    lw_free(part);
    lw_free(Q);
    lw_dense_qr_clear(&qr);
    return status;
}

/* Right singular vectors of Y_c (rows of component c x rank) by QR first, then the small R. V: rank x rank,
 * its columns by falling singular value. */
static lw_status small_svd(const lw_penalty_graph *graph, int64_t c, int64_t rows, const double *Y, int rank,
                           double *s, double *V, lw_error *error)
{
    const int64_t *row = graph->row + graph->row_start[c];
    int64_t count = graph->row_start[c + 1] - graph->row_start[c], tall = count > rank ? count : rank;
    double *part = LW_NEW_ZEROS(double, tall *rank), *R = LW_NEW_ZEROS(double, rank *rank);
    double *u = LW_NEW_ARRAY(double, rank *rank), *vt = LW_NEW_ARRAY(double, rank *rank);
    lw_dense_qr qr = {0};
    lw_status status = LW_OK;
    if (part == NULL || R == NULL || u == NULL || vt == NULL)
        status = lw_fail_memory(error, "null vectors", (size_t)(tall * rank) * 8);
    if (status == LW_OK) {
        for (int v = 0; v < rank; v++)
            for (int64_t i = 0; i < count; i++) part[i + v * tall] = Y[row[i] + v * rows];
        status = lw_dense_qr_make(tall, rank, part, 0.0, &qr, error);
        part = NULL;
    }
    if (status == LW_OK) {
        for (int v = 0; v < rank; v++)
            for (int i = 0; i <= v; i++) R[i + qr.pivot[v] * rank] = qr.factor[i + v * tall];
        status = lw_dense_svd(rank, rank, R, u, s, vt, error);
    }
    for (int i = 0; status == LW_OK && i < rank; i++)
        for (int v = 0; v < rank; v++) V[i + v * rank] = vt[v + i * rank];
    lw_free(part);
    lw_free(R);
    lw_free(u);
    lw_free(vt);
    lw_dense_qr_clear(&qr);
    return status;
}

/* Null vectors of component c in the span of its `rank` orthonormal columns of X, Y = L X. */
static lw_status reduce_component(haul *got, const lw_sparse *L, const lw_penalty_graph *graph, int64_t c,
                                  int rank, int q, const double *X, const double *Y, lw_error *error)
{
    const int64_t *column = graph->column + graph->column_start[c];
    int64_t size = graph->column_start[c + 1] - graph->column_start[c];
    double s[LARGEST_BLOCK], *V = LW_NEW_ARRAY(double, rank *rank), *N = LW_NEW_ZEROS(double, size *rank);
    lw_status status =
        V == NULL || N == NULL ? lw_fail_memory(error, "null vectors", (size_t)(size * rank) * 8) : LW_OK;
    int k = 0;
    if (status == LW_OK) status = small_svd(graph, c, L->rows, Y, rank, s, V, error);
    for (int v = rank - 1; status == LW_OK && v >= 0 && s[v] <= NULL_BELOW * graph->norm[c]; v--, k++)
        for (int a = 0; a < rank; a++)
            for (int64_t i = 0; i < size; i++)
                N[i + k * size] += X[column[i] + a * L->columns] * V[a + v * rank];
    if (status == LW_OK) status = take_vectors(got, size, column, k, N, error);
    if (k == q && size > q) got->full = 1;
    lw_free(V);
    lw_free(N);
    return status;
}

static lw_status take_units(haul *got, const lw_penalty_graph *graph, lw_error *error)
{
    const double one = 1.0;
    lw_status status = LW_OK;
    for (int64_t c = 0; status == LW_OK && c < graph->count; c++)
        if (graph->norm[c] == 0.0)
            status = take_vectors(got, 1, graph->column + graph->column_start[c], 1, &one, error);
    return status;
}

/* X holds a trial space of q vectors; what is null in it is taken. */
static lw_status reduce_all(haul *got, const lw_sparse *L, const lw_penalty_graph *graph, int q, double *X,
                            lw_error *error)
{
    double *Y = LW_NEW_ARRAY(double, L->rows *q);
    int *rank = LW_NEW_ZEROS(int, graph->count);
    lw_status status =
        Y == NULL || rank == NULL ? lw_fail_memory(error, "null vectors", (size_t)(L->rows * q) * 8) : LW_OK;
    for (int64_t c = 0; status == LW_OK && c < graph->count; c++)
        if (graph->column_start[c + 1] - graph->column_start[c] > 1)
            status = lw_penalty_orthonormal(graph, c, L->columns, q, X, &rank[c], error);
    if (status == LW_OK) lw_sparse_apply(L, q, X, Y);
    for (int64_t c = 0; status == LW_OK && c < graph->count; c++)
        if (rank[c] > 0) status = reduce_component(got, L, graph, c, rank[c], q, X, Y, error);
    lw_free(Y);
    lw_free(rank);
    return status;
}

static void start_again(haul *got)
{
    got->null->defect = 0;
    got->entries = 0;
    got->full = 0;
}

static lw_status search(haul *got, const lw_system *system, const lw_sparse *L, const lw_penalty_graph *graph,
                        int thorough, const lw_watch *watch, lw_error *error)
{
    lw_status status = LW_OK;
    for (int q = thorough ? FIRST_BLOCK : POLYNOMIALS;; q *= 2) {
        int used = q;
        start_again(got);
        if (q > LARGEST_BLOCK)
            return lw_fail(error, LW_QUALIFIED,
                           "the penalty leaves more than %d directions of connected parameters undamped",
                           LARGEST_BLOCK / 2);
        int64_t bytes = lw_bytes(L->rows + 2 * L->columns, 8 * (int64_t)q);
        if (lw_watch_budget(watch, bytes, "null vectors of the penalty", "", NULL) != LW_OK)
            return lw_fail(error, LW_QUALIFIED,
                           "the search for what the penalty leaves undamped does not fit --memory");
        double *X = LW_NEW_ZEROS(double, L->columns *q);
        if (X == NULL) return lw_fail_memory(error, "null vectors", (size_t)(L->columns * q) * 8);
        status = make_room(got, 0, 0, error);
        if (status == LW_OK) status = take_units(got, graph, error);
        if (status == LW_OK)
            status = thorough ? lw_penalty_trial_inverse(L, graph, q, watch, X, error)
                              : lw_penalty_trial_polynomials(system, graph, &used, X, error);
        if (status == LW_OK) status = reduce_all(got, L, graph, used, X, error);
        lw_free(X);
        if (status != LW_OK || !thorough || !got->full) return status;
    }
}

lw_status lw_penalty_null_find(const lw_system *system, const lw_sparse *L, int thorough, int64_t most,
                               const lw_watch *watch, lw_penalty_null *out, lw_error *error)
{
    lw_penalty_graph graph;
    *out = (lw_penalty_null){0};
    haul got = {.null = out, .most = most};
    lw_status status = lw_penalty_graph_make(L, &graph, error);
    if (status == LW_OK) status = search(&got, system, L, &graph, thorough, watch, error);
    if (status == LW_OK) status = lw_sparse_new(L->columns, out->defect, got.entries, 0, &out->basis, error);
    if (status == LW_OK) {
        memcpy(out->basis->start, got.start, (size_t)(out->defect + 1) * sizeof *got.start);
        if (got.entries > 0) {
            memcpy(out->basis->index, got.index, (size_t)got.entries * sizeof *got.index);
            memcpy(out->basis->value, got.value, (size_t)got.entries * sizeof *got.value);
        }
    }
    lw_penalty_graph_clear(&graph);
    lw_free(got.start);
    lw_free(got.index);
    lw_free(got.value);
    if (status != LW_OK) lw_penalty_null_clear(out);
    return status;
}

void lw_standard_warn(lw_log *log, int64_t directions, double rcond)
{
    if (!(rcond < 1e-5)) return;
    lw_log_add(log,
               "The data hardly determine a direction that the penalty leaves alone (%lld such directions, "
               "condition %.1e): "
               "parameters run away along it at any damping. --also-smallest 0.01, --prefer flattest, or a "
               "prior_sigma with damp_weight 1 hold it.",
               (long long)directions, 1.0 / rcond);
}
