/** The corner of the curve (ln misfit, ln size): its largest signed curvature. */
#ifndef LW_TRADEOFF_CORNER_H
#define LW_TRADEOFF_CORNER_H

#include "tradeoff/look.h"

/** Least curvature that is called a corner. A curve that turns by a right angle within one e-fold has 1.6;
 * problems whose curve has a corner to the eye measured 1.9 and more, those without 0.43 and less. */
#define LW_CORNER_LEAST 0.5

/** Signed curvature, positive where the curve is convex (the corner of an L). With rho = misfit^2, eta =
 * size^2 and eta' = d eta / d lambda < 0, and rho' = -lambda^2 eta': kappa = 2 (rho eta / |eta'|) (lambda^2
 * eta' rho + 2 lambda rho eta + lambda^4 eta' eta) / (lambda^4 eta^2 + rho^2)^(3/2) rho counts weighted
 * priors too, for which alone the relation of rho' and eta' holds. NaN where it is not defined. Source:
 * Hansen & O'Leary, SIAM J. Sci. Comput. 14(6):1487-1503, 1993, for the damping lambda (not its square; the
 * power of lambda in the denominator is 4). */
double lw_corner_curvature(const lw_point *point);

/** Fills the choice: the largest curvature that is an interior maximum of at least LW_CORNER_LEAST; where
 * there is none but the curve bends that much at the lower end of the range, and is still on the move, that
 * end with a warning; else none, with the reason. */
lw_status lw_corner_choose(lw_look *look, lw_choice *choice);

#endif
