/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/data.h"

#include "core/decimal.h"
#include "core/memory.h"

#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

static void put_units(lw_json *json, const lw_run *run)
{
    const lw_problem *problem = run->problem;
    const char *unit = problem->parameter_unit ? problem->parameter_unit : "";
    bool differences = run->system && (run->system->prefer == LW_PREFER_FLATTEST ||
                                       run->system->prefer == LW_PREFER_SMOOTHEST);
    bool known = *unit && run->system && run->system->prefer == LW_PREFER_SMALLEST;
    char damping[256] = "";
    /* misfit has no unit where sigma was given, so lambda has that of 1 / (L x); else that of the values over
     * it */
    const char *values = problem->value_unit && *problem->value_unit ? problem->value_unit : "1";
    if (known)
        snprintf(damping, sizeof damping, "%.100s/(%.100s)",
                 problem->sigma || problem->covariance ? "1" : values, unit);
    char size[160] = "";
    if (known)
        snprintf(size, sizeof size, "%.100s", unit);
    else if (*unit && differences)
        snprintf(size, sizeof size, "%.100s per unit of distance", unit);
    lw_json_object(json, "units");
    lw_json_text_value(json, "value", problem->value_unit ? problem->value_unit : "");
    lw_json_text_value(json, "parameter", unit);
    lw_json_text_value(json, "damping", damping);
    lw_json_text_value(json, "size", size);
    lw_json_text_value(json, "coverage", "");
    lw_json_text_value(json, "coordinate", "");
    lw_json_text_value(json, "ellipse", unit);
    lw_json_close(json);
}

static void put_problem(lw_json *json, const lw_run *run)
{
    const lw_problem *problem = run->problem;
    int64_t fixed = 0;
    for (int64_t j = 0; problem->fixed && j < problem->n; j++) fixed += problem->fixed[j];
    lw_json_object(json, "problem");
    lw_json_text_value(json, "folder", problem->folder);
    lw_json_integer(json, "observations", problem->m);
    lw_json_integer(json, "parameters", problem->n);
    lw_json_integer(json, "nonzeros", lw_sparse_nonzeros(problem->design));
    lw_json_integer(json, "fixed", fixed);
    lw_json_integer(json, "priors", run->system ? run->system->priors : 0);
    lw_json_integer(json, "conditions", problem->conditions ? problem->conditions->rows : 0);
    lw_json_bool(json, "correlated", problem->covariance != NULL);
    lw_json_bool(json, "sigma_given", problem->sigma != NULL || problem->covariance != NULL);
    lw_json_close(json);
}

static void put_settings(lw_json *json, const lw_run *run)
{
    lw_json_object(json, "settings");
    lw_json_number(json, "damping", run->damping);
    lw_json_text_value(json, "chosen_by", run->damping_chosen_by ? run->damping_chosen_by : "none");
    lw_json_text_value(json, "prefer", run->system ? lw_penalty_name(run->system->prefer) : NULL);
    lw_json_text_value(json, "variance", run->variance_estimated ? "estimated" : "stated");
    lw_json_text_value(json, "sigma_meaning", lw_report_sigma_meaning(run));
    lw_json_bool(json, "certainty", run->certainty != NULL);
    lw_json_close(json);
}

static void put_engine(lw_json *json, const lw_run *run)
{
    const lw_estimate *estimate = run->estimate;
    lw_json_object(json, "engine");
    lw_json_text_value(json, "name", run->engine.engine ? run->engine.engine->name : "none");
    lw_json_text_value(json, "why", run->engine.why[0] ? run->engine.why : NULL);
    lw_json_text_value(json, "stop_words",
                       estimate ? lw_stop_words(estimate->stop)
                                : "No damping was picked, so no answer was computed.");
    if (estimate)
        lw_json_integer(json, "steps", estimate->steps);
    else
        lw_json_null(json, "steps");
    if (estimate && estimate->rank >= 0)
        lw_json_integer(json, "rank", estimate->rank);
    else
        lw_json_null(json, "rank");
    lw_json_number(json, "error_bound", estimate ? estimate->point.error_bound : LW_UNKNOWN);
    lw_json_number(json, "tolerance", run->tolerance > 0.0 ? run->tolerance : LW_UNKNOWN);
    lw_json_number(json, "rcond", estimate ? estimate->rcond : LW_UNKNOWN);
    lw_json_number(json, "refined_to", estimate ? estimate->refined_to : LW_UNKNOWN);
    lw_json_number(json, "sigma_error", run->certainty ? run->certainty->sigma_error : LW_UNKNOWN);
    lw_json_integer(json, "samples", run->certainty ? run->certainty->samples : 0);
    lw_json_close(json);
}

static void put_inputs(lw_json *json, const lw_run *run)
{
    lw_json_array(json, "inputs");
    for (int i = 0; i < run->problem->input_count; i++) {
        const lw_input_file *file = &run->problem->inputs[i];
        lw_json_object(json, NULL);
        lw_json_text_value(json, "file", file->path);
        lw_json_integer(json, "bytes", file->bytes);
        lw_json_text_value(json, "sha256", file->sha256);
        lw_json_close(json);
    }
    lw_json_close(json);
    lw_json_object(json, "seconds");
    lw_json_number(json, "read", run->seconds.read);
    lw_json_number(json, "solve", run->seconds.solve);
    lw_json_number(json, "certainty", run->seconds.certainty);
    lw_json_close(json);
}

static void put_standing_cautions(lw_json *json, const lw_run *run)
{
    lw_json_array(json, "standing_cautions");
    lw_json_text_value(
        json, NULL,
        "Standard deviations describe random error only; a mistake that all readings share is not in them.");
    if (run->damping > 0.0 || run->curve)
        lw_json_text_value(json, NULL,
                           "A damped model is not the only one that fits: other models fit these data as "
                           "well, and the damping biases this one.");
    else
        lw_json_text_value(json, NULL,
                           "That the tests pass does not prove that there is no blunder: some hide each "
                           "other, and some cannot be seen.");
    lw_json_text_value(json, NULL,
                       "Models are rounded to 16 bits a value for the pictures of this page; the CSV files "
                       "keep every digit.");
    lw_json_text_value(json, NULL,
                       "Results do not replace local regulations and the judgement of licensed practice.");
    lw_json_close(json);
}

static lw_status put_all(lw_json *json, const lw_run *run, lw_error *error)
{
    static const char *const pictures[] = {"chart", "cells", "network"};
    lw_picture picture;
    lw_status status = lw_report_picture(run->problem, &picture, error);
    if (status != LW_OK) return status;
    char seed[32];
    snprintf(seed, sizeof seed, "%" PRIu64, run->seed);
    lw_json_text_value(json, "version", run->version);
    lw_json_text_value(json, "command", run->command);
    lw_json_text_value(json, "command_line", run->command_line);
    lw_json_text_value(json, "objective", lw_run_objective());
    lw_json_text_value(json, "seed", seed);
    lw_json_text_value(json, "map", pictures[picture]);
    put_units(json, run);
    put_problem(json, run);
    put_settings(json, run);
    put_engine(json, run);
    lw_report_certainty(json, run);
    lw_report_test_words(json, run);
    lw_report_cautions(json, run);
    put_standing_cautions(json, run);
    put_inputs(json, run);
    char *prefix = lw_report_solve_prefix(run->command_line);
    if (prefix == NULL) return lw_fail_memory(error, "report", 1);
    lw_json_text_value(json, "solve_prefix", prefix);
    lw_free(prefix);
    status = lw_report_parameters(json, run, picture, error);
    if (status == LW_OK) status = lw_report_observations(json, run, error);
    if (status == LW_OK) status = lw_report_groups(json, run, error);
    if (status == LW_OK) status = lw_report_curve(json, run, error);
    if (status == LW_OK) status = lw_report_plan(json, run, picture, error);
    if (status == LW_OK) status = lw_report_probe(json, run, error);
    return status;
}

lw_status lw_report_data(const lw_run *run, char **text, size_t *length, lw_error *error)
{
    *text = NULL;
    lw_json *json = NULL;
    lw_status status = lw_json_new(&json, error);
    if (status == LW_OK) status = put_all(json, run, error);
    if (status == LW_OK) status = lw_json_dump(json, true, text, length, error);
    lw_json_free(json);
    return status;
}
