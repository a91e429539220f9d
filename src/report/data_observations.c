/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/data.h"

#include "core/decimal.h"
#include "core/memory.h"
#include "run/write.h"

#include <math.h>

#define BINS 120
#define LARGEST 50

typedef struct bins {
    double from[BINS + 1], low[BINS], high[BINS], sum[BINS], square[BINS];
    int64_t count[BINS];
} bins;

static double observed(const lw_run *run, int64_t row)
{
    const lw_problem *problem = run->problem;
    if (row < problem->m) return problem->value[row];
    return problem->prior ? problem->prior[run->system->prior_parameter[row - problem->m]] : 0.0;
}

static void bin_rows(const lw_run *run, bool by_value, bins *out)
{
    int64_t m = run->problem->m;
    double low = by_value ? HUGE_VAL : 1.0, high = by_value ? -HUGE_VAL : (double)m;
    for (int64_t i = 0; by_value && i < m; i++) {
        low = fmin(low, run->problem->value[i]);
        high = fmax(high, run->problem->value[i]);
    }
    double width = high > low ? (high - low) / BINS : 1.0;
    *out = (bins){0};
    for (int b = 0; b <= BINS; b++) out->from[b] = low + b * width;
    for (int64_t i = 0; i < m; i++) {
        if (!lw_report_row_used(run, i)) continue;
        double place = ((by_value ? run->problem->value[i] : (double)(i + 1)) - low) / width,
               v = run->estimate->residual[i];
        int b = (int)fmin(fmax(place, 0.0), BINS - 1);
        if (out->count[b]++ == 0) out->low[b] = out->high[b] = v;
        out->low[b] = fmin(out->low[b], v);
        out->high[b] = fmax(out->high[b], v);
        out->sum[b] += v;
        out->square[b] += v * v;
    }
}

static void put_bins(lw_json *json, const char *key, const lw_run *run, bool by_value)
{
    static const char *const name[] = {"from", "to", "low", "high", "mean", "rms", "count"};
    bins b;
    bin_rows(run, by_value, &b);
    lw_json_object(json, key);
    for (int c = 0; c < 7; c++) {
        lw_json_array(json, name[c]);
        for (int k = 0; k < BINS; k++) {
            double n = (double)b.count[k];
            double value[] = {b.from[k],    b.from[k + 1],         b.low[k], b.high[k],
                              b.sum[k] / n, sqrt(b.square[k] / n), n};
            lw_json_number(json, NULL, value[c]);
        }
        lw_json_close(json);
    }
    lw_json_close(json);
}

/* sigma, value and flags of every row, then what certainty knows of them. */
static lw_status put_rows(lw_json *json, const lw_run *run, lw_error *error)
{
    int64_t rows = run->estimate->rows;
    const lw_certainty *c = run->certainty;
    char name[LW_ROW_NAME];
    lw_json_array(json, "id");
    for (int64_t i = 0; i < rows; i++) lw_json_text_value(json, NULL, lw_run_row_name(run, i, name));
    lw_json_close(json);
    double *column = LW_NEW_ARRAY(double, rows);
    if (column == NULL) return lw_fail_memory(error, "report", (size_t)rows * sizeof(double));
    for (int64_t i = 0; i < rows; i++) column[i] = observed(run, i);
    lw_status status = lw_pack_numbers(json, "value", rows, column, error);
    if (status == LW_OK && (run->problem->sigma || run->problem->covariance)) {
        for (int64_t i = 0; i < rows; i++) column[i] = lw_report_row_sigma(run, i);
        status = lw_pack_numbers(json, "sigma", rows, column, error);
    }
    lw_free(column);
    if (status == LW_OK) status = lw_pack_numbers(json, "residual", rows, run->estimate->residual, error);
    if (status == LW_OK) status = lw_pack_numbers(json, "weight", rows, run->weight, error);
    if (!c) return status;
    if (status == LW_OK) status = lw_pack_numbers(json, "redundancy", rows, c->redundancy, error);
    if (status == LW_OK) status = lw_pack_numbers(json, "standardized", rows, c->standardized, error);
    if (status == LW_OK) status = lw_pack_numbers(json, "detectable", rows, c->detectable, error);
    if (status == LW_OK) status = lw_pack_numbers(json, "bias_ratio", rows, c->bias_ratio, error);
    if (status == LW_OK) status = lw_pack_bytes(json, "flag", rows, c->flag, error);
    return status;
}

/* |standardised residual| of a row for the list: as tested where it is, else v over s0 sigma. */
static double standing(const lw_run *run, int64_t row, double s0)
{
    const double *tested = run->certainty ? run->certainty->standardized : NULL;
    if (!lw_report_row_used(run, row) && !tested) return LW_UNKNOWN;
    if (tested && !isnan(tested[row])) return tested[row];
    return lw_report_posterior(run) || !tested || run->damping > 0.0
               ? run->estimate->residual[row] / (s0 * lw_report_row_sigma(run, row))
               : LW_UNKNOWN;
}

/* The LARGEST rows by size, largest first, by insertion. */
static int find_largest(const lw_run *run, double s0, int64_t *row, double *value)
{
    int count = 0;
    for (int64_t i = 0; i < run->estimate->rows; i++) {
        double w = standing(run, i, s0);
        if (isnan(w) || (count == LARGEST && fabs(w) <= fabs(value[LARGEST - 1]))) continue;
        int k = count < LARGEST ? count++ : LARGEST - 1;
        for (; k > 0 && fabs(value[k - 1]) < fabs(w); k--) {
            value[k] = value[k - 1];
            row[k] = row[k - 1];
        }
        value[k] = w;
        row[k] = i;
    }
    return count;
}

static void put_largest(lw_json *json, const lw_run *run, double s0)
{
    const lw_problem *problem = run->problem;
    int64_t row[LARGEST];
    double value[LARGEST];
    int count = find_largest(run, s0, row, value);
    bool tested =
        run->certainty && run->certainty->standardized && (run->damping == 0.0 || lw_report_posterior(run));
    char name[LW_ROW_NAME];
    lw_json_text_value(
        json, "largest_by",
        tested ? "Each residual over its own standard deviation, as tested against the critical values above."
               : "Each residual over the standard deviation of its reading (not of the residual): an order "
                 "of suspicion, not a test.");
    lw_json_array(json, "largest");
    for (int k = 0; k < count; k++) {
        int32_t group = problem->group && row[k] < problem->m ? problem->group[row[k]] : -1;
        lw_json_object(json, NULL);
        lw_json_text_value(json, "id", lw_run_row_name(run, row[k], name));
        lw_json_text_value(json, "group", group >= 0 ? lw_ids_name(problem->group_names, group) : NULL);
        lw_json_number(json, "value", observed(run, row[k]));
        lw_json_number(json, "residual", run->estimate->residual[row[k]]);
        lw_json_number(json, "sigma",
                       problem->sigma || problem->covariance ? lw_report_row_sigma(run, row[k]) : LW_UNKNOWN);
        lw_json_number(json, "standardized", value[k]);
        lw_json_close(json);
    }
    lw_json_close(json);
}

lw_status lw_report_observations(lw_json *json, const lw_run *run, lw_error *error)
{
    if (run->estimate == NULL) {
        lw_json_null(json, "observations");
        return LW_OK;
    }
    lw_status status = LW_OK;
    if (run->estimate->rows <= LW_REPORT_MOST_ROWS) {
        lw_json_object(json, "observations");
        lw_json_integer(json, "count", run->estimate->rows);
        status = put_rows(json, run, error);
        lw_json_close(json);
    } else {
        lw_json_object(json, "binned");
        put_bins(json, "order", run, false);
        put_bins(json, "value", run, true);
        lw_json_close(json);
    }
    put_largest(json, run, lw_report_scale(run, run->estimate->point.chi_square, run->effective_parameters));
    return status;
}
