/** The trade-off on a terminal: a compact table of the choices, and the curve in characters. */
#ifndef LW_COMMAND_PLOT_H
#define LW_COMMAND_PLOT_H

#include "tradeoff/curve.h"

#include <stdio.h>

/** One line a criterion: damping, range within 5 % of the optimum, misfit, size, warning mark (libsmartcols).
 */
void lw_plot_choices(const lw_curve *curve, FILE *to);
/** ln size over ln misfit, usable dampings as '.', choices by their letter. */
void lw_plot_curve(const lw_curve *curve, FILE *to);

#endif
