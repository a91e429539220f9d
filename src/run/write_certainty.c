/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/write.h"
#include "table/csv_write.h"

#include <math.h>

static void write_head(lw_csv_writer *writer, const char *const *head)
{
    for (; *head; head++) lw_csv_text(writer, *head);
    lw_csv_end_row(writer);
}

lw_status lw_write_parameter_covariance(const lw_run *run, const char *path, lw_error *error)
{
    static const char *const head[] = {"parameter_a", "parameter_b", "covariance", NULL};
    const lw_certainty *certainty = run->certainty;
    lw_csv_writer *writer;
    lw_status status = lw_csv_create(path, &writer, error);
    if (status != LW_OK) return status;
    write_head(writer, head);
    for (int64_t k = 0; k < certainty->covariance_count; k++) {
        lw_csv_text(writer, lw_ids_name(run->problem->parameters, certainty->covariance[k].a));
        lw_csv_text(writer, lw_ids_name(run->problem->parameters, certainty->covariance[k].b));
        lw_csv_number(writer, certainty->covariance[k].covariance);
        lw_csv_end_row(writer);
    }
    return lw_csv_finish(writer, error);
}

lw_status lw_write_resolution_rows(const lw_run *run, const int64_t *of, int64_t count, const char *path,
                                   lw_error *error)
{
    static const char *const head[] = {"parameter", "of_parameter", "resolution", NULL};
    const lw_problem *problem = run->problem;
    lw_csv_writer *writer;
    lw_status status = lw_csv_create(path, &writer, error);
    if (status != LW_OK) return status;
    write_head(writer, head);
    for (int64_t k = 0; k < count; k++)
        for (int64_t j = 0; j < problem->n; j++) {
            lw_csv_text(writer, lw_ids_name(problem->parameters, of[k]));
            lw_csv_text(writer, lw_ids_name(problem->parameters, j));
            lw_csv_number(writer, run->certainty->resolution_rows[k * problem->n + j]);
            lw_csv_end_row(writer);
        }
    return lw_csv_finish(writer, error);
}

lw_status lw_write_ellipses(const lw_run *run, const char *path, lw_error *error)
{
    static const char *const head[] = {"point",      "to_point",   "semi_major", "semi_minor", "azimuth",
                                       "confidence", "multiplier", "vertical",   NULL};
    const lw_certainty *certainty = run->certainty;
    const lw_ids *points = run->problem->point_names;
    lw_csv_writer *writer;
    lw_status status = lw_csv_create(path, &writer, error);
    if (status != LW_OK) return status;
    write_head(writer, head);
    for (int64_t k = 0; k < certainty->ellipse_count; k++) {
        const lw_ellipse *ellipse = &certainty->ellipses[k];
        lw_csv_text(writer, lw_ids_name(points, ellipse->point));
        lw_csv_text(writer, ellipse->to_point >= 0 ? lw_ids_name(points, ellipse->to_point) : "");
        lw_csv_number(writer, ellipse->semi_major);
        lw_csv_number(writer, ellipse->semi_minor);
        lw_csv_number(writer, ellipse->azimuth);
        lw_csv_number(writer, ellipse->confidence);
        lw_csv_number(writer, ellipse->multiplier);
        lw_csv_number(writer, ellipse->vertical);
        lw_csv_end_row(writer);
    }
    return lw_csv_finish(writer, error);
}

lw_status lw_write_outliers(const lw_run *run, const char *path, lw_error *error)
{
    static const char *const head[] = {"step",     "observation", "action", "statistic",
                                       "critical", "reason",      NULL};
    lw_csv_writer *writer;
    lw_status status = lw_csv_create(path, &writer, error);
    if (status != LW_OK) return status;
    write_head(writer, head);
    char name[LW_ROW_NAME];
    for (int64_t k = 0; k < run->outliers->count; k++) {
        const lw_outlier_step *step = &run->outliers->steps[k];
        lw_csv_integer(writer, step->step);
        lw_csv_text(writer, step->row >= 0 ? lw_run_row_name(run, step->row, name) : "");
        lw_csv_text(writer, step->action);
        lw_csv_number(writer, step->statistic);
        lw_csv_number(writer, step->critical);
        lw_csv_text(writer, step->reason);
        lw_csv_end_row(writer);
    }
    return lw_csv_finish(writer, error);
}
