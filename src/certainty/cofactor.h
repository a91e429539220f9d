/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Entries and columns of the cofactor matrix Q = (A'A + lambda^2 L'L)^-1 in the scaled coordinates z,
 *  conditions and a free datum included, wherever they come from:
 *
 *      dense     the decomposition holds Q in full
 *      selected  the decomposition's sparse factor, inverted on its pattern (selected_inverse.h), plus
 *                rank-one terms
 *      own       the decomposition has no factor (an iterative or QR engine): the normal matrix is factored
 *                here, up to LW_COFACTOR_MOST columns and within the memory budget, without conditions or
 *                datum defect
 *      none      nothing of the kind: sigmas are sampled (sample.h) */
#ifndef LW_CERTAINTY_COFACTOR_H
#define LW_CERTAINTY_COFACTOR_H

#include "certainty/selected_inverse.h"
#include "solve/decomposition.h"

/** Columns up to which a normal matrix is factored for the variances of an engine that has no factor. */
#define LW_COFACTOR_MOST 20000

typedef enum lw_cofactor_kind {
    LW_COFACTOR_NONE = 0,
    LW_COFACTOR_DENSE,
    LW_COFACTOR_SELECTED
} lw_cofactor_kind;

/** An entry outside the pattern that was solved for. */
typedef struct lw_learned {
    int64_t i, j;
    double q;
} lw_learned;

typedef struct lw_cofactor {
    lw_cofactor_kind kind;
    lw_decomposition *decomposition;
    double lambda;
    int64_t columns, defect; /**< defect: of the datum, 0 when regular */
    lw_inverse_source source;
    lw_cholesky *own_factor;
    lw_selected_inverse *selected; /**< pattern from the start, entries after lw_cofactor_invert */
    lw_learned *learned;           /**< sorted by (i, j) */
    int64_t learned_count;
    bool inverted;
    bool consumed;          /**< the factor was overwritten: no columns any more */
    double error;           /**< relative error to be expected of the entries; NaN unknown */
    double factor_nonzeros; /**< entries that one solve reads, for estimates of work */
} lw_cofactor;

/** Finds the source; nothing is inverted yet, so columns can be asked for. Errors: LW_NO_MEMORY, LW_SYSTEM.
 *  */
lw_status lw_cofactor_new(lw_decomposition *decomposition, double lambda, const lw_watch *watch,
                          lw_cofactor **out, lw_error *error);
/** Without any source, for what needs none. */
lw_status lw_cofactor_none(lw_decomposition *decomposition, double lambda, lw_cofactor **out,
                           lw_error *error);
void lw_cofactor_free(lw_cofactor *cofactor);

/** Q g of k vectors, columns x k, in place; before the factor is handed over only (dense: any time). */
lw_status lw_cofactor_apply(lw_cofactor *cofactor, int64_t k, double *g, lw_error *error);
/** Q e_j of k columns, columns x k. */
lw_status lw_cofactor_columns(lw_cofactor *cofactor, int64_t k, const int64_t *column, double *q,
                              lw_error *error);
/** Q A' f of k right-hand sides over the rows (whitened; f rows x k), columns x k; as above. The residual
 *  side f - A Q A' f (rows x k) goes to r unless NULL. */
lw_status lw_cofactor_project(lw_cofactor *cofactor, int64_t k, const double *f, double *r, double *z,
                              lw_error *error);
/** Makes the entries available. last: the decomposition's factor is handed over and overwritten. */
lw_status lw_cofactor_invert(lw_cofactor *cofactor, bool last, const lw_watch *watch, lw_error *error);
/** Will lw_cofactor_entry know Q_ij? */
bool lw_cofactor_holds(const lw_cofactor *cofactor, int64_t i, int64_t j);
/** Solves for entries (i, j) outside the pattern and keeps them; before the factor is handed over. Sorts
 *  the list in place. */
lw_status lw_cofactor_learn(lw_cofactor *cofactor, int64_t count, lw_learned *list, lw_error *error);
/** Q_ij after lw_cofactor_invert; NaN where it is not known (outside the pattern). Safe from several
 *  threads. */
double lw_cofactor_entry(const lw_cofactor *cofactor, int64_t i, int64_t j);

#endif
