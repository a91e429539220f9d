/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/look.h"

#include "core/memory.h"
#include "tradeoff/search.h"

#include <math.h>

/* Step in ln lambda of the differences. */
#define DIFFERENCE 0.02

/* d(size^2)/d lambda by central differences in ln lambda, for an engine that does not give it. */
static lw_status fill_slope(lw_look *look, lw_point *point)
{
    double side[2] = {point->lambda * exp(-DIFFERENCE), point->lambda * exp(DIFFERENCE)};
    lw_point at[2];
    lw_decomposition *d = look->decomposition;
    lw_status status = d->methods->evaluate(d, 2, side, 0, at, NULL, look->watch, look->error);
    if (status < 0 || status == LW_INTERRUPTED) return status;
    point->size_slope =
        (at[1].size * at[1].size - at[0].size * at[0].size) / (2.0 * DIFFERENCE * point->lambda);
    return LW_OK;
}

lw_status lw_look_rows(lw_look *look, int count, const double *lambda, lw_curve_row *out)
{
    lw_decomposition *d = look->decomposition;
    lw_point *point = LW_NEW_ZEROS(lw_point, count);
    if (point == NULL) return lw_fail_memory(look->error, "the curve", (size_t)count * sizeof *point);
    lw_status status =
        d->methods->evaluate(d, count, lambda, look->traced, point, NULL, look->watch, look->error);
    if (status > 0 && status != LW_INTERRUPTED) status = LW_OK;
    for (int i = 0; i < count && status == LW_OK; i++) {
        if (!look->traced) point[i].effective_parameters = (double)NAN;
        if (isnan(point[i].size_slope)) status = fill_slope(look, &point[i]);
        lw_curve_row_fill(d->system, look->sigma_stated, &point[i], &out[i]);
        out[i].converged = point[i].error_bound <= look->tolerance;
        out[i].usable = point[i].error_bound <= fmax(LW_CURVE_TOLERANCE, look->tolerance);
    }
    lw_free(point);
    return status;
}

int lw_look_valleys(const lw_look *look, lw_height *height, int most, int *at)
{
    int found = 0;
    for (int i = look->low + 1; i + 1 < look->count; i++) {
        double here = height(&look->row[i]), below = height(&look->row[i - 1]),
               above = height(&look->row[i + 1]);
        if (!(here <= below && here < above)) continue;
        int place = found < most ? found : most;
        while (place > 0 && height(&look->row[at[place - 1]]) > here) place--;
        if (place >= most) continue;
        for (int j = found < most ? found : most - 1; j > place; j--) at[j] = at[j - 1];
        at[place] = i;
        if (found < most) found++;
    }
    return found;
}

typedef struct seek {
    lw_look *look;
    lw_height *height;
    lw_status status;
} seek;

static double height_at(void *state, double log_lambda)
{
    seek *s = state;
    lw_curve_row row;
    double lambda = exp(log_lambda);
    if (s->status == LW_OK) s->status = lw_look_rows(s->look, 1, &lambda, &row);
    return s->status == LW_OK ? s->height(&row) : (double)NAN;
}

lw_status lw_look_lowest(lw_look *look, lw_height *height, int at, lw_curve_row *out)
{
    *out = look->row[at];
    if (!look->refine) return LW_OK;
    seek s = {.look = look, .height = height};
    double left = log(look->row[at - 1].point.lambda), right = log(look->row[at + 1].point.lambda);
    double middle = log(look->row[at].point.lambda);
    double tolerance = look->cheap ? 1e-9 : 2e-3;
    double best = lw_search_minimum(height_at, &s, left, middle, right, height(&look->row[at]), tolerance,
                                    look->cheap ? 80 : 10);
    if (s.status != LW_OK) return s.status;
    double lambda = exp(best);
    lw_curve_row row;
    lw_status status = lw_look_rows(look, 1, &lambda, &row);
    if (status == LW_OK && height(&row) <= height(out)) *out = row;
    return status;
}

/* Where height meets the limit between an inner row (at most the limit) and an outer one, linear in ln
 * lambda. */
static double crossing(lw_height *height, const lw_curve_row *inner, const lw_curve_row *outer, double limit)
{
    double a = height(inner), b = height(outer), t = b > a ? (limit - a) / (b - a) : 1.0;
    t = fmin(fmax(t, 0.0), 1.0);
    return exp(log(inner->point.lambda) * (1.0 - t) + log(outer->point.lambda) * t);
}

void lw_look_range(const lw_look *look, lw_height *height, double limit, lw_choice *choice)
{
    const lw_curve_row *inner = &choice->at;
    double here = choice->damping;
    choice->from = choice->to = here;
    for (int i = look->count - 1; i >= look->low; i--) {
        const lw_curve_row *row = &look->row[i];
        if (row->point.lambda >= here) continue;
        choice->from = crossing(height, inner, row, limit);
        if (!(height(row) <= limit)) break;
        inner = row;
    }
    inner = &choice->at;
    for (int i = look->low; i < look->count; i++) {
        const lw_curve_row *row = &look->row[i];
        if (row->point.lambda <= here) continue;
        choice->to = crossing(height, inner, row, limit);
        if (!(height(row) <= limit)) break;
        inner = row;
    }
}

void lw_look_take(lw_choice *choice, const lw_curve_row *row, double value)
{
    choice->damping = row->point.lambda;
    choice->at = *row;
    choice->value = value;
}
