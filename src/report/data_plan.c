/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The plan of a network: where its points lie, and which points an observation joins. */
#include "report/data.h"

#include "core/decimal.h"
#include "core/memory.h"

#include <math.h>
#include <string.h>

typedef struct plan {
    int64_t count;     /* points with a place */
    int64_t points;    /* points of the problem: its point names, or its parameters */
    bool by_parameter; /* no point names: every parameter is a point */
    double *x, *y;     /* points; NaN where not placed */
    uint8_t *fixed;    /* points */
    int32_t *number;   /* points: number on the plan, -1 */
    int32_t *pair;     /* m x 3: points that an observation touches, -1 */
} plan;

static void plan_clear(plan *p)
{
    lw_free(p->x);
    lw_free(p->y);
    lw_free(p->fixed);
    lw_free(p->number);
    lw_free(p->pair);
}

static lw_status plan_new(const lw_run *run, plan *p, lw_error *error)
{
    const lw_problem *problem = run->problem;
    p->by_parameter = true;
    for (int64_t j = 0; problem->point && j < problem->n; j++)
        if (problem->point[j] >= 0) p->by_parameter = false;
    p->points = p->by_parameter ? problem->n : lw_ids_count(problem->point_names);
    p->x = LW_NEW_ARRAY(double, p->points);
    p->y = LW_NEW_ARRAY(double, p->points);
    p->fixed = LW_NEW_ARRAY(uint8_t, p->points);
    p->number = LW_NEW_ARRAY(int32_t, p->points);
    p->pair = LW_NEW_ARRAY(int32_t, 3 * problem->m);
    if (p->x && p->y && p->fixed && p->number && p->pair) return LW_OK;
    return lw_fail_memory(error, "report", (size_t)(2 * p->points + problem->m) * sizeof(double));
}

static int64_t point_of(const lw_problem *problem, const plan *p, int64_t j)
{
    return p->by_parameter ? j : problem->point[j];
}

/* A point lies where its coordinates say, else where its adjusted east and north (x and y) are. */
static void place_points(const lw_run *run, plan *p)
{
    const lw_problem *problem = run->problem;
    for (int64_t i = 0; i < p->points; i++) {
        p->x[i] = p->y[i] = LW_UNKNOWN;
        p->fixed[i] = 1;
    }
    for (int64_t j = 0; j < problem->n; j++) {
        int64_t i = point_of(problem, p, j);
        if (i < 0) continue;
        if (!problem->fixed || !problem->fixed[j]) p->fixed[i] = 0;
        if (problem->coordinate[0] && problem->coordinate[1] && !isnan(problem->coordinate[0][j])) {
            p->x[i] = problem->coordinate[0][j];
            p->y[i] = problem->coordinate[1][j];
        }
    }
    for (int64_t j = 0; problem->axis && run->estimate && j < problem->n; j++) {
        int64_t i = point_of(problem, p, j);
        bool given = problem->coordinate[0] && problem->coordinate[1] && !isnan(problem->coordinate[0][j]);
        if (i < 0 || given) continue;
        if (problem->axis[j] == LW_AXIS_EAST || problem->axis[j] == LW_AXIS_X) p->x[i] = run->estimate->x[j];
        if (problem->axis[j] == LW_AXIS_NORTH || problem->axis[j] == LW_AXIS_Y) p->y[i] = run->estimate->x[j];
    }
    for (int64_t i = 0; i < p->points; i++)
        p->number[i] = isfinite(p->x[i]) && isfinite(p->y[i]) ? (int32_t)p->count++ : -1;
}

/* The first three different placed points of every observation, in one pass over the design. */
static int64_t join_points(const lw_problem *problem, plan *p)
{
    int64_t joins = 0;
    memset(p->pair, 0xff, 3 * (size_t)problem->m * sizeof(int32_t));
    for (int64_t j = 0; j < problem->n; j++) {
        int64_t i = point_of(problem, p, j);
        if (i < 0 || p->number[i] < 0) continue;
        for (int64_t k = problem->design->start[j]; k < problem->design->start[j + 1]; k++) {
            int32_t *pair = p->pair + 3 * (int64_t)problem->design->index[k], number = p->number[i];
            for (int s = 0; s < 3; s++) {
                if (pair[s] == number) break;
                if (pair[s] >= 0) continue;
                pair[s] = number;
                joins += s; /* a second point: one line; a third: two more */
                break;
            }
        }
    }
    return joins;
}

static lw_status put_joins(lw_json *json, const lw_run *run, const plan *p, int64_t joins, lw_error *error)
{
    int32_t *line = LW_NEW_ARRAY(int32_t, 3 * joins);
    if (line == NULL) return lw_fail_memory(error, "report", (size_t)joins * 12);
    int32_t *a = line, *b = line + joins, *row = line + 2 * joins;
    int64_t count = 0;
    for (int64_t i = 0; i < run->problem->m; i++)
        for (int s = 1; s < 3; s++)
            for (int t = 0; t < s && p->pair[3 * i + s] >= 0; t++) {
                a[count] = p->pair[3 * i + t];
                b[count] = p->pair[3 * i + s];
                row[count++] = (int32_t)i;
            }
    lw_json_object(json, "joins");
    lw_status status = lw_pack_integers(json, "a", count, a, error);
    if (status == LW_OK) status = lw_pack_integers(json, "b", count, b, error);
    if (status == LW_OK) status = lw_pack_integers(json, "observation", count, row, error);
    lw_json_close(json);
    lw_free(line);
    return status;
}

/* The one parameter that each point on the plan has (a height, say); -1 where it has several. */
static lw_status put_parameters(lw_json *json, const lw_problem *problem, const plan *p, lw_error *error)
{
    int32_t *parameter = LW_NEW_ARRAY(int32_t, p->count);
    if (parameter == NULL) return lw_fail_memory(error, "report", (size_t)p->count * sizeof(int32_t));
    for (int64_t i = 0; i < p->count; i++) parameter[i] = INT32_MIN;
    for (int64_t j = 0; j < problem->n; j++) {
        int64_t i = point_of(problem, p, j);
        if (i < 0 || p->number[i] < 0) continue;
        int32_t *its = &parameter[p->number[i]];
        *its = *its == INT32_MIN ? (int32_t)j : -1;
    }
    lw_status status = lw_pack_integers(json, "parameter", p->count, parameter, error);
    lw_free(parameter);
    return status;
}

static lw_status put_points(lw_json *json, const lw_run *run, plan *p, lw_error *error)
{
    const lw_problem *problem = run->problem;
    lw_json_array(json, "name");
    for (int64_t i = 0; i < p->points; i++)
        if (p->number[i] >= 0)
            lw_json_text_value(json, NULL,
                               lw_ids_name(p->by_parameter ? problem->parameters : problem->point_names, i));
    lw_json_close(json);
    int64_t count = 0;
    for (int64_t i = 0; i < p->points; i++) {
        if (p->number[i] < 0) continue;
        p->x[count] = p->x[i];
        p->y[count] = p->y[i];
        p->fixed[count++] = p->fixed[i];
    }
    lw_status status = put_parameters(json, problem, p, error);
    if (status == LW_OK) status = lw_pack_numbers(json, "x", count, p->x, error);
    if (status == LW_OK) status = lw_pack_numbers(json, "y", count, p->y, error);
    if (status == LW_OK) status = lw_pack_bytes(json, "fixed", count, p->fixed, error);
    return status;
}

static lw_status put_plan(lw_json *json, const lw_run *run, plan *p, lw_error *error)
{
    lw_status status = plan_new(run, p, error);
    if (status != LW_OK) return status;
    place_points(run, p);
    int64_t joins = join_points(run->problem, p);
    if (p->count < 2 || p->count > LW_REPORT_MOST_POINTS || joins > LW_REPORT_MOST_JOINS) {
        lw_json_null(json, "plan");
        lw_report_ellipses(json, run, NULL);
        return LW_OK;
    }
    bool compass = false;
    for (int64_t j = 0; run->problem->axis && j < run->problem->n; j++)
        compass = compass || run->problem->axis[j] == LW_AXIS_EAST;
    lw_json_object(json, "plan");
    lw_json_text_value(json, "x_name", compass ? "east" : "x");
    lw_json_text_value(json, "y_name", compass ? "north" : "y");
    lw_json_bool(json, "same_unit", !run->problem->coordinate[0]);
    status = put_points(json, run, p, error);
    if (status == LW_OK) status = put_joins(json, run, p, joins, error);
    lw_json_close(json);
    lw_report_ellipses(json, run, p->by_parameter ? NULL : p->number);
    return status;
}

lw_status lw_report_plan(lw_json *json, const lw_run *run, lw_picture picture, lw_error *error)
{
    if (picture != LW_PICTURE_NETWORK || run->estimate == NULL || run->estimate->rows > LW_REPORT_MOST_ROWS) {
        lw_json_null(json, "plan");
        lw_report_ellipses(json, run, NULL);
        return LW_OK;
    }
    plan p = {0};
    lw_status status = put_plan(json, run, &p, error);
    plan_clear(&p);
    return status;
}
