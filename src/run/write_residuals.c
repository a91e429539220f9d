/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/decimal.h"
#include "run/write.h"
#include "table/csv_write.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

const char *lw_run_row_name(const lw_run *run, int64_t row, char *text)
{
    const lw_problem *problem = run->problem;
    if (row < problem->m) return lw_ids_name(problem->observations, row);
    int64_t parameter = run->system->prior_parameter[row - problem->m];
    snprintf(text, LW_ROW_NAME, "prior:%s", lw_ids_name(problem->parameters, parameter));
    return text;
}

static double entry(const double *array, int64_t i)
{
    return array ? array[i] : LW_UNKNOWN;
}

/* Flags as words joined by ';', in the order of their bits. */
static void write_flag(lw_csv_writer *writer, unsigned flag)
{
    static const char *const word[] = {"no_redundancy", "weak", "suspect", "set_aside", "inseparable"};
    char text[80] = "";
    for (unsigned bit = 0; bit < 5; bit++)
        if (flag & (1u << bit)) {
            if (text[0]) strcat(text, ";");
            strcat(text, word[bit]);
        }
    lw_csv_text(writer, text);
}

static void write_value(lw_csv_writer *writer, const lw_run *run, int64_t row)
{
    const lw_problem *problem = run->problem;
    double value, sigma;
    if (row < problem->m) {
        value = problem->value[row];
        sigma = entry(problem->sigma, row);
    } else {
        int64_t parameter = run->system->prior_parameter[row - problem->m];
        value = entry(problem->prior, parameter);
        if (isnan(value)) value = 0.0;
        sigma = problem->prior_sigma[parameter];
    }
    lw_csv_number(writer, value);
    lw_csv_number(writer, sigma);
    lw_csv_number(writer, value + run->estimate->residual[row]);
}

static double weight_of(const lw_run *run, int64_t row)
{
    if (run->outliers && run->outliers->row_factor && run->outliers->row_factor[row] == 0.0) return 0.0;
    return run->weight ? run->weight[row] : 1.0;
}

static void write_certainty(lw_csv_writer *writer, const lw_run *run, int64_t row)
{
    const lw_certainty *certainty = run->certainty;
    lw_csv_number(writer, run->estimate->residual[row]);
    lw_csv_number(writer, certainty ? entry(certainty->redundancy, row) : LW_UNKNOWN);
    lw_csv_number(writer, certainty ? entry(certainty->standardized, row) : LW_UNKNOWN);
    lw_csv_number(writer, certainty ? entry(certainty->detectable, row) : LW_UNKNOWN);
    lw_csv_number(writer, certainty ? entry(certainty->bias_ratio, row) : LW_UNKNOWN);
    lw_csv_number(writer, certainty ? entry(certainty->error_estimate, row) : LW_UNKNOWN);
    lw_csv_number(writer, certainty ? entry(certainty->largest_shift, row) : LW_UNKNOWN);
    int64_t shifted = certainty && certainty->shifted_parameter ? certainty->shifted_parameter[row] : -1;
    if (shifted >= 0)
        lw_csv_text(writer, lw_ids_name(run->problem->parameters, shifted));
    else
        lw_csv_empty(writer);
    lw_csv_number(writer, weight_of(run, row));
    unsigned flag = certainty && certainty->flag ? certainty->flag[row] : 0;
    if (run->outliers && weight_of(run, row) == 0.0) flag |= LW_FLAG_SET_ASIDE;
    write_flag(writer, flag);
}

lw_status lw_write_residuals(const lw_run *run, const char *path, lw_error *error)
{
    static const char *const head[] = {
        "observation",       "value",        "sigma",      "predicted",  "predicted_sigma", "residual",
        "redundancy",        "standardized", "detectable", "bias_ratio", "error_estimate",  "largest_shift",
        "shifted_parameter", "weight",       "flag"};
    const lw_problem *problem = run->problem;
    const lw_carried *carried = &problem->observation_carried;
    lw_csv_writer *writer;
    lw_status status = lw_csv_create(path, &writer, error);
    if (status != LW_OK) return status;
    for (size_t c = 0; c < sizeof head / sizeof *head; c++) lw_csv_text(writer, head[c]);
    if (problem->group) lw_csv_text(writer, "group");
    for (int c = 0; c < carried->columns; c++) lw_csv_text(writer, carried->name[c]);
    lw_csv_end_row(writer);
    char name[LW_ROW_NAME];
    for (int64_t row = 0; row < run->estimate->rows; row++) {
        lw_csv_text(writer, lw_run_row_name(run, row, name));
        write_value(writer, run, row);
        lw_csv_number(writer, run->certainty ? entry(run->certainty->predicted_sigma, row) : LW_UNKNOWN);
        write_certainty(writer, run, row);
        if (problem->group) {
            int32_t group = row < problem->m ? problem->group[row] : -1;
            lw_csv_text(writer, group >= 0 ? lw_ids_name(problem->group_names, group) : "");
        }
        for (int c = 0; c < carried->columns; c++)
            lw_csv_text(writer, row < carried->rows ? lw_carried_text(carried, row, c) : "");
        lw_csv_end_row(writer);
    }
    return lw_csv_finish(writer, error);
}
