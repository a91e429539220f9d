/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/variance_components.h"

#include "certainty/part.h"
#include "core/chance.h"
#include "core/memory.h"
#include "matrix/dense.h"

#include <math.h>
#include <string.h>

#define STREAM 74
#define PROBES 32
#define COLUMNS_A_SOLVE 32
#define CONVERGED 1e-9
#define DEFAULT_STEPS 50
#define LEAST_REDUNDANCY 1.0

/* The problem with its variances multiplied by theta of their groups: a shallow copy with its own sigmas. */
typedef struct scaled {
    lw_problem problem;
    lw_covariance covariance;
    double *sigma, *prior_sigma, *block;
} scaled;

static void scaled_clear(scaled *s)
{
    lw_free(s->sigma);
    lw_free(s->prior_sigma);
    lw_free(s->block);
}

static double factor_of(const lw_problem *problem, const double *theta, int64_t slots, int64_t i)
{
    return sqrt(theta[problem->group && problem->group[i] >= 0 ? problem->group[i] : slots - 2]);
}

/* Low parts are dropped: sigmas that are being estimated need no more than a double. */
static lw_status scale_problem(const lw_problem *problem, const double *theta, int64_t slots, scaled *out,
                               lw_error *error)
{
    const lw_covariance *c = problem->covariance;
    int64_t values = c ? c->value_start[c->blocks] : 0;
    *out = (scaled){.problem = *problem};
    out->sigma = LW_NEW_ARRAY(double, problem->m);
    out->prior_sigma = problem->prior_sigma ? LW_NEW_ARRAY(double, problem->n) : NULL;
    out->block = LW_NEW_ARRAY(double, values);
    if (!out->sigma || !out->block || (problem->prior_sigma && !out->prior_sigma))
        return lw_fail_memory(error, "scaled sigmas", (size_t)problem->m * 8);
    for (int64_t i = 0; i < problem->m; i++)
        out->sigma[i] = (problem->sigma ? problem->sigma[i] : 1) * factor_of(problem, theta, slots, i);
    for (int64_t j = 0; out->prior_sigma && j < problem->n; j++)
        out->prior_sigma[j] = problem->prior_sigma[j] * sqrt(theta[slots - 1]);
    for (int64_t k = 0; c && k < c->blocks; k++) {
        const int32_t *member = c->member + c->start[k];
        int64_t size = c->start[k + 1] - c->start[k];
        for (int64_t e = 0; e < size * size; e++)
            out->block[c->value_start[k] + e] = c->value[c->value_start[k] + e] *
                                                factor_of(problem, theta, slots, member[e % size]) *
                                                factor_of(problem, theta, slots, member[e / size]);
    }
    out->problem.sigma = out->sigma;
    out->problem.sigma_low = out->problem.prior_sigma_low = NULL;
    out->problem.prior_sigma = out->prior_sigma;
    if (c) {
        out->covariance = *c;
        out->covariance.value = out->block;
        out->covariance.low = NULL;
        out->problem.covariance = &out->covariance;
    }
    return LW_OK;
}

/* S_kl += scale * (square of the part of M f_b in group k), f_b supported on group l. */
static void add_squares(const lw_system *system, int64_t slots, const double *r, int64_t l, double scale,
                        double *S)
{
    for (int64_t i = 0; i < system->rows; i++) S[lw_group_slot(system, i) + l * slots] += scale * r[i] * r[i];
}

/* Helmert's S, from all unit vectors or from random signs on one group at a time. */
static lw_status helmert(lw_decomposition *decomposition, int64_t slots, const lw_watch *watch, double *S,
                         lw_error *error)
{
    const lw_system *system = decomposition->system;
    int64_t rows = system->rows, k = COLUMNS_A_SOLVE;
    bool exact = rows <= LW_COMPONENT_EXACT;
    int64_t trials = exact ? rows : slots * PROBES;
    lw_random *random = NULL;
    lw_status status = lw_random_new(lw_watch_seed(watch), STREAM, &random, error);
    double *f = LW_NEW_ARRAY(double, rows *k), *r = LW_NEW_ARRAY(double, rows *k);
    double *z = LW_NEW_ARRAY(double, system->columns *k);
    if (status == LW_OK && !(f && r && z))
        status = lw_fail_memory(error, "variance components", (size_t)(rows * k) * 16);
    memset(S, 0, (size_t)(slots * slots) * sizeof *S);
    for (int64_t from = 0; from < trials && status == LW_OK; from += k) {
        int64_t count = trials - from < k ? trials - from : k;
        memset(f, 0, (size_t)(rows * count) * sizeof *f);
        for (int64_t b = 0; b < count; b++) {
            if (exact) f[from + b + b * rows] = 1;
            for (int64_t i = 0; !exact && i < rows; i++)
                if (lw_group_slot(system, i) == (from + b) / PROBES) f[i + b * rows] = lw_random_sign(random);
        }
        status =
            decomposition->methods->solve_many(decomposition, 0, count, f, NULL, NULL, r, z, NULL, error);
        if (status > LW_OK && status != LW_INTERRUPTED) status = LW_OK;
        for (int64_t b = 0; b < count && status == LW_OK; b++) {
            bool aside = exact && system->row_factor && system->row_factor[from + b] == 0;
            int64_t l = exact ? lw_group_slot(system, from + b) : (from + b) / PROBES;
            if (!aside) add_squares(system, slots, r + b * rows, l, exact ? 1 : 1.0 / PROBES, S);
        }
    }
    lw_random_free(random);
    lw_free(f);
    lw_free(r);
    lw_free(z);
    return status;
}

/* Inverse of S on the groups that are determined; rows and columns of the others become those of the
 * identity. */
static lw_status invert_helmert(int64_t slots, const double *redundancy, double *S, lw_error *error)
{
    int64_t defect = 0;
    for (int64_t l = 0; l < slots; l++) {
        for (int64_t k = 0; k < l; k++)
            S[k + l * slots] = S[l + k * slots] = (S[k + l * slots] + S[l + k * slots]) / 2;
    }
    for (int64_t l = 0; l < slots; l++) {
        if (redundancy[l] >= LEAST_REDUNDANCY) continue;
        for (int64_t k = 0; k < slots; k++) S[k + l * slots] = S[l + k * slots] = k == l;
    }
    lw_status status = lw_dense_cholesky(slots, S, &defect, error);
    return status == LW_OK ? lw_dense_cholesky_invert(slots, S, error) : status;
}

typedef struct state {
    int64_t slots;
    double *theta, *q, *r, *S; /* slots; S slots x slots: its inverse; NULL S when it is singular */
    int64_t *observations;
    bool regular;
} state;

static void read_groups(const lw_certainty *certainty, state *s)
{
    memset(s->q, 0, (size_t)s->slots * sizeof *s->q);
    memset(s->r, 0, (size_t)s->slots * sizeof *s->r);
    memset(s->observations, 0, (size_t)s->slots * sizeof *s->observations);
    for (int g = 0; g < certainty->group_count; g++) {
        int32_t group = certainty->groups[g].group;
        int64_t slot = group >= 0 ? group : s->slots + (group == -1 ? -1 : -2);
        s->q[slot] = certainty->groups[g].chi_square;
        s->r[slot] = certainty->groups[g].redundancy;
        s->observations[slot] = certainty->groups[g].observations;
    }
}

/* One solution at theta: q, r and the inverse of S. */
static lw_status evaluate(const lw_problem *problem, const lw_system_options *system_options,
                          const lw_solve_options *solve_options, const lw_watch *watch, state *s,
                          lw_error *error)
{
    scaled scaled_problem = {0};
    lw_system *system = NULL;
    lw_decomposition *decomposition = NULL;
    lw_estimate *estimate = NULL;
    lw_certainty *certainty = NULL;
    lw_engine_choice choice = {0};
    lw_certainty_options wanted = {.confidence = 0.95, .alpha = 0.001, .power = 0.8, .reliability = true};
    lw_status status = scale_problem(problem, s->theta, s->slots, &scaled_problem, error);
    if (status == LW_OK)
        status = lw_system_new(&scaled_problem.problem, system_options, watch, &system, error);
    if (status == LW_OK)
        status = lw_decompose(system, 0, solve_options, watch, &choice, &decomposition, error);
    if (status >= LW_OK) status = decomposition->methods->estimate(decomposition, 0, watch, &estimate, error);
    if (status >= LW_OK)
        status = lw_certainty_make(decomposition, estimate, &wanted, false, watch, &certainty, error);
    if (status >= LW_OK && !certainty->redundancy)
        status = lw_fail(error, LW_BAD_USAGE,
                         "variance components need redundancy numbers, which engine %s cannot give here; "
                         "use dense or cholesky",
                         decomposition->methods->engine);
    if (status >= LW_OK) read_groups(certainty, s);
    if (status >= LW_OK) status = helmert(decomposition, s->slots, watch, s->S, error);
    if (status >= LW_OK) {
        status = invert_helmert(s->slots, s->r, s->S, error);
        s->regular = status == LW_OK;
        if (status == LW_UNSOLVABLE) status = LW_OK;
    }
    lw_certainty_free(certainty);
    lw_estimate_free(estimate);
    lw_decomposition_free(decomposition);
    lw_system_free(system);
    scaled_clear(&scaled_problem);
    return status;
}

/* Multiplies theta by its next factors; returns the largest relative change. */
static double improve(state *s)
{
    double largest = 0;
    bool positive = s->regular;
    double *factor = s->theta + s->slots;
    for (int64_t k = 0; k < s->slots; k++) {
        factor[k] = 1;
        for (int64_t l = 0; l < s->slots && s->regular && s->r[k] >= LEAST_REDUNDANCY; l++)
            if (s->r[l] >= LEAST_REDUNDANCY) factor[k] += s->S[k + l * s->slots] * (s->q[l] - s->r[l]);
        if (factor[k] < 0.1) positive = false;
    }
    for (int64_t k = 0; k < s->slots; k++) {
        if (!(s->r[k] >= LEAST_REDUNDANCY) || !(s->q[k] > 0)) continue;
        if (!positive) factor[k] = s->q[k] / s->r[k];
        s->theta[k] *= factor[k];
        largest = fmax(largest, fabs(factor[k] - 1));
    }
    return largest;
}

static lw_status state_new(int64_t slots, state *s, lw_error *error)
{
    s->slots = slots;
    s->theta = LW_NEW_ARRAY(double, 2 * slots);
    s->q = LW_NEW_ARRAY(double, slots);
    s->r = LW_NEW_ARRAY(double, slots);
    s->S = LW_NEW_ARRAY(double, slots *slots);
    s->observations = LW_NEW_ARRAY(int64_t, slots);
    if (!s->theta || !s->q || !s->r || !s->S || !s->observations)
        return lw_fail_memory(error, "variance components", (size_t)(slots * slots) * 8);
    for (int64_t k = 0; k < slots; k++) s->theta[k] = 1;
    return LW_OK;
}

static lw_status conclude(const state *s, lw_variance_components *out, lw_error *error)
{
    out->groups = LW_NEW_ARRAY(lw_variance_component, s->slots);
    if (!out->groups)
        return lw_fail_memory(error, "variance components", (size_t)s->slots * sizeof *out->groups);
    for (int64_t k = 0; k < s->slots; k++) {
        if (s->observations[k] == 0) continue;
        bool known = s->r[k] >= LEAST_REDUNDANCY;
        int32_t group = k < s->slots - 2 ? (int32_t)k : (k == s->slots - 2 ? -2 : -1);
        lw_variance_component c = {.group = group, .observations = s->observations[k], .redundancy = s->r[k]};
        c.component = known ? s->theta[k] : (double)NAN;
        c.scale = sqrt(c.component);
        c.sigma = known && s->regular ? s->theta[k] * sqrt(2 * s->S[k + k * s->slots]) : (double)NAN;
        out->groups[out->count++] = c;
    }
    return LW_OK;
}

lw_status lw_variance_components_estimate(const lw_problem *problem, const lw_system_options *system_options,
                                          const lw_solve_options *solve_options, int most,
                                          const lw_watch *watch, lw_variance_components **out,
                                          lw_error *error)
{
    state s = {0};
    int64_t slots = (problem->group_names ? lw_ids_count(problem->group_names) : 0) + 2;
    lw_variance_components *c = *out = LW_NEW(lw_variance_components);
    lw_status status =
        c ? state_new(slots, &s, error) : lw_fail_memory(error, "variance components", sizeof *c);
    if (most <= 0) most = DEFAULT_STEPS;
    while (status == LW_OK && !c->converged && c->iterations < most) {
        lw_watch_tick(watch, "variance components", c->iterations, most, "");
        if (lw_watch_cancelled(watch))
            status = lw_fail(error, LW_INTERRUPTED, "interrupted during variance components");
        if (status == LW_OK) status = evaluate(problem, system_options, solve_options, watch, &s, error);
        if (status != LW_OK) break;
        c->iterations++;
        c->converged = improve(&s) <= CONVERGED;
    }
    if (status == LW_OK) status = conclude(&s, c, error);
    lw_free(s.theta);
    lw_free(s.q);
    lw_free(s.r);
    lw_free(s.S);
    lw_free(s.observations);
    if (status < LW_OK || status == LW_INTERRUPTED) {
        lw_variance_components_free(c);
        *out = NULL;
        return status;
    }
    return c->converged ? LW_OK : LW_NOT_CONVERGED;
}

void lw_variance_components_free(lw_variance_components *components)
{
    if (!components) return;
    lw_free(components->groups);
    lw_free(components);
}

void lw_variance_components_attach(const lw_variance_components *components, lw_certainty *certainty)
{
    for (int g = 0; g < certainty->group_count; g++) {
        for (int k = 0; k < components->count; k++) {
            if (components->groups[k].group != certainty->groups[g].group) continue;
            certainty->groups[g].component = components->groups[k].component;
            certainty->groups[g].component_sigma = components->groups[k].sigma;
        }
    }
}
