/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/write.h"
#include "table/csv_write.h"

#include <math.h>

lw_status lw_write_recovery(const lw_run *run, const char *path, lw_error *error)
{
    static const char *const head[] = {"pattern",   "size",      "parameter",  "input",
                                       "recovered", "amplitude", "correlation"};
    const lw_probe *probe = run->probe;
    lw_csv_writer *writer;
    lw_status status = lw_csv_create(path, &writer, error);
    if (status != LW_OK) return status;
    for (size_t c = 0; c < sizeof head / sizeof *head; c++) lw_csv_text(writer, head[c]);
    lw_csv_end_row(writer);
    for (int k = 0; k < probe->patterns; k++)
        for (int64_t j = 0; j < probe->parameters; j++) {
            const lw_probe_pattern *pattern = &probe->pattern[k];
            lw_csv_text(writer, pattern->name);
            lw_csv_number(writer, pattern->size);
            lw_csv_text(writer, lw_ids_name(run->problem->parameters, j));
            lw_csv_number(writer, pattern->input[j]);
            lw_csv_number(writer, pattern->recovered[j]);
            lw_csv_number(writer, pattern->amplitude[j]);
            lw_csv_number(writer, pattern->correlation[j]);
            lw_csv_end_row(writer);
        }
    return lw_csv_finish(writer, error);
}

lw_status lw_write_spread(const lw_run *run, const char *path, lw_error *error)
{
    const lw_probe *probe = run->probe;
    lw_csv_writer *writer;
    lw_status status = lw_csv_create(path, &writer, error);
    if (status != LW_OK) return status;
    lw_csv_text(writer, "parameter");
    lw_csv_text(writer, "spread");
    lw_csv_text(writer, "relative_error");
    lw_csv_end_row(writer);
    for (int64_t j = 0; j < probe->parameters; j++) {
        lw_csv_text(writer, lw_ids_name(run->problem->parameters, j));
        lw_csv_number(writer, probe->spread[j]);
        lw_csv_number(writer,
                      1.0 / sqrt(2.0 * probe->trials)); /* of a standard deviation from N normal draws */
        lw_csv_end_row(writer);
    }
    return lw_csv_finish(writer, error);
}
