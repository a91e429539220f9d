/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/corner.h"

#include <math.h>
#include <stdio.h>

/* Less movement than this between the neighbours of a row is rounding, not a curve. */
#define LEAST_MOVEMENT 1e-6
/* Path of ln misfit and ln size over a decade of damping below which the end of the range is the end of the
 * curve. */
#define LEAST_SPEED 0.1

double lw_corner_curvature(const lw_point *point)
{
    double rho = point->chi_square, eta = point->size * point->size, slope = point->size_slope,
           lambda = point->lambda;
    if (!(rho > 0.0) || !(eta > 0.0) || !(slope < 0.0)) return (double)NAN;
    double l2 = lambda * lambda;
    /* relative quantities keep the powers in range: e = lambda eta'/eta, q = lambda^2 eta / rho;
     * kappa = 2 / |e| (q e + 2 q + q^2 e) / (1 + q^2)^(3/2) */
    double e = lambda * slope / eta, q = l2 * eta / rho, root = sqrt(1.0 + q * q);
    return 2.0 / fabs(e) * q * (e + 2.0 + q * e) / (root * root * root);
}

static double depth(const lw_curve_row *row)
{
    return -row->curvature;
}

static bool moves(const lw_look *look, int i)
{
    const lw_point *a = &look->row[i - 1].point, *b = &look->row[i + 1].point;
    return fabs(log(b->misfit / a->misfit)) + fabs(log(b->size / a->size)) >= LEAST_MOVEMENT;
}

static void say_none(const lw_look *look, lw_choice *choice)
{
    int best = -1;
    for (int i = look->low; i < look->count; i++)
        if (!isnan(look->row[i].curvature) &&
            (best < 0 || look->row[i].curvature > look->row[best].curvature))
            best = i;
    if (best < 0) {
        snprintf(choice->warning, sizeof choice->warning,
                 "There is no corner: the curvature of the curve is not defined.");
        return;
    }
    double most = look->row[best].curvature, at = look->row[best].point.lambda;
    if (!(most > 0.0))
        snprintf(choice->warning, sizeof choice->warning,
                 "There is no corner: the curve is concave at every damping of the range.");
    else if (most < LW_CORNER_LEAST)
        snprintf(choice->warning, sizeof choice->warning,
                 "There is no corner: the largest curvature, %.3g at damping %.4g, is too weak for one (%.1f "
                 "or more).",
                 most, at, LW_CORNER_LEAST);
    else
        snprintf(choice->warning, sizeof choice->warning,
                 "There is no corner inside the range: the curvature is largest, %.3g, at the %s end "
                 "(damping %.4g), "
                 "where the curve hardly moves.",
                 most, best == look->low ? "lower" : "upper", at);
}

/* The curve still bends ever more where the range ends below, and is on the move there: the corner is at the
 * end or beyond. */
static bool bends_at_end(const lw_look *look)
{
    if (look->low > 0 || look->count < 3) return false;
    const lw_curve_row *end = &look->row[0], *next = &look->row[1];
    if (!(end->curvature >= LW_CORNER_LEAST) || !(end->curvature > next->curvature)) return false;
    double path =
        fabs(log(next->point.misfit / end->point.misfit)) + fabs(log(next->point.size / end->point.size));
    return path >= LEAST_SPEED * log10(next->point.lambda / end->point.lambda);
}

lw_status lw_corner_choose(lw_look *look, lw_choice *choice)
{
    enum { MOST = 8 };
    int at[MOST], found = lw_look_valleys(look, depth, MOST, at), kept = 0;
    lw_curve_row peak[2];
    for (int i = 0; i < found && kept < 2; i++) {
        if (!moves(look, at[i])) continue;
        lw_status status = lw_look_lowest(look, depth, at[i], &peak[kept]);
        if (status != LW_OK) return status;
        if (peak[kept].curvature >= LW_CORNER_LEAST) kept++;
    }
    if (kept == 0 && bends_at_end(look)) {
        lw_look_take(choice, &look->row[0], look->row[0].curvature);
        lw_look_range(look, depth, -(1.0 - LW_NEAR_OPTIMUM) * choice->value, choice);
        snprintf(choice->warning, sizeof choice->warning,
                 "The corner lies at the lower end of the range or below it: the curvature is largest there, "
                 "%.3g at damping "
                 "%.4g. A wider range would tell.",
                 choice->value, choice->damping);
        return LW_OK;
    }
    if (kept == 0) {
        say_none(look, choice);
        return LW_OK;
    }
    if (kept == 2 && peak[1].curvature > peak[0].curvature) {
        lw_curve_row swap = peak[0];
        peak[0] = peak[1];
        peak[1] = swap;
    }
    lw_look_take(choice, &peak[0], peak[0].curvature);
    lw_look_range(look, depth, -(1.0 - LW_NEAR_OPTIMUM) * peak[0].curvature, choice);
    if (kept == 2 && peak[1].curvature >= 0.8 * peak[0].curvature)
        snprintf(choice->warning, sizeof choice->warning,
                 "The curve has two corners of similar sharpness: at damping %.4g (curvature %.3g) and at "
                 "%.4g (%.3g).",
                 peak[0].point.lambda, peak[0].curvature, peak[1].point.lambda, peak[1].curvature);
    return LW_OK;
}
