/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/data.h"

#include "core/decimal.h"
#include "core/memory.h"

#include <math.h>

typedef struct sums {
    int64_t count;
    double residual, square, chi_square;
} sums;

/* Sums over the rows of each group; the last two: observations without a group, weighted priors. */
static void add_rows(const lw_run *run, int64_t groups, sums *out)
{
    const lw_problem *problem = run->problem;
    const lw_estimate *estimate = run->estimate;
    for (int64_t i = 0; i < estimate->rows; i++) {
        if (!lw_report_row_used(run, i)) continue;
        int64_t g = i >= problem->m                            ? groups + 1
                    : problem->group && problem->group[i] >= 0 ? problem->group[i]
                                                               : groups;
        out[g].count++;
        out[g].residual += estimate->residual[i];
        out[g].square += estimate->residual[i] * estimate->residual[i];
        out[g].chi_square += estimate->residual[i] * estimate->weighted[i];
    }
}

static const lw_group_factor *factor_of(const lw_run *run, int32_t group)
{
    for (int k = 0; run->certainty && k < run->certainty->group_count; k++)
        if (run->certainty->groups[k].group == group) return &run->certainty->groups[k];
    return NULL;
}

lw_status lw_report_groups(lw_json *json, const lw_run *run, lw_error *error)
{
    const lw_problem *problem = run->problem;
    int64_t groups = problem->group_names ? lw_ids_count(problem->group_names) : 0;
    lw_json_array(json, "groups");
    sums *sum = NULL;
    if (run->estimate) {
        sum = LW_NEW_ZEROS(sums, groups + 2);
        if (sum == NULL) return lw_fail_memory(error, "report", (size_t)(groups + 2) * sizeof(sums));
        add_rows(run, groups, sum);
    }
    for (int64_t g = 0; sum && g < groups + 2; g++) {
        if (sum[g].count == 0) continue;
        int32_t number = g < groups ? (int32_t)g : g == groups ? -2 : -1;
        const lw_group_factor *factor = factor_of(run, number);
        double n = (double)sum[g].count;
        lw_json_object(json, NULL);
        lw_json_text_value(json, "name",
                           g < groups     ? lw_ids_name(problem->group_names, g)
                           : number == -1 ? "weighted priors"
                           : groups       ? "without a group"
                                          : "all observations");
        lw_json_integer(json, "observations", sum[g].count);
        lw_json_number(json, "mean", sum[g].residual / n);
        lw_json_number(json, "rms", sqrt(sum[g].square / n));
        lw_json_number(json, "chi_square", sum[g].chi_square);
        lw_json_number(json, "redundancy", factor ? factor->redundancy : LW_UNKNOWN);
        lw_json_number(json, "factor", factor ? factor->factor : LW_UNKNOWN);
        lw_json_number(json, "component", factor ? factor->component : LW_UNKNOWN);
        lw_json_number(json, "component_sigma", factor ? factor->component_sigma : LW_UNKNOWN);
        lw_json_close(json);
    }
    lw_free(sum);
    lw_json_close(json);
    return LW_OK;
}
