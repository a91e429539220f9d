/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Test statistics of all rows after some were set aside, from one decomposition. With y = P e and T = P
 *  Q_vv P of the full problem, setting row i aside gives
 *
 *      c = T e_i / sqrt(T_ii),  y <- y - c y_i / sqrt(T_ii),  T_jj <- T_jj - c_j^2,
 *      chi_square <- chi_square - y_i^2 / T_ii
 *
 *  one solve and one pass a row; later columns are reduced by the earlier c as in a Cholesky factorization.
 *  Back again: with G = T between the rows K that are aside, d = G^-1 y_K are their errors and d_k /
 *  sqrt((G^-1)_kk) is the statistic that row k has when it alone comes back.
 *  Source: Kok, On data snooping and multiple outlier testing, NOAA TR NOS NGS 30, 1984. */
#ifndef LW_CERTAINTY_DEFLATION_H
#define LW_CERTAINTY_DEFLATION_H

#include "certainty/certainty.h"

typedef struct lw_deflation {
    lw_decomposition *decomposition; /**< borrowed */
    int64_t rows, count, room;
    double *start_y,
        *start_t;    /**< rows: P e and T_ii of the full problem; T_ii 0 where there is no statistic */
    double *y, *t;   /**< rows: the same with `count` rows aside */
    double **column; /**< count: c, rows each */
    double **full;   /**< count: T e_i, rows each */
    int64_t *row;    /**< count: rows that are aside */
    double chi_square, start_chi_square;
} lw_deflation;

/** From a decomposition with its estimate and reliability (rows). */
lw_status lw_deflation_new(lw_decomposition *decomposition, const lw_estimate *estimate,
                           const lw_certainty *certainty, lw_deflation **out, lw_error *error);
void lw_deflation_free(lw_deflation *deflation);
/** Row whose error cannot be told from one of row i as things stand (|rho| > 1 - 1e-9), -1 none. */
lw_status lw_deflation_rival(lw_deflation *deflation, int64_t i, int64_t *rival, lw_error *error);
/** Sets row i aside. */
lw_status lw_deflation_add(lw_deflation *deflation, int64_t i, lw_error *error);
/** Puts the row at place k of row[] back. */
void lw_deflation_remove(lw_deflation *deflation, int64_t k);
/** w (count): statistic that each row aside has when it alone comes back, with the sign of its residual. */
lw_status lw_deflation_back(const lw_deflation *deflation, double *w, lw_error *error);

#endif
