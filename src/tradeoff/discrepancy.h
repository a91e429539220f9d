/** The discrepancy principle: the damping at which chi_square = noise_factor^2 m, m the rows used
 * (observations and weighted priors, those set aside not counted). Source: Morozov, Soviet Math. Dokl.
 * 7:414-417, 1966. */
#ifndef LW_TRADEOFF_DISCREPANCY_H
#define LW_TRADEOFF_DISCREPANCY_H

#include "tradeoff/look.h"

/** Fills the choice with the root, or says why the target cannot be met. */
lw_status lw_discrepancy_choose(lw_look *look, lw_choice *choice);

#endif
