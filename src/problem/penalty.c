/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/penalty.h"

#include "core/memory.h"
#include "problem/penalty_part.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

const char *lw_penalty_name(lw_penalty_kind kind)
{
    static const char *const name[] = {"smallest", "flattest", "smoothest", "own"};
    return (unsigned)kind < sizeof name / sizeof *name ? name[kind] : "";
}

static lw_status make_room(lw_penalty_rows *rows, int64_t more, lw_error *error)
{
    if (rows->count + more <= rows->room) return LW_OK;
    int64_t room = rows->room + rows->room / 2 + more + 1024;
    int32_t *row = lw_resize(rows->row, (size_t)room, sizeof *row);
    if (row != NULL) rows->row = row;
    int32_t *column = lw_resize(rows->column, (size_t)room, sizeof *column);
    if (column != NULL) rows->column = column;
    double *value = lw_resize(rows->value, (size_t)room, sizeof *value);
    if (value != NULL) rows->value = value;
    if (row == NULL || column == NULL || value == NULL)
        return lw_fail_memory(error, "penalty", (size_t)lw_bytes(room, 16));
    rows->room = room;
    return LW_OK;
}

lw_status lw_penalty_add(lw_penalty_rows *rows, int count, const int64_t *parameter, const double *value,
                         lw_error *error)
{
    lw_status status = make_room(rows, count, error);
    if (status != LW_OK) return status;
    if (rows->rows == INT32_MAX)
        return lw_fail(error, LW_NO_MEMORY, "the penalty has more rows than %d", INT32_MAX);
    for (int k = 0; k < count; k++) {
        rows->row[rows->count] = (int32_t)rows->rows;
        rows->column[rows->count] = (int32_t)parameter[k];
        rows->value[rows->count++] = value[k];
    }
    rows->rows++;
    return LW_OK;
}

void lw_penalty_balance(int count, double *value)
{
    double all = 0.0, sum = 0.0;
    for (int k = 1; k < count; k++) all += fabs(value[k]);
    if (!(all > 0.0)) {
        value[0] = 0.0;
        return;
    }
    double bit = ldexp(1.0, ilogb(all) - 51);
    for (int k = 1; k < count; k++) sum += value[k] = bit * rint(value[k] / bit);
    value[0] = -sum;
}

static double weight_of(const lw_problem *problem, int64_t j)
{
    return problem->damp_weight == NULL ? 1.0 : problem->damp_weight[j];
}

static lw_status add_smallest(const lw_problem *problem, double share, lw_penalty_rows *rows, lw_error *error)
{
    lw_status status = LW_OK;
    for (int64_t j = 0; status == LW_OK && j < problem->n; j++) {
        double value = share * weight_of(problem, j);
        if (value > 0.0) status = lw_penalty_add(rows, 1, &j, &value, error);
    }
    return status;
}

static lw_status add_own(const lw_problem *problem, lw_penalty_rows *rows, lw_error *error)
{
    const lw_sparse *L = problem->penalty;
    if (L == NULL)
        return lw_fail(error, LW_BAD_USAGE,
                       "--prefer own needs penalty.csv (row,parameter,coefficient), which the problem lacks");
    lw_status status = make_room(rows, lw_sparse_nonzeros(L), error);
    for (int64_t j = 0; status == LW_OK && j < L->columns; j++)
        for (int64_t p = L->start[j]; p < L->start[j + 1]; p++) {
            rows->row[rows->count] = L->index[p];
            rows->column[rows->count] = (int32_t)j;
            rows->value[rows->count++] = L->value[p];
        }
    rows->rows = L->rows;
    return status;
}

/* Who takes part: parameter numbers sorted by region, region r of them from[r] .. from[r+1]-1 (0 is the blank
 * region). */
typedef struct part {
    int64_t count, regions;
    int64_t *parameter, *from;
    double *place[3];
    lw_penalty_axis axis[3];
} part;

static void part_clear(part *all)
{
    lw_free(all->parameter);
    lw_free(all->from);
    for (int a = 0; a < 3; a++) {
        lw_free(all->place[a]);
        lw_free(all->axis[a].value);
    }
}

static bool takes_part(const lw_problem *problem, const bool present[3], int64_t j)
{
    if (!(weight_of(problem, j) > 0.0)) return false;
    for (int a = 0; a < 3; a++)
        if (present[a] && isnan(problem->coordinate[a][j])) return false;
    return true;
}

static int64_t region_of(const lw_problem *problem, int64_t j)
{
    return problem->region == NULL ? 0 : problem->region[j] + 1;
}

static lw_status part_make(const lw_problem *problem, part *all, lw_error *error)
{
    bool present[3] = {false, false, false};
    *all = (part){.regions = 1};
    for (int a = 0; a < 3; a++)
        for (int64_t j = 0; problem->coordinate[a] != NULL && j < problem->n && !present[a]; j++)
            present[a] = !isnan(problem->coordinate[a][j]);
    for (int64_t j = 0; j < problem->n; j++) {
        all->count += takes_part(problem, present, j);
        if (region_of(problem, j) >= all->regions) all->regions = region_of(problem, j) + 1;
    }
    all->parameter = LW_NEW_ARRAY(int64_t, all->count);
    all->from = LW_NEW_ZEROS(int64_t, all->regions + 1);
    if (all->parameter == NULL || all->from == NULL)
        return lw_fail_memory(error, "penalty", (size_t)all->count * 8);
    for (int64_t j = 0; j < problem->n; j++)
        if (takes_part(problem, present, j)) all->from[region_of(problem, j) + 1]++;
    for (int64_t r = 0; r < all->regions; r++) all->from[r + 1] += all->from[r];
    for (int64_t j = 0; j < problem->n; j++)
        if (takes_part(problem, present, j)) all->parameter[all->from[region_of(problem, j)]++] = j;
    memmove(all->from + 1, all->from, (size_t)all->regions * sizeof *all->from);
    all->from[0] = 0;
    for (int a = 0; a < 3; a++) {
        if (!present[a]) continue;
        all->place[a] = LW_NEW_ARRAY(double, all->count);
        if (all->place[a] == NULL) return lw_fail_memory(error, "penalty", (size_t)all->count * 8);
        for (int64_t k = 0; k < all->count; k++) all->place[a][k] = problem->coordinate[a][all->parameter[k]];
        lw_status status = lw_penalty_axis_make(all->count, all->place[a], &all->axis[a], error);
        if (status != LW_OK) return status;
    }
    return LW_OK;
}

/* A grid on the axes of all, or on its own, or scattered. */
static lw_status add_region(const lw_problem *problem, const part *all, const lw_penalty_points *points,
                            lw_team *team, lw_penalty_rows *rows, lw_error *error)
{
    int grid = 0;
    lw_penalty_axis own[3] = {{0, NULL}, {0, NULL}, {0, NULL}};
    lw_status status = lw_penalty_grid(points, all->axis, rows, &grid, error);
    if (status != LW_OK || grid) return status;
    for (int a = 0; status == LW_OK && a < 3; a++)
        if (points->place[a] != NULL)
            status = lw_penalty_axis_make(points->count, points->place[a], &own[a], error);
    if (status == LW_OK) status = lw_penalty_grid(points, own, rows, &grid, error);
    if (status == LW_OK && !grid) status = lw_penalty_scatter(points, problem->parameters, team, rows, error);
    for (int a = 0; a < 3; a++) lw_free(own[a].value);
    return status;
}

static lw_status add_differences(const lw_problem *problem, const lw_penalty_options *options, lw_team *team,
                                 lw_penalty_rows *rows, lw_error *error)
{
    part all;
    lw_status status = part_make(problem, &all, error);
    if (status == LW_OK && all.place[0] == NULL && all.place[1] == NULL && all.place[2] == NULL)
        status =
            lw_fail(error, LW_BAD_USAGE, "--prefer %s needs coordinates: columns x, y or z of parameters.csv",
                    lw_penalty_name(options->prefer));
    for (int64_t r = 0; status == LW_OK && r < all.regions; r++) {
        lw_penalty_points points = {.count = all.from[r + 1] - all.from[r],
                                    .parameter = all.parameter + all.from[r],
                                    .prefer = options->prefer};
        for (int a = 0; a < 3; a++) {
            points.place[a] = all.place[a] == NULL ? NULL : all.place[a] + all.from[r];
            points.stretch[a] = options->stretch[a] > 0.0 ? options->stretch[a] : 1.0;
        }
        if (points.count > 1) status = add_region(problem, &all, &points, team, rows, error);
    }
    part_clear(&all);
    if (status == LW_OK && rows->rows == 0)
        status = lw_fail(error, LW_BAD_USAGE, "--prefer %s finds no neighbouring parameters to compare",
                         lw_penalty_name(options->prefer));
    return status;
}

lw_status lw_penalty_make(const lw_problem *problem, const lw_penalty_options *options, const lw_watch *watch,
                          lw_sparse **out, lw_error *error)
{
    *out = NULL;
    lw_penalty_rows rows = {0};
    lw_status status = LW_OK;
    int64_t repeated = 0;
    lw_watch_tick(watch, "forming the penalty", 0.0, 0.0, "");
    if (options->prefer == LW_PREFER_OWN) status = add_own(problem, &rows, error);
    if (options->prefer == LW_PREFER_FLATTEST || options->prefer == LW_PREFER_SMOOTHEST)
        status = add_differences(problem, options, lw_watch_team(watch), &rows, error);
    if (status == LW_OK && options->prefer != LW_PREFER_SMALLEST && options->also_smallest > 0.0)
        status = add_smallest(problem, options->also_smallest, &rows, error);
    if (status == LW_OK && options->prefer == LW_PREFER_SMALLEST)
        for (int64_t j = 0; status == LW_OK && j < problem->n; j++) {
            double value = weight_of(problem, j);
            status = lw_penalty_add(&rows, value > 0.0, &j, &value, error);
        }
    if (status == LW_OK)
        status = lw_sparse_from_triplets(rows.rows, problem->n, rows.count, rows.row, rows.column, rows.value,
                                         NULL, 0, out, &repeated, error);
    lw_free(rows.row);
    lw_free(rows.column);
    lw_free(rows.value);
    return status;
}
