/** From criteria to choices: finds the optimum of each criterion on a curve and refines it on the
 * decomposition. */
#ifndef LW_TRADEOFF_CHOOSE_H
#define LW_TRADEOFF_CHOOSE_H

#include "tradeoff/look.h"

/** The one damping that a criterion picks, for `--damping corner` and its like: sweeps and returns it.
 *  LW_UNSOLVABLE with the criterion's warning as message when it picks none. *out, when not NULL, gets the
 * curve (owned by the caller), also when nothing was picked. */
lw_status lw_choose_damping(lw_decomposition *decomposition, lw_criterion criterion,
                            const lw_sweep_options *options, const lw_watch *watch, double *damping,
                            lw_curve **out, lw_error *error);

/** How far the choices lie apart and what it usually means: fills curve->decades and curve->comparison. */
void lw_choose_compare(lw_curve *curve);

/** Fills choice[0 .. *choices-1] for the criteria in the bits, from the rows and, with look->refine, from
 * dampings between. */
lw_status lw_choose_all(lw_look *look, unsigned criteria, lw_choice *choice, int *choices);

#endif
