/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Redundancy of every row from the entries of Q: with A_b the rows of a block of correlated readings (one
 *  row when it is uncorrelated), P its weights,
 *
 *      C = A_b Q A_b'          cofactors of the adjusted readings
 *      T = P - P C P           = P Q_vv P of the block
 *      redundancy_i = 1 - (C P)_ii,  visible_i = T_ii,  share_i = T_ii / P_ii
 *
 *  For an uncorrelated row redundancy = share = 1 - P C. For a correlated one the redundancy is not
 *  confined to 0 .. 1; the share is, and it is what says whether an error in the reading can be seen.
 *  Source: Baarda 1968; Schaffrin, Reliability measures for correlated observations, J. Surv. Eng. 123(3),
 *  1997. */
#ifndef LW_CERTAINTY_REDUNDANCY_H
#define LW_CERTAINTY_REDUNDANCY_H

#include "certainty/cofactor.h"
#include "certainty/equation.h"
#include "certainty/shift.h"

typedef struct lw_redundancy {
    int64_t rows;
    double *adjusted;   /**< C_ii, unit^2 of the reading; NaN unknown */
    double *redundancy; /**< NaN for readings set aside */
    /** T_ii, 1 / unit^2; of a reading set aside: 1 / (sigma^2 + C_ii), that of its prediction error */
    double *visible;
    double *share; /**< T_ii / P_ii, 0 .. 1; sigma^2 / (sigma^2 + C_ii) for a reading set aside */
    double sum;    /**< of the redundancies: the degrees of freedom of an undamped problem */
} lw_redundancy;

/** After lw_cofactor_invert. known: rows, C_ii of rows that are already known (set-aside readings, whose
 *  entries lie outside the pattern), NaN elsewhere; may be NULL. shift: made by lw_shift_new; the largest
 *  shift of uncorrelated rows among their own parameters is filled in on the way; may be NULL. Runs on the
 *  team. Cost: the squares of the row lengths. */
lw_status lw_redundancy_new(const lw_equations *equations, const lw_cofactor *cofactor, const double *known,
                            lw_shift *shift, const lw_watch *watch, lw_redundancy **out, lw_error *error);
void lw_redundancy_free(lw_redundancy *redundancy);

/** A readable error: share of at least 1e-6. */
#define LW_LEAST_SHARE 1e-6

#endif
