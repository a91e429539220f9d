/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/decimal.h"
#include "run/write.h"
#include "table/csv_write.h"

#include <math.h>

lw_status lw_write_tradeoff(const lw_run *run, const char *path, lw_error *error)
{
    static const char *const head[] = {
        "damping", "misfit", "size",      "chi_square",  "effective_parameters",
        "gcv",     "risk",   "curvature", "error_bound", "converged"};
    lw_csv_writer *writer;
    lw_status status = lw_csv_create(path, &writer, error);
    if (status != LW_OK) return status;
    for (size_t c = 0; c < sizeof head / sizeof *head; c++) lw_csv_text(writer, head[c]);
    lw_csv_end_row(writer);
    for (int i = 0; i < run->curve->count; i++) {
        const lw_curve_row *row = &run->curve->row[i];
        lw_csv_number(writer, row->point.lambda);
        lw_csv_number(writer, row->point.misfit);
        lw_csv_number(writer, row->point.size);
        lw_csv_number(writer, row->point.chi_square);
        lw_csv_number(writer, row->point.effective_parameters);
        lw_csv_number(writer, row->gcv);
        lw_csv_number(writer, row->risk);
        lw_csv_number(writer, row->curvature);
        lw_csv_number(writer, row->point.error_bound);
        lw_csv_text(writer, row->converged ? "yes" : "no");
        lw_csv_end_row(writer);
    }
    return lw_csv_finish(writer, error);
}

lw_status lw_write_models(const lw_run *run, double only, const char *path, lw_error *error)
{
    const lw_problem *problem = run->problem;
    lw_csv_writer *writer;
    lw_status status = lw_csv_create(path, &writer, error);
    if (status != LW_OK) return status;
    lw_csv_text(writer, "parameter");
    for (int i = 0; i < run->curve->count; i++)
        if (isnan(only)) lw_csv_number(writer, run->curve->row[i].point.lambda);
    if (!isnan(only)) lw_csv_number(writer, only);
    lw_csv_end_row(writer);
    for (int64_t j = 0; j < problem->n; j++) {
        lw_csv_text(writer, lw_ids_name(problem->parameters, j));
        for (int i = 0; i < run->curve->count && isnan(only); i++)
            lw_csv_number(writer, run->models[(int64_t)i * problem->n + j]);
        if (!isnan(only)) lw_csv_number(writer, run->estimate->x[j]);
        lw_csv_end_row(writer);
    }
    return lw_csv_finish(writer, error);
}
