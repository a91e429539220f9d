/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/probe.h"

#include "core/chance.h"
#include "core/decimal.h"
#include "core/memory.h"
#include "matrix/vector.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define BLOCK 8 /* right-hand sides solved together */
enum { NOISE_STREAM = 0x70726f62, TRIAL_STREAM = 0x74726961 };

void lw_probe_free(lw_probe *probe)
{
    if (!probe) return;
    for (int k = 0; probe->pattern && k < probe->patterns; k++) {
        lw_free(probe->pattern[k].input);
        lw_free(probe->pattern[k].recovered);
        lw_free(probe->pattern[k].amplitude);
        lw_free(probe->pattern[k].correlation);
    }
    lw_free(probe->pattern);
    lw_free(probe->spread);
    lw_free(probe);
}

/* What all steps need: the operator of the whitened equations and room for blocks. */
typedef struct probing {
    lw_decomposition *decomposition;
    const lw_system *system;
    lw_operator *op;
    const lw_watch *watch;
    double lambda;
    int64_t rows;         /* of a right-hand side: equations and, damped, penalty */
    double *f, *z, *real; /* rows x BLOCK; columns x BLOCK; residuals of the real data (bootstrap) */
} probing;

static lw_status solve_block(probing *p, int count, lw_error *error)
{
    return p->decomposition->methods->solve_many(p->decomposition, p->lambda, count, p->f, NULL, NULL, NULL,
                                                 p->z, NULL, error);
}

static void draw_noise(const probing *p, lw_random *random, double *f)
{
    for (int64_t i = 0; i < p->system->rows; i++) {
        bool used = !p->system->row_factor || p->system->row_factor[i] != 0.0;
        f[i] += used ? lw_random_normal(random) : 0.0;
    }
}

/* +-1 by the parity of the places divided by the size. */
static double checker(const lw_probe_grid *grid, int64_t j, int64_t size)
{
    int64_t sum = 0;
    for (int d = 0; d < 3; d++) sum += grid->place[3 * j + d] / size;
    return sum % 2 ? -1.0 : 1.0;
}

/* One cell in each block of size cells along every axis: its middle one. */
static double spike(const lw_probe_grid *grid, int64_t j, int64_t size)
{
    for (int d = 0; d < 3; d++)
        if (grid->extent[d] > 1 && grid->place[3 * j + d] % size != size / 2) return 0.0;
    return 1.0;
}

static void fill_input(const lw_problem *problem, const lw_probe_plan *options, const lw_probe_grid *grid,
                       int64_t size, double amplitude, double *input)
{
    for (int64_t j = 0; j < problem->n; j++) {
        bool fixed = problem->fixed && problem->fixed[j];
        if (fixed)
            input[j] = 0.0;
        else if (options->kind == LW_PROBE_GIVEN)
            input[j] = options->given[j];
        else if (grid->place[3 * j] < 0)
            input[j] = 0.0;
        else
            input[j] = amplitude *
                       (options->kind == LW_PROBE_SPIKES ? spike(grid, j, size) : checker(grid, j, size));
    }
}

/* b = W A p in the whitened equations, p in z. */
static void put_through(probing *p, const double *input, double *f)
{
    const lw_system *system = p->system;
    for (int64_t k = 0; k < system->columns; k++) p->z[k] = input[system->parameter_of[k]] / system->scale[k];
    memset(f, 0, (size_t)p->rows * sizeof(double));
    lw_apply(p->op, 1, p->z, f);
}

static void take_model(const probing *p, const double *z, double *model, int64_t n)
{
    memset(model, 0, (size_t)n * sizeof(double));
    for (int64_t k = 0; k < p->system->columns; k++)
        model[p->system->parameter_of[k]] = z[k] * p->system->scale[k];
}

static lw_status make_pattern(probing *p, const lw_probe_plan *options, int which, lw_probe *probe,
                              lw_error *error)
{
    const lw_problem *problem = p->system->problem;
    lw_probe_pattern *pattern = &probe->pattern[which];
    lw_probe_grid grid = {.n = problem->n, .extent = {1, 1, 1}};
    lw_random *random = NULL;
    double size = options->kind == LW_PROBE_GIVEN ? LW_UNKNOWN : options->size[which];
    int64_t cells = options->kind == LW_PROBE_GIVEN || options->length ? 1 : llrint(fmax(1.0, size));
    lw_status status = LW_OK;
    pattern->size = size;
    if (options->kind == LW_PROBE_GIVEN)
        snprintf(pattern->name, sizeof pattern->name, "pattern as given");
    else
        snprintf(pattern->name, sizeof pattern->name, "%s %.6g%s",
                 options->kind == LW_PROBE_SPIKES ? "spikes every" : "checker of", size,
                 options->length ? ""
                 : size == 1.0   ? " cell"
                                 : " cells");
    pattern->input = LW_NEW_ARRAY(double, problem->n + 1);
    pattern->recovered = LW_NEW_ARRAY(double, problem->n + 1);
    pattern->amplitude = LW_NEW_ARRAY(double, problem->n + 1);
    pattern->correlation = LW_NEW_ARRAY(double, problem->n + 1);
    if (!pattern->input || !pattern->recovered || !pattern->amplitude || !pattern->correlation)
        return lw_fail_memory(error, "a pattern", (size_t)problem->n * 4 * sizeof(double));
    bool given = options->kind == LW_PROBE_GIVEN;
    if (!given || problem->coordinate[0] || problem->coordinate[1] || problem->coordinate[2])
        status = lw_probe_grid_make(problem, options->length && !given ? size : 0.0, &grid, error);
    if (status != LW_OK) return status;
    fill_input(problem, options, &grid, cells, probe->amplitude, pattern->input);
    put_through(p, pattern->input, p->f);
    if (probe->noisy) {
        status = lw_random_new(lw_watch_seed(p->watch), NOISE_STREAM + (uint64_t)which, &random, error);
        if (status == LW_OK) draw_noise(p, random, p->f);
    }
    if (status == LW_OK) status = solve_block(p, 1, error);
    if (status >= 0) {
        take_model(p, p->z, pattern->recovered, problem->n);
        status = lw_probe_compare(&grid, given ? 2 : cells, pattern, error);
    }
    lw_random_free(random);
    lw_probe_grid_clear(&grid);
    return status;
}

/* Whitened residuals of the real data, centred and sorted into their groups: what the bootstrap draws from.
 */
typedef struct pool {
    int64_t *start, *row; /* groups + 1; rows by group */
    int groups;
    int32_t *group; /* of each row */
} pool;

static void pool_clear(pool *q)
{
    lw_free(q->start);
    lw_free(q->row);
    lw_free(q->group);
}

static lw_status pool_make(const probing *p, pool *out, lw_error *error)
{
    const lw_problem *problem = p->system->problem;
    int64_t rows = p->system->rows;
    int named = problem->group_names ? (int)lw_ids_count(problem->group_names) : 0;
    out->groups = named + 2; /* no group, weighted priors */
    out->start = LW_NEW_ZEROS(int64_t, out->groups + 2);
    out->row = LW_NEW_ARRAY(int64_t, rows + 1);
    out->group = LW_NEW_ARRAY(int32_t, rows + 1);
    if (!out->start || !out->row || !out->group) {
        pool_clear(out);
        return lw_fail_memory(error, "the bootstrap", (size_t)rows * 20);
    }
    for (int64_t i = 0; i < rows; i++) {
        bool used = !p->system->row_factor || p->system->row_factor[i] != 0.0;
        int32_t group = i >= problem->m                            ? named + 1
                        : problem->group && problem->group[i] >= 0 ? problem->group[i]
                                                                   : named;
        out->group[i] = used ? group : -1;
        if (used) out->start[group + 1]++;
    }
    for (int g = 0; g < out->groups; g++) out->start[g + 1] += out->start[g];
    int64_t *next = out->start; /* filled by counting back to front, so that start is right in the end */
    for (int64_t i = rows - 1; i >= 0; i--)
        if (out->group[i] >= 0) out->row[--next[out->group[i] + 1]] = i;
    memmove(next, next + 1, (size_t)out->groups * sizeof(int64_t));
    int64_t total = 0;
    for (int64_t i = 0; i < rows; i++) total += out->group[i] >= 0;
    next[out->groups] = total;
    return LW_OK;
}

static void draw_residuals(const probing *p, const pool *q, lw_random *random, double *f)
{
    for (int64_t i = 0; i < p->system->rows; i++) {
        if (q->group[i] < 0) continue;
        int64_t first = q->start[q->group[i]], count = q->start[q->group[i] + 1] - first;
        f[i] = p->real[q->row[first + (int64_t)lw_random_below(random, (uint64_t)count)]];
    }
}

static lw_status make_trials(probing *p, const lw_probe_plan *options, lw_probe *probe, lw_error *error)
{
    int64_t n = p->system->problem->n;
    lw_random *random = NULL;
    pool q = {0};
    probe->spread = LW_NEW_ZEROS(double, n + 1);
    if (!probe->spread) return lw_fail_memory(error, "noise trials", (size_t)n * sizeof(double));
    lw_status status = lw_random_new(lw_watch_seed(p->watch), TRIAL_STREAM, &random, error);
    if (status == LW_OK && options->bootstrap) status = pool_make(p, &q, error);
    for (int done = 0; done < options->trials && status >= 0; done += BLOCK) {
        int count = options->trials - done < BLOCK ? options->trials - done : BLOCK;
        lw_watch_tick(p->watch, "noise trials", done, options->trials, "");
        if (lw_watch_cancelled(p->watch)) status = LW_INTERRUPTED;
        if (status != LW_OK) break;
        memset(p->f, 0, (size_t)(p->rows * count) * sizeof(double));
        for (int c = 0; c < count; c++)
            if (options->bootstrap)
                draw_residuals(p, &q, random, p->f + c * p->rows);
            else
                draw_noise(p, random, p->f + c * p->rows);
        status = solve_block(p, count, error);
        for (int c = 0; c < count && status >= 0; c++)
            for (int64_t k = 0; k < p->system->columns; k++) {
                double r = p->z[c * p->system->columns + k] * p->system->scale[k];
                probe->spread[p->system->parameter_of[k]] += r * r;
            }
        probe->trials += count;
    }
    for (int64_t j = 0; j < n && probe->trials > 0; j++)
        probe->spread[j] = sqrt(probe->spread[j] / probe->trials);
    pool_clear(&q);
    lw_random_free(random);
    return status;
}

static int by_value(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Solves the real data: its rms correction (for an amplitude) and its whitened residuals (for the bootstrap).
 */
static lw_status solve_real(probing *p, double *rms, lw_error *error)
{
    const lw_system *system = p->system;
    memset(p->f, 0, (size_t)p->rows * sizeof(double));
    lw_copy(system->rows, system->b, p->f);
    lw_status status = solve_block(p, 1, error);
    if (status < 0) return status;
    double sum = 0.0;
    for (int64_t k = 0; k < system->columns; k++)
        sum += p->z[k] * system->scale[k] * p->z[k] * system->scale[k];
    *rms = sqrt(sum / (double)(system->columns > 0 ? system->columns : 1));
    p->real = LW_NEW_ARRAY(double, system->rows + 1);
    if (!p->real) return lw_fail_memory(error, "residuals", (size_t)system->rows * sizeof(double));
    lw_apply(p->op, 1, p->z, p->real);
    for (int64_t i = 0; i < system->rows; i++) p->real[i] = system->b[i] - p->real[i];
    return LW_OK;
}

/* 5 % of the median |x0|, or the rms of the real model where no x0 stands. */
static lw_status choose_amplitude(probing *p, const lw_probe_plan *options, double *amplitude,
                                  lw_error *error)
{
    const lw_problem *problem = p->system->problem;
    double rms = 0.0;
    *amplitude = options->amplitude;
    if (options->bootstrap || *amplitude <= 0.0) {
        lw_status status = solve_real(p, &rms, error);
        if (status < 0) return status;
    }
    if (*amplitude > 0.0) return LW_OK;
    double *sorted = LW_NEW_ZEROS(double, problem->n + 1);
    if (!sorted) return lw_fail_memory(error, "a pattern", (size_t)problem->n * sizeof(double));
    for (int64_t j = 0; j < problem->n && problem->prior; j++) sorted[j] = fabs(problem->prior[j]);
    qsort(sorted, (size_t)problem->n, sizeof(double), by_value);
    double median = sorted[problem->n / 2];
    lw_free(sorted);
    *amplitude = median > 0.0 ? 0.05 * median : rms > 0.0 ? rms : 1.0;
    return LW_OK;
}

lw_status lw_probe_make(lw_decomposition *decomposition, double lambda, const lw_probe_plan *options,
                        const lw_watch *watch, lw_probe **out, lw_error *error)
{
    *out = NULL;
    lw_system *system = decomposition->system;
    if (!decomposition->methods->solve_many)
        return lw_fail(error, LW_BAD_USAGE, "the %s engine cannot solve for several right-hand sides",
                       decomposition->methods->engine);
    probing p = {.decomposition = decomposition,
                 .system = system,
                 .watch = watch,
                 .lambda = lambda,
                 .rows = system->rows + (lambda > 0.0 ? system->penalty_rows : 0)};
    lw_probe *probe = LW_NEW(lw_probe);
    lw_product_options product = {.team = lw_watch_team(watch)};
    lw_status status = lw_system_operator(system, &product, watch, &p.op, error);
    p.f = LW_NEW_ZEROS(double, p.rows *BLOCK + 1);
    p.z = LW_NEW_ZEROS(double, system->columns *BLOCK + 1);
    if (status == LW_OK && (!probe || !p.f || !p.z))
        status =
            lw_fail_memory(error, "the probe", (size_t)(p.rows + system->columns) * BLOCK * sizeof(double));
    if (status == LW_OK) {
        probe->parameters = system->problem->n;
        probe->noisy = system->problem->sigma != NULL;
        probe->bootstrap = options->bootstrap;
        status = choose_amplitude(&p, options, &probe->amplitude, error);
    }
    if (status == LW_OK) {
        probe->patterns = options->kind == LW_PROBE_GIVEN ? 1 : options->sizes;
        probe->pattern = LW_NEW_ZEROS(lw_probe_pattern, probe->patterns + 1);
        if (!probe->pattern) status = lw_fail_memory(error, "the patterns", sizeof(lw_probe_pattern));
    }
    for (int k = 0; status == LW_OK && k < probe->patterns; k++) {
        lw_watch_tick(watch, "patterns", k, probe->patterns, "");
        status = make_pattern(&p, options, k, probe, error);
    }
    if (status == LW_OK && options->trials > 0) status = make_trials(&p, options, probe, error);
    lw_operator_free(p.op);
    lw_free(p.f);
    lw_free(p.z);
    lw_free(p.real);
    if (status < 0)
        lw_probe_free(probe);
    else
        *out = probe;
    return status;
}
