/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/risk.h"

#include "tradeoff/valley.h"

double lw_risk_value(double m, const lw_point *point)
{
    return point->misfit * point->misfit - m + 2.0 * point->effective_parameters;
}

static double height(const lw_curve_row *row)
{
    return row->risk;
}

lw_status lw_risk_choose(lw_look *look, lw_choice *choice)
{
    return lw_valley_choose(look, "The predictive risk", height, 0.0, choice);
}
