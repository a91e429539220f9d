/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/data.h"

#include "core/memory.h"

#include <math.h>
#include <stdlib.h>

/* Largest number of parameters that one observation touches; three stand for all above. */
static lw_status widest_row(const lw_problem *problem, int32_t *widest, lw_error *error)
{
    const lw_sparse *A = problem->design;
    int32_t *width = LW_NEW_ZEROS(int32_t, problem->m);
    if (width == NULL) return lw_fail_memory(error, "report", (size_t)problem->m * sizeof(int32_t));
    *widest = 0;
    for (int64_t k = 0; k < lw_sparse_nonzeros(A) && *widest < 3; k++)
        if (++width[A->index[k]] > *widest) *widest = width[A->index[k]];
    lw_free(width);
    return LW_OK;
}

/* A network has points, or places on a plan and observations that touch two parameters at most; other
 * parameters with coordinates are cells. */
lw_status lw_report_picture(const lw_problem *problem, lw_picture *out, lw_error *error)
{
    *out = LW_PICTURE_NETWORK;
    for (int64_t j = 0; problem->point && j < problem->n; j++)
        if (problem->point[j] >= 0) return LW_OK;
    bool placed = problem->coordinate[0] || problem->coordinate[1] || problem->coordinate[2];
    *out = placed ? LW_PICTURE_CELLS : LW_PICTURE_CHART;
    if (!problem->coordinate[0] || !problem->coordinate[1]) return LW_OK;
    int32_t widest = 0;
    lw_status status = widest_row(problem, &widest, error);
    if (status == LW_OK && widest <= 2) *out = LW_PICTURE_NETWORK;
    return status;
}

static int by_value(const void *a, const void *b)
{
    double u = *(const double *)a, v = *(const double *)b;
    return (u > v) - (u < v);
}

lw_status lw_report_cover_rule(const lw_run *run, lw_cover_rule *out, lw_error *error)
{
    *out = (lw_cover_rule){3, 0.05, 0.0};
    int64_t n = run->problem->n, touched = 0;
    double *sorted = LW_NEW_ARRAY(double, n);
    if (sorted == NULL) return lw_fail_memory(error, "report", (size_t)n * sizeof(double));
    for (int64_t j = 0; j < n; j++)
        if (run->check->hits[j] > 0) sorted[touched++] = run->check->coverage[j];
    qsort(sorted, (size_t)touched, sizeof(double), by_value);
    if (touched > 0) out->coverage = out->share * sorted[touched / 2];
    lw_free(sorted);
    return LW_OK;
}

static void put_cover_rule(lw_json *json, const lw_cover_rule *rule)
{
    lw_json_object(json, "cover_rule");
    lw_json_integer(json, "hits", rule->hits);
    lw_json_number(json, "share", rule->share);
    lw_json_number(json, "coverage", rule->coverage);
    lw_json_close(json);
}

static lw_status put_cover(lw_json *json, const lw_run *run, lw_error *error)
{
    int64_t n = run->problem->n;
    double *hits = LW_NEW_ARRAY(double, n);
    if (hits == NULL) return lw_fail_memory(error, "report", (size_t)n * sizeof(double));
    for (int64_t j = 0; j < n; j++) hits[j] = (double)run->check->hits[j];
    lw_status status = lw_pack_numbers(json, "hits", n, hits, error);
    lw_free(hits);
    if (status == LW_OK) status = lw_pack_numbers(json, "coverage", n, run->check->coverage, error);
    return status;
}

/* sigma_kind as it stands, and at_bound + 1 (0 lower, 1 free, 2 upper): bytes for the page. */
static lw_status put_marks(lw_json *json, const lw_run *run, lw_error *error)
{
    int64_t n = run->problem->n;
    uint8_t *bytes = LW_NEW_ARRAY(uint8_t, n);
    if (bytes == NULL) return lw_fail_memory(error, "report", (size_t)n);
    lw_status status = LW_OK;
    if (run->certainty && run->certainty->sigma_kind) {
        for (int64_t j = 0; j < n; j++) bytes[j] = (uint8_t)run->certainty->sigma_kind[j];
        status = lw_pack_bytes(json, "kind", n, bytes, error);
    }
    if (status == LW_OK && run->at_bound) {
        for (int64_t j = 0; j < n; j++) bytes[j] = (uint8_t)(run->at_bound[j] + 1);
        status = lw_pack_bytes(json, "bound", n, bytes, error);
    }
    lw_free(bytes);
    return status;
}

static lw_status put_columns(lw_json *json, const lw_run *run, lw_error *error)
{
    static const char *const axis[] = {"x", "y", "z"};
    const lw_problem *problem = run->problem;
    const lw_certainty *certainty = run->certainty;
    int64_t n = problem->n;
    lw_status status = LW_OK;
    for (int a = 0; a < 3 && status == LW_OK; a++)
        status = lw_pack_numbers(json, axis[a], n, problem->coordinate[a], error);
    if (status == LW_OK) status = lw_pack_numbers(json, "prior", n, problem->prior, error);
    if (status == LW_OK)
        status = lw_pack_numbers(json, "estimate", n, run->estimate ? run->estimate->x : NULL, error);
    if (status == LW_OK && certainty && certainty->sigma && certainty->sigma_kind) {
        status = lw_pack_numbers(json, "sigma", n, certainty->sigma, error);
        if (status == LW_OK) status = lw_pack_numbers(json, "low", n, certainty->interval_low, error);
        if (status == LW_OK) status = lw_pack_numbers(json, "high", n, certainty->interval_high, error);
    }
    if (status == LW_OK && certainty)
        status = lw_pack_numbers(json, "resolution", n, certainty->resolution, error);
    if (status == LW_OK) status = put_marks(json, run, error);
    if (status == LW_OK && run->check && run->check->hits) status = put_cover(json, run, error);
    return status;
}

/* Rows of the resolution matrix that were asked for: {of: [parameter], rows: [column]}. */
static lw_status put_resolution_rows(lw_json *json, const lw_run *run, lw_error *error)
{
    int64_t n = run->problem->n, count = run->asked ? run->asked->resolution_count : 0;
    if (!run->certainty || !run->certainty->resolution_rows || count == 0) return LW_OK;
    lw_json_object(json, "resolution_rows");
    lw_json_array(json, "of");
    for (int64_t k = 0; k < count; k++) lw_json_integer(json, NULL, run->asked->resolution_of[k]);
    lw_json_close(json);
    lw_status status = LW_OK;
    lw_json_array(json, "rows");
    for (int64_t k = 0; k < count && status == LW_OK; k++)
        status = lw_pack_numbers(json, NULL, n, run->certainty->resolution_rows + k * n, error);
    lw_json_close(json);
    lw_json_close(json);
    return status;
}

lw_status lw_report_parameters(lw_json *json, const lw_run *run, lw_picture picture, lw_error *error)
{
    const lw_problem *problem = run->problem;
    lw_json_object(json, "parameters");
    lw_json_integer(json, "count", problem->n);
    lw_json_array(json, "id");
    for (int64_t j = 0; j < problem->n; j++)
        lw_json_text_value(json, NULL, lw_ids_name(problem->parameters, j));
    lw_json_close(json);
    lw_status status = put_columns(json, run, error);
    lw_json_close(json);
    if (status == LW_OK) status = put_resolution_rows(json, run, error);
    if (status != LW_OK || !run->check || !run->check->hits || picture != LW_PICTURE_CELLS) return status;
    lw_cover_rule rule;
    status = lw_report_cover_rule(run, &rule, error);
    if (status == LW_OK) put_cover_rule(json, &rule);
    return status;
}
