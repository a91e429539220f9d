/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/command.h"
#include "command/work.h"

#include "core/decimal.h"
#include "core/memory.h"
#include "table/csv_read.h"

#include <unistd.h>

/* A pattern file: parameter,value; parameters that it does not name are 0. */
static lw_status read_pattern(const lw_work *work, const char *path, double *pattern, lw_error *error)
{
    lw_csv *csv;
    lw_csv_batch batch;
    if (access(path, F_OK) != 0)
        return lw_fail(error, LW_BAD_INPUT,
                       "%s:1:1: found no such file, expected a pattern (parameter,value)", path);
    lw_status status = lw_csv_open(path, &csv, error);
    if (status != LW_OK) return status;
    int id = lw_csv_require(csv, "parameter", "parameter,value", error);
    int value = lw_csv_require(csv, "value", "parameter,value", error);
    bool faulty = id < 0 || value < 0;
    while (!faulty && (status = lw_csv_next(csv, &batch, &work->watch, error)) == LW_OK && batch.rows > 0)
        for (int r = 0; r < batch.rows; r++) {
            const lw_field *field = &batch.fields[r * batch.columns + id];
            int64_t j = lw_ids_find(work->problem->parameters, field->text, field->length);
            lw_decimal number;
            if (j < 0) {
                char found[LW_CSV_FOUND];
                lw_csv_fault(csv, batch.first_row + r, id, lw_csv_quote(field->text, field->length, found),
                             "the id of a parameter", error);
                faulty = true;
            } else if (lw_csv_decimal(csv, &batch, r, value, &number, error) != LW_OK)
                faulty = true;
            else
                pattern[j] = number.high;
        }
    lw_csv_close(csv);
    return status == LW_OK && faulty ? LW_BAD_INPUT : status;
}

static lw_status run_probe(lw_work *work, double lambda, lw_error *error)
{
    static const double usual[] = {2.0, 4.0};
    const lw_arguments *arguments = work->arguments;
    lw_probe_plan options = {.kind =
                                 arguments->pattern == LW_PATTERN_SPIKES ? LW_PROBE_SPIKES : LW_PROBE_CHECKER,
                             .size = arguments->pattern_sizes ? arguments->pattern_size : usual,
                             .sizes = arguments->pattern_sizes ? arguments->pattern_sizes : 2,
                             .length = arguments->pattern_in_units,
                             .amplitude = arguments->pattern_amplitude,
                             .trials = arguments->trials,
                             .bootstrap = arguments->bootstrap};
    double *given = NULL;
    lw_status status = LW_OK;
    if (arguments->pattern_in_units && !arguments->pattern_sizes)
        return lw_fail(error, LW_BAD_USAGE,
                       "--size-unit length: give --sizes in the unit of the coordinates");
    if (arguments->pattern == LW_PATTERN_FILE) {
        given = LW_NEW_ZEROS(double, work->problem->n + 1);
        if (!given) return lw_fail_memory(error, "the pattern", (size_t)work->problem->n * sizeof(double));
        options.kind = LW_PROBE_GIVEN;
        options.given = given;
        status = read_pattern(work, arguments->pattern_file, given, error);
    }
    if (status == LW_OK && !work->decomposition) status = lw_work_decompose(work, lambda, false, error);
    if (status >= 0)
        status = lw_probe_make(work->decomposition, lambda, &options, &work->watch, &work->probe, error);
    if (status > 0 && work->qualified == LW_OK) work->qualified = status;
    work->run.probe = work->probe;
    work->run.damping = lambda;
    work->run.damping_chosen_by = lw_damping_choice_name(arguments->damping);
    work->run.interrupted = work->qualified == LW_INTERRUPTED;
    work->run.seconds.solve += lw_work_lap(work);
    lw_free(given);
    return status > 0 ? LW_OK : status;
}

int lw_command_probe(const lw_command *self, int argc, char **argv)
{
    lw_arguments arguments;
    lw_error error = {0};
    lw_work work = {0};
    double lambda;
    lw_status status =
        lw_arguments_read(argc, argv, self->doc, self->operands, self->groups, &arguments, &error);
    if (status == LW_OK && arguments.bootstrap && !arguments.trials)
        status = lw_fail(&error, LW_BAD_USAGE, "--bootstrap: give the number of --trials too");
    if (status == LW_OK) status = lw_work_open(&work, &arguments, &error);
    if (status == LW_OK) status = lw_work_system(&work, &error);
    if (status == LW_OK) status = lw_work_damping(&work, &lambda, &error);
    if (status == LW_OK && work.qualified != LW_INTERRUPTED) status = run_probe(&work, lambda, &error);
    if (status == LW_OK && work.probe) status = lw_work_write(&work, &error);
    lw_progress_end(&work.progress);
    int exit_status = lw_work_exit(&work, status, &error);
    lw_work_close(&work);
    lw_arguments_clear(&arguments);
    return exit_status;
}
