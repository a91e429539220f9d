/** Generalized cross-validation. Source: Golub, Heath & Wahba, Technometrics 21(2):215-223, 1979. */
#ifndef LW_TRADEOFF_GCV_H
#define LW_TRADEOFF_GCV_H

#include "tradeoff/look.h"

/** misfit^2 / (m - effective_parameters)^2, m the observations used; NaN where the trace is not known or
 * takes all of m. */
double lw_gcv_value(double m, const lw_point *point);

/** Fills the choice: the smallest value; says so when the function is flat (then none), when the minimum lies
 * at an end of the range, and when a rival minimum is as deep to 5 %. */
lw_status lw_gcv_choose(lw_look *look, lw_choice *choice);

#endif
