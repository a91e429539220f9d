/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/data.h"

/* A pattern: its names and sums, and per parameter what went in, what came out, and how much of it. */
static lw_status put_pattern(lw_json *json, int64_t n, const lw_probe_pattern *pattern, lw_error *error)
{
    lw_json_object(json, NULL);
    lw_json_text_value(json, "name", pattern->name);
    lw_json_number(json, "size", pattern->size);
    lw_json_number(json, "overall_amplitude", pattern->overall_amplitude);
    lw_json_number(json, "overall_correlation", pattern->overall_correlation);
    lw_status status = lw_pack_model(json, "input", n, pattern->input, error);
    if (status == LW_OK) status = lw_pack_model(json, "recovered", n, pattern->recovered, error);
    if (status == LW_OK && pattern->amplitude)
        status = lw_pack_model(json, "amplitude", n, pattern->amplitude, error);
    if (status == LW_OK && pattern->correlation)
        status = lw_pack_model(json, "correlation", n, pattern->correlation, error);
    lw_json_close(json);
    return status;
}

lw_status lw_report_probe(lw_json *json, const lw_run *run, lw_error *error)
{
    const lw_probe *probe = run->probe;
    if (probe == NULL) {
        lw_json_null(json, "probe");
        return LW_OK;
    }
    lw_json_object(json, "probe");
    lw_json_number(json, "amplitude", probe->amplitude);
    lw_json_bool(json, "noisy", probe->noisy);
    lw_json_integer(json, "trials", probe->trials);
    lw_json_bool(json, "bootstrap", probe->bootstrap);
    lw_status status =
        probe->spread ? lw_pack_numbers(json, "spread", probe->parameters, probe->spread, error) : LW_OK;
    lw_json_array(json, "patterns");
    for (int k = 0; k < probe->patterns && status == LW_OK; k++)
        status = put_pattern(json, probe->parameters, &probe->pattern[k], error);
    lw_json_close(json);
    lw_json_close(json);
    return status;
}
