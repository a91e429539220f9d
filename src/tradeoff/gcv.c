/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/gcv.h"

#include "tradeoff/valley.h"

#include <math.h>

/* Variation below which GCV says nothing: 1 %, for A = I it is constant. */
#define FLAT 0.01

double lw_gcv_value(double m, const lw_point *point)
{
    double left = m - point->effective_parameters;
    return left > 1e-9 * m ? point->misfit / left * (point->misfit / left) : (double)NAN;
}

static double height(const lw_curve_row *row)
{
    return row->gcv;
}

lw_status lw_gcv_choose(lw_look *look, lw_choice *choice)
{
    return lw_valley_choose(look, "GCV", height, FLAT, choice);
}
