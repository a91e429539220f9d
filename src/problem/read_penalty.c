/* SPDX-License-Identifier: GPL-3.0-or-later */
/* penalty.csv: row, parameter, coefficient; an own operator L. */
#include "problem/linear_rows.h"

lw_status lw_read_penalty(lw_reading *reading, const char *path)
{
    lw_problem *problem = reading->problem;
    lw_linear_rows rows = {
        .name = "row", .header = "row,parameter,coefficient", .with_low = reading->options->keep_low};
    int64_t added;
    lw_status status = lw_linear_rows_open(reading, path, &rows);
    if (status == LW_OK) status = lw_linear_rows_read(&rows);
    if (status == LW_OK)
        status = lw_read_matrix(&rows.input, rows.triplets, rows.ids, rows.row, &problem->penalty, &added);
    if (status == LW_OK) {
        problem->penalty_rows = rows.ids;
        rows.ids = NULL;
    }
    lw_status closed = lw_linear_rows_close(&rows);
    return status != LW_OK ? status : closed;
}
