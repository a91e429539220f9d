/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/vtk.h"

#include "core/decimal.h"
#include "core/memory.h"

#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* Sorted distinct coordinates of one axis. */
typedef struct axis {
    double *at;
    int64_t count;
} axis;

typedef struct layout {
    axis axes[3];
    int64_t *member, members; /* parameters with coordinates */
    int64_t *cell;            /* cells of the full grid -> parameter, or NULL: points */
} layout;

static double coordinate(const lw_problem *problem, int d, int64_t j)
{
    return problem->coordinate[d] && !isnan(problem->coordinate[d][j]) ? problem->coordinate[d][j] : 0.0;
}

static int by_value(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static lw_status make_axis(const lw_problem *problem, const layout *where, int d, axis *out, lw_error *error)
{
    out->at = LW_NEW_ARRAY(double, where->members);
    if (!out->at) return lw_fail_memory(error, "model.vtk", (size_t)where->members * sizeof(double));
    for (int64_t k = 0; k < where->members; k++) out->at[k] = coordinate(problem, d, where->member[k]);
    qsort(out->at, (size_t)where->members, sizeof(double), by_value);
    int64_t count = 0;
    for (int64_t k = 0; k < where->members; k++)
        if (count == 0 || out->at[k] != out->at[count - 1]) out->at[count++] = out->at[k];
    out->count = count;
    return LW_OK;
}

static int64_t place(const axis *a, double value)
{
    const double *found = bsearch(&value, a->at, (size_t)a->count, sizeof(double), by_value);
    return found - a->at;
}

/* The full grid, when every place of it is taken by just one parameter. */
static lw_status fill_grid(const lw_problem *problem, layout *where, lw_error *error)
{
    const axis *a = where->axes;
    if (a[0].count > where->members || a[0].count * a[1].count > where->members ||
        a[0].count * a[1].count * a[2].count != where->members)
        return LW_OK;
    where->cell = LW_NEW_ARRAY(int64_t, where->members);
    if (!where->cell) return lw_fail_memory(error, "model.vtk", (size_t)where->members * sizeof(int64_t));
    for (int64_t k = 0; k < where->members; k++) where->cell[k] = -1;
    for (int64_t k = 0; k < where->members; k++) {
        int64_t j = where->member[k], at[3];
        for (int d = 0; d < 3; d++) at[d] = place(&a[d], coordinate(problem, d, j));
        int64_t *cell = &where->cell[at[0] + a[0].count * (at[1] + a[1].count * at[2])];
        if (*cell >= 0) { /* two parameters at one place: points it is */
            lw_free(where->cell);
            where->cell = NULL;
            return LW_OK;
        }
        *cell = j;
    }
    return LW_OK;
}

/* Cell faces lie halfway between centres; the outer ones as far out as the nearest face is in. */
static void write_faces(FILE *file, const char *name, const axis *a)
{
    fprintf(file, "%s_COORDINATES %lld double\n", name, (long long)a->count + 1);
    for (int64_t k = 0; k <= a->count; k++) {
        double face;
        if (a->count == 1)
            face = a->at[0] + (k ? 0.5 : -0.5);
        else if (k == 0)
            face = 1.5 * a->at[0] - 0.5 * a->at[1];
        else if (k == a->count)
            face = 1.5 * a->at[k - 1] - 0.5 * a->at[k - 2];
        else
            face = 0.5 * (a->at[k - 1] + a->at[k]);
        fprintf(file, "%.17g\n", face);
    }
}

static void write_field(FILE *file, const layout *where, const char *name, const double *value,
                        const int64_t *whole)
{
    if (!value && !whole) return;
    fprintf(file, "SCALARS %s double 1\nLOOKUP_TABLE default\n", name);
    for (int64_t k = 0; k < where->members; k++) {
        int64_t j = where->cell ? where->cell[k] : where->member[k];
        double v = value ? value[j] : (double)whole[j];
        if (isnan(v))
            fputs("nan\n", file);
        else
            fprintf(file, "%.17g\n", v);
    }
}

static void write_geometry(FILE *file, const lw_problem *problem, const layout *where)
{
    if (where->cell) {
        fprintf(file, "DATASET RECTILINEAR_GRID\nDIMENSIONS %lld %lld %lld\n",
                (long long)where->axes[0].count + 1, (long long)where->axes[1].count + 1,
                (long long)where->axes[2].count + 1);
        write_faces(file, "X", &where->axes[0]);
        write_faces(file, "Y", &where->axes[1]);
        write_faces(file, "Z", &where->axes[2]);
        fprintf(file, "CELL_DATA %lld\n", (long long)where->members);
        return;
    }
    fprintf(file, "DATASET POLYDATA\nPOINTS %lld double\n", (long long)where->members);
    for (int64_t k = 0; k < where->members; k++)
        fprintf(file, "%.17g %.17g %.17g\n", coordinate(problem, 0, where->member[k]),
                coordinate(problem, 1, where->member[k]), coordinate(problem, 2, where->member[k]));
    fprintf(file, "POINT_DATA %lld\n", (long long)where->members);
}

static lw_status find_members(const lw_problem *problem, layout *where, lw_error *error)
{
    where->member = LW_NEW_ARRAY(int64_t, problem->n + 1);
    if (!where->member) return lw_fail_memory(error, "model.vtk", (size_t)problem->n * sizeof(int64_t));
    for (int64_t j = 0; j < problem->n; j++) {
        bool known = false;
        for (int d = 0; d < 3; d++) known |= problem->coordinate[d] && !isnan(problem->coordinate[d][j]);
        if (known) where->member[where->members++] = j;
    }
    if (where->members == 0)
        return lw_fail(error, LW_BAD_USAGE,
                       "--vtk: no parameter has coordinates x, y or z in parameters.csv");
    return LW_OK;
}

lw_status lw_write_vtk(const lw_run *run, const char *path, lw_error *error)
{
    layout where = {0};
    FILE *file = NULL;
    lw_status status = find_members(run->problem, &where, error);
    for (int d = 0; d < 3 && status == LW_OK; d++)
        status = make_axis(run->problem, &where, d, &where.axes[d], error);
    if (status == LW_OK) status = fill_grid(run->problem, &where, error);
    if (status == LW_OK && !(file = fopen(path, "w")))
        status = lw_fail(error, LW_SYSTEM, "%s: %s", path, strerror(errno));
    if (status == LW_OK) {
        fprintf(file, "# vtk DataFile Version 3.0\nleastwise model\nASCII\n");
        write_geometry(file, run->problem, &where);
        write_field(file, &where, "estimate", run->estimate->x, NULL);
        write_field(file, &where, "sigma", run->certainty ? run->certainty->sigma : NULL, NULL);
        write_field(file, &where, "resolution", run->certainty ? run->certainty->resolution : NULL, NULL);
        write_field(file, &where, "hits", NULL, run->check->hits);
        write_field(file, &where, "coverage", run->check->coverage, NULL);
        int failed = ferror(file);
        if (fclose(file) != 0 || failed) status = lw_fail(error, LW_SYSTEM, "%s: %s", path, strerror(errno));
    }
    for (int d = 0; d < 3; d++) lw_free(where.axes[d].at);
    lw_free(where.member);
    lw_free(where.cell);
    return status;
}
