/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/probe.h"

#include "core/decimal.h"
#include "core/memory.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static int by_value(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Places by rank of the distinct coordinates (to 1e-9 of their range). */
static lw_status place_by_rank(const double *at, lw_probe_grid *grid, int d, lw_error *error)
{
    double *sorted = LW_NEW_ARRAY(double, grid->n + 1);
    if (!sorted) return lw_fail_memory(error, "the pattern", (size_t)grid->n * sizeof(double));
    int64_t count = 0, distinct = 0;
    for (int64_t j = 0; j < grid->n; j++)
        if (grid->place[3 * j] >= 0) sorted[count++] = at[j];
    qsort(sorted, (size_t)count, sizeof(double), by_value);
    double same = count ? 1e-9 * (sorted[count - 1] - sorted[0]) : 0.0;
    for (int64_t k = 0; k < count; k++)
        if (distinct == 0 || sorted[k] > sorted[distinct - 1] + same) sorted[distinct++] = sorted[k];
    for (int64_t j = 0; j < grid->n; j++) {
        if (grid->place[3 * j] < 0) continue;
        int64_t low = 0, high = distinct - 1;
        while (low < high) {
            int64_t middle = (low + high + 1) / 2;
            if (sorted[middle] <= at[j] + same)
                low = middle;
            else
                high = middle - 1;
        }
        grid->place[3 * j + d] = (int32_t)low;
    }
    grid->extent[d] = distinct > 0 ? distinct : 1;
    lw_free(sorted);
    return LW_OK;
}

static void place_by_step(const double *at, double step, lw_probe_grid *grid, int d)
{
    double least = HUGE_VAL;
    int64_t most = 0;
    for (int64_t j = 0; j < grid->n; j++)
        if (grid->place[3 * j] >= 0) least = fmin(least, at[j]);
    for (int64_t j = 0; j < grid->n; j++) {
        if (grid->place[3 * j] < 0) continue;
        double k = fmin(floor((at[j] - least) / step), 1e9);
        grid->place[3 * j + d] = (int32_t)k;
        if ((int64_t)k > most) most = (int64_t)k;
    }
    grid->extent[d] = most + 1;
}

lw_status lw_probe_grid_make(const lw_problem *problem, double step, lw_probe_grid *out, lw_error *error)
{
    memset(out, 0, sizeof *out);
    out->n = problem->n;
    for (int d = 0; d < 3; d++) {
        out->extent[d] = 1;
        out->axes += problem->coordinate[d] != NULL;
    }
    if (out->axes == 0)
        return lw_fail(
            error, LW_BAD_USAGE,
            "the pattern needs coordinates: parameters.csv has no column x, y or z; give a pattern file");
    out->place = LW_NEW_ZEROS(int32_t, 3 * problem->n + 1);
    if (!out->place) return lw_fail_memory(error, "the pattern", (size_t)problem->n * 12);
    for (int64_t j = 0; j < problem->n; j++)
        for (int d = 0; d < 3; d++)
            if (problem->coordinate[d] && isnan(problem->coordinate[d][j])) out->place[3 * j] = -1;
    lw_status status = LW_OK;
    for (int d = 0; d < 3 && status == LW_OK; d++) {
        if (!problem->coordinate[d]) continue;
        if (step > 0.0)
            place_by_step(problem->coordinate[d], step, out, d);
        else
            status = place_by_rank(problem->coordinate[d], out, d, error);
    }
    if (status != LW_OK) lw_probe_grid_clear(out);
    return status;
}

void lw_probe_grid_clear(lw_probe_grid *grid)
{
    lw_free(grid->place);
    memset(grid, 0, sizeof *grid);
}

/* Sums of a box: count, p, r, pp, rr, pr. */
#define SUMS 6

typedef struct table {
    const lw_probe_grid *grid;
    double *sum; /* (extent + 1)^3 places x SUMS, prefix sums */
    int64_t stride[3];
} table;

static int64_t at(const table *t, int64_t i, int64_t j, int64_t k)
{
    return SUMS * (i * t->stride[0] + j * t->stride[1] + k * t->stride[2]);
}

/* S(i,j,k) = sum over places below i, j, k: one running sum along each axis. */
static void accumulate(table *t)
{
    const int64_t *e = t->grid->extent;
    for (int d = 0; d < 3; d++)
        for (int64_t i = d == 0; i <= e[0]; i++)
            for (int64_t j = d == 1; j <= e[1]; j++)
                for (int64_t k = d == 2; k <= e[2]; k++)
                    for (int s = 0; s < SUMS; s++)
                        t->sum[at(t, i, j, k) + s] +=
                            t->sum[at(t, i - (d == 0), j - (d == 1), k - (d == 2)) + s];
}

static void box_sums(const table *t, const int32_t *place, int64_t reach, double *out)
{
    int64_t low[3], high[3];
    for (int d = 0; d < 3; d++) {
        low[d] = place[d] > reach ? place[d] - reach : 0;
        high[d] = place[d] + reach + 1 < t->grid->extent[d] ? place[d] + reach + 1 : t->grid->extent[d];
    }
    for (int s = 0; s < SUMS; s++) {
        out[s] = 0.0;
        for (int corner = 0; corner < 8; corner++) {
            int64_t i = corner & 1 ? low[0] : high[0], j = corner & 2 ? low[1] : high[1],
                    k = corner & 4 ? low[2] : high[2];
            double value = t->sum[at(t, i, j, k) + s];
            out[s] += __builtin_popcount((unsigned)corner) % 2 ? -value : value;
        }
    }
}

static double amplitude_of(const double *s)
{
    return s[3] > 0.0 ? s[5] / s[3] : LW_UNKNOWN;
}

static double correlation_of(const double *s)
{
    double pp = s[3] - s[1] * s[1] / s[0], rr = s[4] - s[2] * s[2] / s[0], pr = s[5] - s[1] * s[2] / s[0];
    if (!(s[0] > 1.0 && pp > 1e-12 * s[3] && rr > 1e-12 * s[4])) return LW_UNKNOWN;
    return fmax(-1.0, fmin(1.0, pr / sqrt(pp * rr)));
}

static void add_terms(double p, double r, double *sum)
{
    sum[0] += 1.0;
    sum[1] += p;
    sum[2] += r;
    sum[3] += p * p;
    sum[4] += r * r;
    sum[5] += p * r;
}

lw_status lw_probe_compare(const lw_probe_grid *grid, int64_t reach, lw_probe_pattern *pattern,
                           lw_error *error)
{
    double all[SUMS] = {0};
    const int64_t *e = grid->extent;
    int64_t places = lw_bytes(lw_bytes(e[0] + 1, e[1] + 1), e[2] + 1);
    table t = {.grid = grid, .stride = {(e[1] + 1) * (e[2] + 1), e[2] + 1, 1}};
    bool local =
        grid->place && places <= 64 * grid->n + 4096; /* a sparse box of places is compared as a whole */
    if (local && !(t.sum = LW_NEW_ZEROS(double, SUMS *places)))
        return lw_fail_memory(error, "the comparison of the pattern", (size_t)places * SUMS * sizeof(double));
    for (int64_t j = 0; j < grid->n; j++) {
        add_terms(pattern->input[j], pattern->recovered[j], all);
        const int32_t *place = grid->place ? grid->place + 3 * j : NULL;
        if (local && place[0] >= 0)
            add_terms(pattern->input[j], pattern->recovered[j],
                      t.sum + at(&t, place[0] + 1, place[1] + 1, place[2] + 1));
    }
    pattern->overall_amplitude = amplitude_of(all);
    pattern->overall_correlation = correlation_of(all);
    if (local) accumulate(&t);
    for (int64_t j = 0; j < grid->n; j++) {
        double s[SUMS];
        bool here = local && grid->place[3 * j] >= 0;
        if (here) box_sums(&t, grid->place + 3 * j, reach, s);
        pattern->amplitude[j] = here ? amplitude_of(s) : LW_UNKNOWN;
        pattern->correlation[j] = here ? correlation_of(s) : LW_UNKNOWN;
    }
    lw_free(t.sum);
    return LW_OK;
}
