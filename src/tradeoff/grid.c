/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/grid.h"

#include <math.h>

/* Relative change of misfit and size over a step below which the curve has nothing more to tell. */
#define NO_CHANGE 1e-3
/* A misfit that has fallen this far below that at sigma_1 is rounding. */
#define NO_MISFIT 1e-9

void lw_sweep_grid(double from, double to, int count, double *out)
{
    for (int i = 0; i < count; i++) {
        double t = count > 1 ? (double)i / (count - 1) : 0.0;
        out[i] = i == 0 ? from : i == count - 1 ? to : exp(log(from) * (1.0 - t) + log(to) * t);
    }
}

static bool still(double a, double b)
{
    return fabs(a - b) <= NO_CHANGE * fmax(fabs(a), fabs(b));
}

lw_status lw_grid_floor(lw_look *look, double sigma_one, double *floor)
{
    double factor = look->cheap ? sqrt(0.1) : 0.1, least = look->cheap ? LW_GRID_DIRECT : LW_GRID_FACTORED;
    lw_curve_row top, before, here;
    bool traced = look->traced;
    look->traced = false;
    *floor = sigma_one * factor;
    lw_status status = lw_look_rows(look, 1, &sigma_one, &top);
    before = top;
    for (double lambda = sigma_one * factor; status == LW_OK && lambda >= 0.99 * least * sigma_one;
         lambda *= factor) {
        status = lw_look_rows(look, 1, &lambda, &here);
        if (status == LW_UNSOLVABLE && lambda < 0.5 * sigma_one * factor) {
            status = LW_OK; /* the damping no longer makes the problem regular: the range ends above */
            break;
        }
        if (status != LW_OK) break;
        if (!here.usable) break; /* iterated for itself, and not converged */
        *floor = lambda;
        const lw_point *a = &before.point, *b = &here.point;
        if (still(a->misfit, b->misfit) && still(a->size, b->size) && lambda < 0.05 * sigma_one) break;
        if (b->misfit <= NO_MISFIT * top.point.misfit) break;
        before = here;
    }
    look->traced = traced;
    return status;
}
