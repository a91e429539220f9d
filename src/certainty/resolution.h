/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The resolution matrix R = Q A'PA of the estimate: x_estimated - x0 = R (x_true - x0) without noise.
 *
 *      damped, entries of Q known     R_jj = 1 - lambda^2 (Q L'L)_jj
 *      undamped with a datum defect   R_jj = (Q A'A)_jj
 *      undamped and determined        R_jj = 1
 *      damped, no entries             probed: mean over random signs v of v_j (R v)_j, with its standard
 *      error
 *
 *  Sources: Menke, Geophysical Data Analysis: Discrete Inverse Theory; Bekas, Kokiopoulou & Saad, Appl.
 *  Numer. Math. 57, 2007 (estimator of a diagonal). */
#ifndef LW_CERTAINTY_RESOLUTION_H
#define LW_CERTAINTY_RESOLUTION_H

#include "certainty/cofactor.h"

#define LW_RESOLUTION_PROBES 32

/** Diagonal by columns (z and model units agree), from entries after lw_cofactor_invert; *trace its sum. */
lw_status lw_resolution_of_entries(const lw_cofactor *cofactor, const lw_watch *watch, double *diagonal,
                                   double *trace, lw_error *error);
/** Diagonal by random probes; *spread: root mean square of the standard errors of its entries. */
lw_status lw_resolution_by_probes(lw_cofactor *cofactor, const lw_watch *watch, double *diagonal,
                                  double *trace, double *spread, lw_error *error);
/** Rows of R in model units: row k, n values in the order of the parameters of the problem, for
 *  `parameter[k]` (a held parameter has a row of zeros). Before the factor is handed over. rows: count x n,
 *  row after row. */
lw_status lw_resolution_rows(lw_cofactor *cofactor, int64_t count, const int64_t *parameter,
                             const lw_watch *watch, double *rows, lw_error *error);

#endif
