/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/decimal.h"
#include "run/write.h"
#include "table/json.h"

#include <math.h>

static void write_sizes(lw_json *json, const lw_run *run)
{
    const lw_certainty *certainty = run->certainty;
    lw_json_object(json, "sizes");
    lw_json_integer(json, "observations", run->problem->m);
    lw_json_integer(json, "parameters", run->problem->n);
    lw_json_integer(json, "nonzeros", lw_sparse_nonzeros(run->problem->design));
    if (run->estimate && run->estimate->rank >= 0)
        lw_json_integer(json, "rank", run->estimate->rank);
    else
        lw_json_null(json, "rank");
    lw_json_number(json, "degrees_of_freedom", certainty ? certainty->test.degrees_of_freedom : LW_UNKNOWN);
    lw_json_close(json);
}

static void write_engine(lw_json *json, const lw_run *run)
{
    const lw_estimate *estimate = run->estimate;
    lw_json_object(json, "engine");
    lw_json_text_value(json, "name", run->engine.engine ? run->engine.engine->name : NULL);
    lw_json_text_value(json, "why", run->engine.why);
    if (estimate) {
        lw_json_integer(json, "steps", estimate->steps);
        lw_json_text_value(json, "stop_reason", lw_stop_name(estimate->stop));
        lw_json_number(json, "error_bound", estimate->point.error_bound);
        lw_json_number(json, "rcond", estimate->rcond);
    } else {
        static const char *const names[] = {"steps", "stop_reason", "error_bound", "rcond"};
        for (int i = 0; i < 4; i++) lw_json_null(json, names[i]);
    }
    lw_json_number(json, "sigma_error", run->certainty ? run->certainty->sigma_error : LW_UNKNOWN);
    lw_json_close(json);
}

static void write_damping(lw_json *json, const lw_run *run)
{
    lw_json_object(json, "damping");
    lw_json_number(json, "value", run->damping > 0.0 ? run->damping : LW_UNKNOWN);
    lw_json_text_value(json, "chosen_by", run->damping_chosen_by);
    lw_json_text_value(json, "prefer", run->system ? lw_penalty_name(run->system->prefer) : NULL);
    lw_json_number(json, "effective_parameters", run->effective_parameters);
    lw_json_close(json);
}

static void write_fit(lw_json *json, const lw_run *run)
{
    const lw_certainty *certainty = run->certainty;
    lw_json_object(json, "fit");
    lw_json_number(json, "chi_square", run->estimate ? run->estimate->point.chi_square : LW_UNKNOWN);
    lw_json_number(json, "rms", run->rms);
    lw_json_number(json, "variance_reduction", run->variance_reduction);
    lw_json_number(json, "variance_factor", certainty ? certainty->test.variance_factor : LW_UNKNOWN);
    lw_json_text_value(json, "variance", run->variance_estimated ? "estimated" : "stated");
    lw_json_number(json, "probability", certainty ? certainty->test.probability : LW_UNKNOWN);
    if (certainty && certainty->test.applies)
        lw_json_bool(json, "rejected", certainty->test.rejected);
    else
        lw_json_null(json, "rejected");
    lw_json_close(json);
}

static void write_choices(lw_json *json, const lw_run *run)
{
    lw_json_array(json, "choices");
    for (int i = 0; run->curve && i < run->curve->choices; i++) {
        const lw_choice *choice = &run->curve->choice[i];
        lw_json_object(json, NULL);
        lw_json_text_value(json, "criterion", lw_criterion_name(choice->criterion));
        lw_json_number(json, "damping", choice->damping);
        lw_json_number(json, "from", choice->from);
        lw_json_number(json, "to", choice->to);
        lw_json_text_value(json, "warning", choice->warning[0] ? choice->warning : NULL);
        lw_json_close(json);
    }
    lw_json_close(json);
}

static void write_groups(lw_json *json, const lw_run *run)
{
    const lw_certainty *certainty = run->certainty;
    lw_json_array(json, "groups");
    for (int i = 0; certainty && i < certainty->group_count; i++) {
        const lw_group_factor *group = &certainty->groups[i];
        lw_json_object(json, NULL);
        lw_json_text_value(json, "group",
                           group->group >= 0    ? lw_ids_name(run->problem->group_names, group->group)
                           : group->group == -1 ? "weighted priors"
                                                : "no group");
        lw_json_integer(json, "observations", group->observations);
        lw_json_number(json, "redundancy", group->redundancy);
        lw_json_number(json, "chi_square", group->chi_square);
        lw_json_number(json, "variance_factor", group->factor);
        lw_json_number(json, "component", group->component);
        lw_json_number(json, "component_sigma", group->component_sigma);
        lw_json_close(json);
    }
    lw_json_close(json);
}

static void write_probe(lw_json *json, const lw_run *run)
{
    const lw_probe *probe = run->probe;
    lw_json_object(json, "probe");
    lw_json_number(json, "amplitude", probe->amplitude);
    lw_json_bool(json, "noise", probe->noisy);
    lw_json_integer(json, "trials", probe->trials);
    lw_json_bool(json, "bootstrap", probe->bootstrap);
    lw_json_array(json, "patterns");
    for (int k = 0; k < probe->patterns; k++) {
        lw_json_object(json, NULL);
        lw_json_text_value(json, "pattern", probe->pattern[k].name);
        lw_json_number(json, "size", probe->pattern[k].size);
        lw_json_number(json, "correlation", probe->pattern[k].overall_correlation);
        lw_json_number(json, "amplitude", probe->pattern[k].overall_amplitude);
        lw_json_close(json);
    }
    lw_json_close(json);
    lw_json_close(json);
}

static void write_inputs(lw_json *json, const lw_run *run)
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
}

lw_status lw_write_summary(const lw_run *run, const char *path, lw_error *error)
{
    lw_json *json;
    lw_status status = lw_json_new(&json, error);
    if (status != LW_OK) return status;
    lw_json_text_value(json, "leastwise", run->version);
    lw_json_text_value(json, "command", run->command_line);
    lw_json_text_value(json, "objective", lw_run_objective());
    lw_json_object(json, "units");
    lw_json_text_value(json, "value", run->problem->value_unit);
    lw_json_text_value(json, "parameter", run->problem->parameter_unit);
    lw_json_close(json);
    lw_json_integer(json, "seed", (int64_t)run->seed);
    lw_json_bool(json, "interrupted", run->interrupted);
    write_sizes(json, run);
    write_engine(json, run);
    write_damping(json, run);
    write_fit(json, run);
    write_choices(json, run);
    write_groups(json, run);
    if (run->probe) write_probe(json, run);
    lw_json_array(json, "warnings");
    for (size_t i = 0; i < run->warnings->count; i++) lw_json_text_value(json, NULL, run->warnings->text[i]);
    lw_json_close(json);
    write_inputs(json, run);
    lw_json_object(json, "seconds");
    lw_json_number(json, "read", run->seconds.read);
    lw_json_number(json, "solve", run->seconds.solve);
    lw_json_number(json, "certainty", run->seconds.certainty);
    lw_json_number(json, "write", run->seconds.write);
    lw_json_close(json);
    status = lw_json_save(json, path, error);
    lw_json_free(json);
    return status;
}
