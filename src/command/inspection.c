/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/inspection.h"

#include <math.h>
#include <string.h>

#define MOST_NAMED 10

static void put_count(FILE *to, const char *label, int64_t count)
{
    fprintf(to, "  %-32s %lld\n", label, (long long)count);
}

static void put_range(FILE *to, const char *label, const lw_range *range, const char *unit)
{
    if (range->count == 0) return;
    fprintf(to, "  %-32s %.4g to %.4g, median %.4g%s%s\n", label, range->smallest, range->largest,
            range->median, unit && *unit ? " " : "", unit ? unit : "");
}

/* "label: 12: A, B, C and 9 more" of ids. */
static void put_named(FILE *to, const char *label, const lw_ids *ids, const int64_t *number, int64_t count)
{
    if (count == 0) return;
    fprintf(to, "! %s (%lld):", label, (long long)count);
    for (int64_t k = 0; k < count && k < MOST_NAMED; k++)
        fprintf(to, "%s %s", k ? "," : "", lw_ids_name(ids, number[k]));
    if (count > MOST_NAMED) fprintf(to, " and %lld more", (long long)(count - MOST_NAMED));
    fputc('\n', to);
}

static void put_pairs(FILE *to, const char *label, const lw_ids *ids, const int64_t *pair, int64_t count)
{
    if (count == 0) return;
    fprintf(to, "! %s (%lld):", label, (long long)count);
    for (int64_t k = 0; k < count && k < MOST_NAMED; k++)
        fprintf(to, "%s %s and %s", k ? ";" : "", lw_ids_name(ids, pair[2 * k]),
                lw_ids_name(ids, pair[2 * k + 1]));
    if (count > MOST_NAMED) fprintf(to, "; and %lld more", (long long)(count - MOST_NAMED));
    fputc('\n', to);
}

static void put_weakest(const lw_work *work, FILE *to)
{
    const lw_check *check = &work->check;
    if (check->weakest_count == 0) return;
    fprintf(to, "Weakest parameters (observations that touch them, sum of absolute coefficients):\n");
    for (int k = 0; k < check->weakest_count; k++) {
        int64_t j = check->weakest[k];
        fprintf(to, "  %-32s %lld, %.4g\n", lw_ids_name(work->problem->parameters, j),
                (long long)check->hits[j], check->coverage[j]);
    }
}

static void put_components(const lw_work *work, FILE *to)
{
    const lw_components *parts = &work->check.components;
    put_count(to, "connected components", parts->count);
    for (int64_t c = 0; c < parts->count && c < MOST_NAMED && parts->count > 1; c++) {
        int64_t first = 0;
        while (first < work->problem->n && parts->of_parameter[first] != c) first++;
        fprintf(to, "    component %lld: %lld parameters, %lld observations, with %s\n", (long long)c + 1,
                (long long)parts->parameters[c], (long long)parts->observations[c],
                first < work->problem->n ? lw_ids_name(work->problem->parameters, first) : "-");
    }
}

void lw_inspection_facts(const lw_work *work, FILE *to)
{
    const lw_check *check = &work->check;
    const lw_problem *problem = work->problem;
    fprintf(to, "Problem %s\n", work->arguments->problem);
    put_count(to, "observations", check->observations);
    put_count(to, "parameters", check->parameters);
    if (check->fixed) put_count(to, "of these held", check->fixed);
    if (check->weighted_priors) put_count(to, "weighted priors", check->weighted_priors);
    if (check->conditions) put_count(to, "exact conditions", check->conditions);
    put_count(to, "nonzeros", check->nonzeros);
    put_count(to, "degrees of freedom at full rank", check->degrees_of_freedom);
    put_components(work, to);
    if (check->hit_range.count)
        fprintf(to, "  %-32s %.0f to %.0f, median %.0f\n", "observations per parameter",
                check->hit_range.smallest, check->hit_range.largest, check->hit_range.median);
    put_range(to, "sizes of coefficients", &check->coefficient_range, "");
    put_range(to, "sigmas", &check->sigma_range, problem->value_unit);
    put_range(to, "sizes of values", &check->value_range, problem->value_unit);
    put_weakest(work, to);
    put_named(to, "Observations with no equation, or none with a free parameter", problem->observations,
              check->zero_rows, check->zero_row_count);
    put_named(to, "Parameters that no equation, prior or penalty reaches", problem->parameters,
              check->zero_columns, check->zero_column_count);
    put_named(to, "Parameters touched by one observation only", problem->parameters, check->single_hit,
              check->single_hit_count);
    put_pairs(to, "Observations with the same equation", problem->observations, check->duplicate_rows,
              check->duplicate_row_count);
    put_pairs(to, "Parameters with proportional columns, which no data can tell apart", problem->parameters,
              check->duplicate_columns, check->duplicate_column_count);
}

/* The parameters that move in null vector v: those with the largest entries, as model values. */
static void put_null_vector(const lw_work *work, const double *v, int64_t number, FILE *to)
{
    const lw_system *system = work->system;
    double top = 0.0;
    int64_t moving = 0, named = 0;
    for (int64_t k = 0; k < system->columns; k++) top = fmax(top, fabs(v[k] * system->scale[k]));
    for (int64_t k = 0; k < system->columns; k++) moving += fabs(v[k] * system->scale[k]) > 1e-6 * top;
    fprintf(to, "    defect %lld: %lld parameters move together:", (long long)number + 1, (long long)moving);
    for (int64_t k = 0; k < system->columns && named < MOST_NAMED; k++)
        if (fabs(v[k] * system->scale[k]) > 1e-6 * top)
            fprintf(to, "%s %s", named++ ? "," : "",
                    lw_ids_name(work->problem->parameters, system->parameter_of[k]));
    if (moving > MOST_NAMED) fprintf(to, " and %lld more", (long long)(moving - MOST_NAMED));
    fputc('\n', to);
}

static void put_rank(const lw_work *work, FILE *to)
{
    const lw_decomposition_methods *methods = work->decomposition->methods;
    const lw_null_space *space = methods->null_space ? methods->null_space(work->decomposition) : NULL;
    int64_t rank = methods->rank ? methods->rank(work->decomposition) : -1;
    double rcond = methods->rcond ? methods->rcond(work->decomposition) : (double)NAN;
    if (rank < 0)
        fprintf(to, "  %-32s not determined by an iterative engine\n", "rank");
    else {
        put_count(to, "rank", rank);
        put_count(to, "degrees of freedom", work->check.degrees_of_freedom + work->system->columns - rank);
    }
    if (space && space->defect > 0) {
        put_count(to, "datum defect", space->defect);
        for (int64_t k = 0; k < space->defect && k < MOST_NAMED; k++)
            put_null_vector(work, space->basis + k * space->columns, k, to);
        fprintf(to, "    To cure it: damp (--damping, sweep) what the data cannot see; of a network hold one "
                    "parameter a defect (`fixed`), "
                    "give `prior_sigma`, observe what is missing, or solve with --datum free.\n");
    } else if (rank >= 0) {
        put_count(to, "datum defect", 0);
    }
    if (!isnan(rcond))
        fprintf(to, "  %-32s about %.1e\n", "condition of scaled matrix",
                rcond > 0.0 ? 1.0 / rcond : HUGE_VAL);
}

lw_status lw_inspection_rank(lw_work *work, FILE *to, lw_error *error)
{
    lw_status status = lw_work_system(work, error);
    if (status < 0) return status;
    lw_engine_choice choice = {0};
    status = lw_engine_choose(work->system, 0.0, &work->arguments->solve, &work->watch, &choice, error);
    if (status < 0) return status;
    fprintf(to, "Rank and datum\n");
    if (!work->arguments->engine_named && choice.engine && !(choice.engine->abilities & LW_RANK)) {
        fprintf(to, "  %-32s not determined: a factorization would take too much (name --engine to insist)\n",
                "rank");
    } else {
        const lw_engine *used =
            work->arguments->engine_named ? lw_engine_find(work->arguments->solve.engine) : choice.engine;
        work->arguments->solve.datum_free = !used || (used->abilities & LW_FREE_DATUM) != 0;
        status = lw_work_decompose(work, 0.0, false, error);
        if (status >= 0)
            put_rank(work, to);
        else if (status == LW_UNSOLVABLE)
            fprintf(to, "! %s\n", error->text);
    }
    if (choice.engine) fprintf(to, "Engine: auto would take %s: %s\n", choice.engine->name, choice.why);
    return status > 0 ? LW_OK : status;
}
