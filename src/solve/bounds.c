/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/bounds.h"

#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/bounds_part.h"

#include <math.h>
#include <string.h>

#define TOLERANCE 1e-10
#define DENSE_COLUMNS 2000
#define DENSE_OPERATIONS 4e10

void lw_box_forward(lw_box *box, const double *t, double *y)
{
    for (int64_t j = 0; j < box->n; j++) box->z[j] = box->weight[j] * t[j];
    lw_apply(box->A, 1, box->z, y);
    box->steps++;
    if (box->penalty_rows == 0) return;
    lw_system_penalize(box->system, box->z, y + box->rows);
    lw_scale(box->penalty_rows, box->lambda, y + box->rows, box->team);
}

void lw_box_adjoint(lw_box *box, const double *y, double *g)
{
    lw_apply_transposed(box->A, 1, y, g);
    if (box->penalty_rows > 0) {
        lw_system_penalize_transposed(box->system, y + box->rows, box->l);
        lw_add_scaled(box->n, box->lambda, box->l, g, box->team);
    }
    for (int64_t j = 0; j < box->n; j++) g[j] *= box->weight[j];
}

void lw_box_refresh(lw_box *box)
{
    lw_box_forward(box, box->t, box->r);
    lw_add_scaled(box->rows, -1.0, box->system->b, box->r, box->team);
    lw_box_adjoint(box, box->r, box->g);
}

void lw_box_classify(lw_box *box)
{
    for (int64_t j = 0; j < box->n; j++)
        box->set[j] = box->t[j] <= box->low[j] ? -1 : box->t[j] >= box->high[j] ? 1 : 0;
}

double lw_box_projected(const lw_box *box, double *out)
{
    double sum = 0.0;
    for (int64_t j = 0; j < box->n; j++) {
        double p = box->g[j];
        if (box->set[j] < 0 && p > 0.0) p = 0.0;
        if (box->set[j] > 0 && p < 0.0) p = 0.0;
        if (box->low[j] == box->high[j]) p = 0.0;
        if (out != NULL) out[j] = p;
        sum += p * p;
    }
    return sqrt(sum);
}

static void box_free(lw_box *box)
{
    double *all[] = {box->weight, box->low, box->high, box->t,  box->g,  box->r, box->d,
                     box->s,      box->q,   box->h,    box->Kd, box->Ks, box->z, box->l};
    for (size_t k = 0; k < sizeof all / sizeof *all; k++) lw_free(all[k]);
    lw_free(box->set);
    lw_operator_free(box->A);
}

static lw_status box_allocate(lw_box *box, lw_error *error)
{
    double **of_columns[] = {&box->weight, &box->low, &box->high, &box->t, &box->g, &box->d,
                             &box->s,      &box->q,   &box->h,    &box->z, &box->l};
    double **of_rows[] = {&box->r, &box->Kd, &box->Ks};
    int failed = 0;
    for (size_t k = 0; k < sizeof of_columns / sizeof *of_columns; k++)
        failed |= (*of_columns[k] = LW_NEW_ZEROS(double, box->n)) == NULL;
    for (size_t k = 0; k < sizeof of_rows / sizeof *of_rows; k++)
        failed |= (*of_rows[k] = LW_NEW_ZEROS(double, box->tall)) == NULL;
    failed |= (box->set = LW_NEW_ZEROS(int8_t, box->n)) == NULL;
    return failed ? lw_fail_memory(error, "the bounded problem",
                                   (size_t)lw_bytes(11 * box->n + 3 * box->tall, 8))
                  : LW_OK;
}

/* weight_j = 1 / sqrt(1 + lambda^2 ||l_j||^2): with columns of A of about unit length, K's are too. */
static void weigh(lw_box *box)
{
    const lw_system *system = box->system;
    for (int64_t j = 0; j < box->n; j++) {
        double square = 0.0;
        if (system->penalty == NULL) square = system->penalty_diagonal[j] * system->penalty_diagonal[j];
        for (int64_t p = system->penalty == NULL ? 0 : system->penalty->start[j];
             system->penalty != NULL && p < system->penalty->start[j + 1]; p++)
            square += system->penalty->value[p] * system->penalty->value[p];
        box->weight[j] = 1.0 / sqrt(1.0 + box->lambda * box->lambda * square);
    }
}

/* (bound - x0) in model units. */
static lw_decimal bound_of(const lw_system *system, const double *bound, int64_t c)
{
    return lw_decimal_subtract(lw_decimal_of(bound[system->parameter_of[c]]), system->start[c]);
}

static void take_bounds(lw_box *box)
{
    const lw_system *system = box->system;
    const lw_problem *problem = system->problem;
    for (int64_t c = 0; c < box->n; c++) {
        double by = system->scale[c] * box->weight[c], lower = -(double)INFINITY, upper = (double)INFINITY;
        if (problem->lower != NULL) lower = problem->lower[system->parameter_of[c]];
        if (problem->upper != NULL) upper = problem->upper[system->parameter_of[c]];
        box->low[c] = isfinite(lower) ? bound_of(system, problem->lower, c).high / by : lower;
        box->high[c] = isfinite(upper) ? bound_of(system, problem->upper, c).high / by : upper;
        box->t[c] = fmin(fmax(0.0, box->low[c]), box->high[c]);
    }
}

static lw_status box_new(lw_box *box, lw_system *system, double lambda, const lw_bounds_options *options,
                         const lw_watch *watch, lw_error *error)
{
    *box = (lw_box){.system = system,
                    .lambda = lambda,
                    .watch = watch,
                    .team = lw_watch_team(watch),
                    .n = system->columns,
                    .rows = system->rows,
                    .penalty_rows = lambda > 0.0 ? system->penalty_rows : 0};
    box->tall = box->rows + box->penalty_rows;
    box->most = options->steps;
    if (box->most <= 0) box->most = 4 * box->n < 1000 ? 1000 : 4 * box->n > 20000 ? 20000 : 4 * box->n;
    lw_status status = box_allocate(box, error);
    lw_product_options product = {.storage = options->storage, .team = box->team};
    if (status == LW_OK) status = lw_system_operator(system, &product, watch, &box->A, error);
    if (status != LW_OK) return status;
    weigh(box);
    take_bounds(box);
    memcpy(box->r, system->b, (size_t)box->rows * sizeof(double));
    lw_box_adjoint(box, box->r, box->g);
    box->side = lw_norm(box->rows, system->b, box->team);
    box->reference = lw_norm(box->n, box->g, box->team);
    lw_box_refresh(box);
    lw_box_classify(box);
    box->reference = fmax(box->reference, lw_box_projected(box, NULL));
    return LW_OK;
}

static lw_status bounded_new(const lw_box *box, lw_stop stop, lw_bounded **out, lw_error *error)
{
    const lw_system *system = box->system;
    int64_t n = box->n;
    lw_bounded *b = LW_NEW(lw_bounded);
    if (b == NULL) return lw_fail_memory(error, "the bounded solution", sizeof *b);
    b->z = LW_NEW_ARRAY(double, n);
    b->z_low = LW_NEW_ZEROS(double, n);
    b->at_bound = LW_NEW_ZEROS(int8_t, n);
    b->multiplier = LW_NEW_ARRAY(double, n);
    if (b->z == NULL || b->z_low == NULL || b->at_bound == NULL || b->multiplier == NULL) {
        lw_bounded_free(b);
        return lw_fail_memory(error, "the bounded solution", (size_t)n * 25);
    }
    b->columns = n;
    b->steps = box->steps;
    b->exchanges = box->exchanges;
    b->stop = stop;
    b->optimality = box->reference > 0.0 ? lw_box_projected(box, NULL) / box->reference : 0.0;
    for (int64_t c = 0; c < n; c++) {
        b->z[c] = box->weight[c] * box->t[c];
        b->at_bound[c] = box->set[c];
        b->multiplier[c] = 0.0;
        b->free += box->set[c] == 0;
        if (box->set[c] == 0) continue;
        b->multiplier[c] = box->g[c] / (box->weight[c] * system->scale[c]);
        lw_decimal bound =
            bound_of(system, box->set[c] < 0 ? system->problem->lower : system->problem->upper, c);
        b->z[c] = bound.high / system->scale[c];
        b->z_low[c] = bound.low / system->scale[c];
    }
    *out = b;
    return LW_OK;
}

void lw_bounded_free(lw_bounded *bounded)
{
    if (bounded == NULL) return;
    lw_free(bounded->z);
    lw_free(bounded->z_low);
    lw_free(bounded->at_bound);
    lw_free(bounded->multiplier);
    lw_free(bounded);
}

static int small_enough(const lw_box *box, const lw_bounds_options *options)
{
    int64_t most = options->dense == 0 ? DENSE_COLUMNS : options->dense;
    double n = (double)box->n, operations = 2.0 * n * n * (double)box->tall;
    return box->n <= most && operations <= DENSE_OPERATIONS &&
           lw_watch_budget(box->watch, lw_bytes(box->n, 8 * (box->tall + 2 * box->n)), "the bounded problem",
                           "", NULL) == LW_OK;
}

lw_status lw_bounds_solve(lw_system *system, double lambda, const lw_bounds_options *options,
                          const lw_watch *watch, lw_bounded **out, lw_error *error)
{
    const lw_bounds_options standard = {0};
    lw_box box;
    lw_stop stop = LW_STOP_ZERO;
    *out = NULL;
    if (options == NULL) options = &standard;
    if (system->conditions > 0)
        return lw_fail(error, LW_BAD_USAGE, "bounds and exact conditions do not go together");
    double tolerance = options->tolerance > 0.0 ? options->tolerance : TOLERANCE;
    lw_status status = box_new(&box, system, lambda, options, watch, error);
    if (status == LW_OK && box.reference > 0.0) {
        stop = lw_box_iterate(&box, tolerance * box.reference);
        if (stop != LW_STOP_INTERRUPTED && small_enough(&box, options)) {
            status = lw_box_finish(&box, error);
            if (status == LW_OK) stop = LW_STOP_DIRECT;
            if (status == LW_QUALIFIED) status = LW_OK;
        }
        lw_box_refresh(&box);
        lw_box_classify(&box);
    }
    if (status == LW_OK) status = bounded_new(&box, stop, out, error);
    box_free(&box);
    if (status != LW_OK) return status;
    if (stop == LW_STOP_INTERRUPTED) return LW_INTERRUPTED;
    return (*out)->optimality <= tolerance || stop == LW_STOP_DIRECT ? LW_OK : LW_NOT_CONVERGED;
}
