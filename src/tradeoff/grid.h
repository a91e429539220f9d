/** The range of dampings that a sweep covers where none is given. See sweep.h for the rule. */
#ifndef LW_TRADEOFF_GRID_H
#define LW_TRADEOFF_GRID_H

#include "tradeoff/look.h"

/** Least damping of an own grid as a part of sigma_1: iterative engines (a curve down to it takes some
 * thousand steps), direct engines that sweep cheaply, and those that factor anew at each damping. */
#define LW_GRID_ITERATIVE 1e-3
#define LW_GRID_DIRECT 1e-8
#define LW_GRID_FACTORED 1e-6

/** Walks down from sigma_1 by half decades (whole ones where a damping is costly) until nothing changes. */
lw_status lw_grid_floor(lw_look *look, double sigma_one, double *floor);

#endif
