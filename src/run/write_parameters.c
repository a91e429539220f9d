/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/decimal.h"
#include "run/write.h"
#include "table/csv_write.h"

#include <math.h>

const char *const lw_reserved_columns[] = {
    "parameter",         "estimate",         "sigma_kind",     "interval_low",
    "interval_high",     "resolution",       "hits",           "coverage",
    "at_bound",          "bound_multiplier", "observation",    "predicted",
    "predicted_sigma",   "residual",         "redundancy",     "standardized",
    "detectable",        "bias_ratio",       "error_estimate", "largest_shift",
    "shifted_parameter", "weight",           "flag",           NULL};

static double entry(const double *array, int64_t i)
{
    return array ? array[i] : LW_UNKNOWN;
}

static void write_carried(lw_csv_writer *writer, const lw_carried *carried, int64_t row)
{
    for (int c = 0; c < carried->columns; c++)
        if (row < carried->rows)
            lw_csv_text(writer, lw_carried_text(carried, row, c));
        else
            lw_csv_empty(writer);
}

/* Columns of parameters.csv that the program reads but that a reader of the run wants beside the estimate. */
static void write_place_head(lw_csv_writer *writer, const lw_problem *problem)
{
    static const char *const axis[] = {"x", "y", "z"};
    if (problem->point) lw_csv_text(writer, "point");
    if (problem->axis) lw_csv_text(writer, "axis");
    if (problem->region) lw_csv_text(writer, "region");
    for (int d = 0; d < 3; d++)
        if (problem->coordinate[d]) lw_csv_text(writer, axis[d]);
}

static void write_place(lw_csv_writer *writer, const lw_problem *problem, int64_t j)
{
    static const char *const axis[] = {"", "east", "north", "up", "x", "y", "z"};
    if (problem->point)
        lw_csv_text(writer,
                    problem->point[j] >= 0 ? lw_ids_name(problem->point_names, problem->point[j]) : "");
    if (problem->axis) lw_csv_text(writer, axis[problem->axis[j]]);
    if (problem->region)
        lw_csv_text(writer,
                    problem->region[j] >= 0 ? lw_ids_name(problem->region_names, problem->region[j]) : "");
    for (int d = 0; d < 3; d++)
        if (problem->coordinate[d]) lw_csv_number(writer, problem->coordinate[d][j]);
}

static void write_bound(lw_csv_writer *writer, const lw_run *run, int64_t j)
{
    if (!run->at_bound) {
        lw_csv_empty(writer);
        return;
    }
    lw_csv_text(writer, run->at_bound[j] < 0 ? "lower" : run->at_bound[j] > 0 ? "upper" : "");
    if (run->bound_multiplier) lw_csv_number(writer, run->bound_multiplier[j]);
}

static const char *kind_of(const lw_run *run, int64_t j)
{
    if (run->problem->fixed && run->problem->fixed[j]) return lw_sigma_kind_name(LW_SIGMA_FIXED);
    return lw_sigma_kind_name(run->certainty ? (lw_sigma_kind)run->certainty->sigma_kind[j] : LW_SIGMA_NONE);
}

lw_status lw_write_parameters(const lw_run *run, const char *path, lw_error *error)
{
    const lw_problem *problem = run->problem;
    const lw_certainty *certainty = run->certainty;
    lw_csv_writer *writer;
    lw_status status = lw_csv_create(path, &writer, error);
    if (status != LW_OK) return status;
    for (int c = 0; c < 9; c++) {
        static const char *const head[] = {"parameter",  "estimate",     "sigma",
                                           "sigma_kind", "interval_low", "interval_high",
                                           "resolution", "hits",         "coverage"};
        lw_csv_text(writer, head[c]);
    }
    lw_csv_text(writer, "at_bound");
    if (run->at_bound && run->bound_multiplier) lw_csv_text(writer, "bound_multiplier");
    write_place_head(writer, problem);
    for (int c = 0; c < problem->parameter_carried.columns; c++)
        lw_csv_text(writer, problem->parameter_carried.name[c]);
    lw_csv_end_row(writer);
    for (int64_t j = 0; j < problem->n; j++) {
        bool fixed = problem->fixed && problem->fixed[j];
        lw_csv_text(writer, lw_ids_name(problem->parameters, j));
        lw_csv_number(writer, run->estimate->x[j]);
        lw_csv_number(writer, fixed || !certainty ? LW_UNKNOWN : entry(certainty->sigma, j));
        lw_csv_text(writer, kind_of(run, j));
        lw_csv_number(writer, fixed || !certainty ? LW_UNKNOWN : entry(certainty->interval_low, j));
        lw_csv_number(writer, fixed || !certainty ? LW_UNKNOWN : entry(certainty->interval_high, j));
        lw_csv_number(writer, fixed || !certainty ? LW_UNKNOWN : entry(certainty->resolution, j));
        lw_csv_integer(writer, run->check->hits[j]);
        lw_csv_number(writer, run->check->coverage[j]);
        write_bound(writer, run, j);
        write_place(writer, problem, j);
        write_carried(writer, &problem->parameter_carried, j);
        lw_csv_end_row(writer);
    }
    return lw_csv_finish(writer, error);
}
