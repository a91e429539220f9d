/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/data.h"

#include "core/decimal.h"
#include "run/write.h"

#include <math.h>

static void put_fit(lw_json *json, const lw_run *run)
{
    const lw_certainty *c = run->certainty;
    const lw_global_test *test = c ? &c->test : NULL;
    lw_json_object(json, "fit");
    lw_json_number(json, "chi_square",
                   test            ? test->chi_square
                   : run->estimate ? run->estimate->point.chi_square
                                   : LW_UNKNOWN);
    lw_json_number(json, "rms", run->rms);
    lw_json_number(json, "variance_reduction", run->variance_reduction);
    lw_json_number(json, "effective_parameters", run->effective_parameters);
    lw_json_number(json, "degrees_of_freedom", test ? test->degrees_of_freedom : LW_UNKNOWN);
    lw_json_number(json, "variance_factor", test ? test->variance_factor : LW_UNKNOWN);
    lw_json_number(json, "probability", test ? test->probability : LW_UNKNOWN);
    lw_json_number(json, "lower", test ? test->lower : LW_UNKNOWN);
    lw_json_number(json, "upper", test ? test->upper : LW_UNKNOWN);
    lw_json_number(json, "alpha", test ? test->alpha : LW_UNKNOWN);
    lw_json_bool(json, "applies", test && test->applies);
    lw_json_bool(json, "rejected", test && test->applies && test->rejected);
    lw_json_number(json, "critical", c ? c->critical : LW_UNKNOWN);
    lw_json_number(json, "family_critical", c ? c->family_critical : LW_UNKNOWN);
    lw_json_number(json, "delta0", c ? c->delta0 : LW_UNKNOWN);
    lw_json_number(json, "multiplier", c ? c->interval_multiplier : LW_UNKNOWN);
    lw_json_close(json);
}

static void put_outliers(lw_json *json, const lw_run *run)
{
    if (run->outliers == NULL) {
        lw_json_null(json, "outliers");
        return;
    }
    char name[LW_ROW_NAME];
    lw_json_array(json, "outliers");
    for (int64_t k = 0; k < run->outliers->count; k++) {
        const lw_outlier_step *step = &run->outliers->steps[k];
        lw_json_object(json, NULL);
        lw_json_integer(json, "step", step->step);
        lw_json_text_value(json, "observation", step->row >= 0 ? lw_run_row_name(run, step->row, name) : "");
        lw_json_text_value(json, "action", step->action);
        lw_json_number(json, "statistic", step->statistic);
        lw_json_number(json, "critical", step->critical);
        lw_json_text_value(json, "reason", step->reason);
        lw_json_close(json);
    }
    lw_json_close(json);
}

void lw_report_certainty(lw_json *json, const lw_run *run)
{
    put_fit(json, run);
    put_outliers(json, run);
}

void lw_report_ellipses(lw_json *json, const lw_run *run, const int32_t *place)
{
    const lw_certainty *c = run->certainty;
    lw_json_array(json, "ellipses");
    for (int64_t k = 0; c && k < c->ellipse_count; k++) {
        const lw_ellipse *e = &c->ellipses[k];
        lw_json_object(json, NULL);
        lw_json_text_value(json, "point", lw_ids_name(run->problem->point_names, e->point));
        lw_json_text_value(json, "to_point",
                           e->to_point >= 0 ? lw_ids_name(run->problem->point_names, e->to_point) : NULL);
        lw_json_integer(json, "plan", place ? place[e->point] : -1);
        lw_json_number(json, "semi_major", e->semi_major);
        lw_json_number(json, "semi_minor", e->semi_minor);
        lw_json_number(json, "vertical", e->vertical);
        lw_json_number(json, "azimuth", e->azimuth);
        lw_json_number(json, "confidence", e->confidence);
        lw_json_number(json, "multiplier", e->multiplier);
        lw_json_close(json);
    }
    lw_json_close(json);
}
