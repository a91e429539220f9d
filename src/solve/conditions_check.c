/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Conditions that the others contain, by a pivoted QR of C' on the free columns. */
#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/suitesparse.h"
#include "solve/conditions.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define DENSE_PLACES 4000000 /* C as a dense matrix up to this size, else sparse */
#define RANK_TOLERANCE 1e-11

/* Says that condition k is contained in others: y (rank) their factors, pivot their numbers, h its value less
 * theirs. */
static lw_status refuse(const lw_system *system, int64_t k, int64_t rank, const int64_t *pivot,
                        const double *y, lw_error *error)
{
    const lw_problem *problem = system->problem;
    double rest = system->condition_value[k], size = fabs(rest);
    char others[512] = "";
    size_t used = 0;
    int named = 0;
    for (int64_t i = 0; i < rank; i++) {
        double part = y[i] * system->condition_value[pivot[i]];
        rest -= part;
        size = fmax(size, fabs(part));
        if (fabs(y[i]) < 1e-8 || used >= sizeof others - 1) continue;
        if (named++ < 5)
            used += (size_t)snprintf(others + used, sizeof others - used, "%s'%s'", named > 1 ? ", " : "",
                                     lw_ids_name(problem->condition_names, pivot[i]));
    }
    const char *name = lw_ids_name(problem->condition_names, k);
    int against = fabs(rest) > 1e-9 * size;
    if (named == 0)
        return lw_fail_also(error, LW_UNSOLVABLE,
                            "condition '%s' binds fixed parameters only and %s; take it out", name,
                            against ? "they contradict it" : "they already fulfil it");
    return lw_fail_also(error, LW_UNSOLVABLE, "condition '%s' %s %s%s; take one of them out", name,
                        against ? "contradicts" : "only repeats", others, named > 5 ? " and others" : "");
}

static lw_status check_dense(const lw_system *system, const lw_sparse *Ct, lw_error *error)
{
    lw_dense_qr qr = {0};
    double *dense = LW_NEW_ARRAY(double, Ct->rows * Ct->columns), *y = NULL;
    if (!dense) return lw_fail_memory(error, "the conditions", (size_t)(Ct->rows * Ct->columns) * 8);
    lw_sparse_to_dense(Ct, dense);
    lw_status status = lw_dense_qr_make(Ct->rows, Ct->columns, dense, RANK_TOLERANCE, &qr, error);
    if (status == LW_OK && qr.rank < Ct->columns) {
        y = LW_NEW_ARRAY(double, qr.rank);
        if (!y) status = lw_fail_memory(error, "the conditions", (size_t)qr.rank * 8);
        for (int64_t k = qr.rank; status != LW_NO_MEMORY && k < Ct->columns; k++) {
            memcpy(y, qr.factor + k * qr.rows, (size_t)qr.rank * 8); /* R12 column: y = R11^-1 R12 */
            lw_dense_qr_solve_r(&qr, 0, 1, y, qr.rank > 0 ? qr.rank : 1);
            status = refuse(system, qr.pivot[k], qr.rank, qr.pivot, y, error);
        }
    }
    lw_free(y);
    lw_dense_qr_clear(&qr);
    return status;
}

static lw_status check_sparse(const lw_system *system, const lw_sparse *Ct, lw_error *error)
{
    lw_sparse_qr *qr = NULL;
    lw_status status = lw_sparse_qr_make(Ct, RANK_TOLERANCE, 1, NULL, &qr, error);
    if (status < 0) return status;
    int64_t rank = lw_sparse_qr_rank(qr), c = Ct->columns;
    const int64_t *pivot = lw_sparse_qr_pivot(qr);
    double *column = LW_NEW_ARRAY(double, Ct->rows), *all = LW_NEW_ARRAY(double, c),
           *y = LW_NEW_ARRAY(double, c);
    if (!column || !all || !y) status = lw_fail_memory(error, "the conditions", (size_t)Ct->rows * 8);
    int64_t last = rank + LW_MOST_FAULTS < c ? rank + LW_MOST_FAULTS : c;
    for (int64_t k = rank; status != LW_NO_MEMORY && k < last; k++) {
        memset(column, 0, (size_t)Ct->rows * 8);
        for (int64_t e = Ct->start[pivot[k]]; e < Ct->start[pivot[k] + 1]; e++)
            column[Ct->index[e]] = Ct->value[e];
        lw_status solved = lw_sparse_qr_apply_qt(qr, 1, column, error);
        if (solved == LW_OK) solved = lw_sparse_qr_solve_r(qr, 1, column, Ct->rows, all, error);
        if (solved < 0) {
            status = solved;
            break;
        }
        for (int64_t i = 0; i < rank; i++) y[i] = all[pivot[i]];
        status = refuse(system, pivot[k], rank, pivot, y, error);
    }
    lw_free(column);
    lw_free(all);
    lw_free(y);
    lw_sparse_qr_free(qr);
    return status;
}

lw_status lw_conditions_check(const lw_system *system, lw_error *error)
{
    if (system->conditions == 0) return LW_OK;
    lw_sparse *Ct = NULL;
    lw_status status = lw_sparse_transpose(system->condition, &Ct, error);
    if (status < 0) return status;
    if (Ct->rows * Ct->columns <= DENSE_PLACES)
        status = check_dense(system, Ct, error);
    else
        status = check_sparse(system, Ct, error);
    lw_sparse_free(Ct);
    return status;
}
