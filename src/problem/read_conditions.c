/* SPDX-License-Identifier: GPL-3.0-or-later */
/* conditions.csv: condition, parameter, coefficient, value; exact conditions C x = d. */
#include "problem/linear_rows.h"

#include "core/memory.h"

/* Conditions are always exact: they have their low parts, also when all are 0. */
static lw_status keep_low(lw_sparse *C, lw_error *error)
{
    if (C->low != NULL) return LW_OK;
    C->low = LW_NEW_ZEROS(double, lw_sparse_nonzeros(C));
    return C->low != NULL
               ? LW_OK
               : lw_fail_memory(error, "conditions", (size_t)lw_sparse_nonzeros(C) * sizeof(double));
}

lw_status lw_read_conditions(lw_reading *reading, const char *path)
{
    lw_problem *problem = reading->problem;
    lw_linear_rows rows = {.name = "condition",
                           .header = "condition,parameter,coefficient,value",
                           .with_low = true,
                           .with_value = true};
    int64_t added;
    lw_status status = lw_linear_rows_open(reading, path, &rows);
    if (status == LW_OK) status = lw_linear_rows_read(&rows);
    if (status == LW_OK)
        status = lw_read_matrix(&rows.input, rows.triplets, rows.ids, rows.row, &problem->conditions, &added);
    if (status == LW_OK) status = keep_low(problem->conditions, reading->error);
    if (status == LW_OK)
        status =
            lw_numbers_take(&rows.values, &problem->condition_value, &problem->condition_low, reading->error);
    if (status == LW_OK) {
        problem->condition_names = rows.ids;
        rows.ids = NULL;
    }
    lw_status closed = lw_linear_rows_close(&rows);
    return status != LW_OK ? status : closed;
}
