/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/search.h"

#include <math.h>
#include <stdbool.h>

#define GOLDEN 0.3819660112501051 /* (3 - sqrt 5) / 2 */

/* The three best points: x, w, v (values fx <= fw <= fv); e is the step before the last one, d the last one.
 */
typedef struct three {
    double x, w, v, fx, fw, fv, d, e;
} three;

/* The step to the minimum of the parabola through the three points, if it stays inside and halves the step
 * before the last. */
static bool parabola(three *t, double left, double right, double tolerance, double *step)
{
    if (!(fabs(t->e) > tolerance) || !isfinite(t->fw) || !isfinite(t->fv)) return false;
    double r = (t->x - t->w) * (t->fx - t->fv), q = (t->x - t->v) * (t->fx - t->fw);
    double p = (t->x - t->v) * q - (t->x - t->w) * r;
    q = 2.0 * (q - r);
    if (q > 0.0) p = -p;
    q = fabs(q);
    if (!(fabs(p) < fabs(0.5 * q * t->e)) || !(p > q * (left - t->x)) || !(p < q * (right - t->x)))
        return false;
    *step = p / q;
    double u = t->x + *step;
    if (u - left < 2.0 * tolerance || right - u < 2.0 * tolerance)
        *step = t->x < 0.5 * (left + right) ? tolerance : -tolerance;
    return true;
}

static void take(three *t, double u, double fu, double *left, double *right)
{
    if (fu <= t->fx) {
        if (u < t->x)
            *right = t->x;
        else
            *left = t->x;
        t->v = t->w, t->fv = t->fw;
        t->w = t->x, t->fw = t->fx;
        t->x = u, t->fx = fu;
        return;
    }
    if (u < t->x)
        *left = u;
    else
        *right = u;
    if (fu <= t->fw || t->w == t->x) {
        t->v = t->w, t->fv = t->fw;
        t->w = u, t->fw = fu;
    } else if (fu <= t->fv || t->v == t->x || t->v == t->w) {
        t->v = u, t->fv = fu;
    }
}

double lw_search_minimum(lw_search_function *f, void *state, double left, double middle, double right,
                         double value, double tolerance, int most)
{
    three t = {.x = middle, .w = middle, .v = middle, .fx = value, .fw = value, .fv = value};
    for (int i = 0; i < most; i++) {
        double centre = 0.5 * (left + right), step;
        if (fabs(t.x - centre) <= 2.0 * tolerance - 0.5 * (right - left)) break;
        if (parabola(&t, left, right, tolerance, &step)) {
            t.e = t.d;
        } else {
            t.e = t.x < centre ? right - t.x : left - t.x;
            step = GOLDEN * t.e;
        }
        t.d = step;
        double u = t.x + (fabs(step) >= tolerance ? step : copysign(tolerance, step)), fu = f(state, u);
        take(&t, u, isnan(fu) ? (double)INFINITY : fu, &left, &right);
    }
    return t.x;
}

/* Regula falsi with halved ordinates at an end that stays (Illinois), and a bisection after three steps on
 * one side. */
double lw_search_root(lw_search_function *f, void *state, double left, double f_left, double right,
                      double f_right, double tolerance, int most)
{
    int side = 0;
    double weight_left = f_left, weight_right = f_right;
    for (int i = 0; i < most && right - left > tolerance; i++) {
        double x = (left * weight_right - right * weight_left) / (weight_right - weight_left);
        if (!(x > left && x < right) || side >= 3 || side <= -3) x = 0.5 * (left + right);
        double fx = f(state, x);
        if (isnan(fx) || fx == 0.0) return x;
        if ((fx < 0.0) == (f_left < 0.0)) {
            left = x;
            weight_left = fx;
            side = side > 0 ? side + 1 : 1;
            if (side > 1) weight_right *= 0.5;
        } else {
            right = x;
            weight_right = fx;
            side = side < 0 ? side - 1 : -1;
            if (side < -1) weight_left *= 0.5;
        }
    }
    return 0.5 * (left + right);
}
