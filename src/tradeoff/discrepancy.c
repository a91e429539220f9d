/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/discrepancy.h"

#include "tradeoff/search.h"

#include <math.h>
#include <stdio.h>

/* How far beyond the range the root is looked for: upwards always (large dampings are easy), downwards with a
 * direct engine. */
#define BEYOND_UP 1e4
#define BEYOND_DOWN 1e3

typedef struct seek {
    lw_look *look;
    double target;
    lw_status status;
} seek;

/* ln(chi_square / target), which rises with the damping. */
static double excess(void *state, double log_lambda)
{
    seek *s = state;
    lw_curve_row row;
    double lambda = exp(log_lambda);
    if (s->status == LW_OK) s->status = lw_look_rows(s->look, 1, &lambda, &row);
    return s->status == LW_OK ? log(row.point.chi_square / s->target) : (double)NAN;
}

/* Two dampings between which chi_square passes the target; false when there are none. */
static bool bracket(seek *s, double *left, double *f_left, double *right, double *f_right)
{
    const lw_look *look = s->look;
    int high = look->low;
    while (high < look->count && !(look->row[high].point.chi_square >= s->target)) high++;
    if (high > look->low && high < look->count) {
        *left = log(look->row[high - 1].point.lambda);
        *right = log(look->row[high].point.lambda);
        *f_left = log(look->row[high - 1].point.chi_square / s->target);
        *f_right = log(look->row[high].point.chi_square / s->target);
        return true;
    }
    bool up = high == look->count;
    if (!look->refine || (!up && (!look->direct || !look->cheap))) return false;
    const lw_curve_row *end = &look->row[up ? look->count - 1 : look->low];
    *left = *right = log(end->point.lambda);
    *f_left = *f_right = log(end->point.chi_square / s->target);
    double reach = up ? BEYOND_UP : BEYOND_DOWN;
    for (double factor = 10.0; factor <= reach * 1.001; factor *= 10.0) {
        double x = log(end->point.lambda) + (up ? log(factor) : -log(factor)), f = excess(s, x);
        if (isnan(f)) return false;
        if (up)
            *right = x, *f_right = f;
        else
            *left = x, *f_left = f;
        if (*f_left < 0.0 && *f_right >= 0.0) return true;
        *left = *right = x;
        *f_left = *f_right = f;
    }
    return false;
}

static void say_why(const lw_look *look, double target, lw_choice *choice)
{
    double least = look->row[look->low].point.chi_square;
    if (least > target)
        snprintf(choice->warning, sizeof choice->warning,
                 "The target cannot be met: even at damping %.4g chi_square is %.4g, above %.4g. The "
                 "standard deviations are "
                 "stated too small, or the equations do not describe the observations.",
                 look->row[look->low].point.lambda, least, target);
    else
        snprintf(choice->warning, sizeof choice->warning,
                 "The target cannot be met: chi_square stays below %.4g at every damping. The start values "
                 "fit better than the "
                 "standard deviations ask for.",
                 target);
}

/* Dampings between which chi_square is within 5 % of the target, from the slope at the root:
 *      d ln rho / d ln lambda = -lambda^3 (d eta / d lambda) / rho, rho = chi_square, eta = size^2. */
static void fill_range(lw_choice *choice)
{
    const lw_point *p = &choice->at.point;
    double slope = -p->lambda * p->lambda * p->lambda * p->size_slope / p->chi_square;
    slope = slope > 0.02 ? slope : 0.02; /* at most an order of magnitude either way */
    choice->from = p->lambda * exp(log(1.0 - LW_NEAR_OPTIMUM) / slope);
    choice->to = p->lambda * exp(log(1.0 + LW_NEAR_OPTIMUM) / slope);
}

lw_status lw_discrepancy_choose(lw_look *look, lw_choice *choice)
{
    double target = look->noise_factor * look->noise_factor * (double)look->decomposition->system->rows_used;
    seek s = {.look = look, .target = target, .status = LW_OK};
    double left, right, f_left, f_right;
    bool found = look->count > look->low && bracket(&s, &left, &f_left, &right, &f_right);
    if (s.status != LW_OK) return s.status;
    if (!found) {
        if (look->count > look->low) say_why(look, target, choice);
        return LW_OK;
    }
    double root = look->refine ? lw_search_root(excess, &s, left, f_left, right, f_right,
                                                look->cheap ? 1e-12 : 1e-4, look->cheap ? 100 : 12)
                               : (left * f_right - right * f_left) / (f_right - f_left);
    if (s.status != LW_OK) return s.status;
    lw_curve_row row;
    double lambda = exp(root);
    lw_status status = lw_look_rows(look, 1, &lambda, &row);
    if (status != LW_OK) return status;
    lw_look_take(choice, &row, row.point.chi_square);
    fill_range(choice);
    return LW_OK;
}
