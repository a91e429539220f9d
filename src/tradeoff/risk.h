/** Unbiased predictive risk, for stated standard deviations. Sources: Mallows, Technometrics 15(4):661-675,
 * 1973; Vogel, Computational Methods for Inverse Problems, SIAM 2002, 7.1. */
#ifndef LW_TRADEOFF_RISK_H
#define LW_TRADEOFF_RISK_H

#include "tradeoff/look.h"

/** misfit^2 - m + 2 effective_parameters, m the observations used. Its expectation is ||A x - A x_true||^2.
 */
double lw_risk_value(double m, const lw_point *point);

lw_status lw_risk_choose(lw_look *look, lw_choice *choice);

#endif
