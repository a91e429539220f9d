/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The null space of a sparse penalty: what ||L x|| does not see, component by component of its graph.
 *
 *  A component is a set of columns that rows tie together; a column without entries is one by itself, and its
 *  unit vector a null vector. In the others first the multilinear polynomials 1, x, y, z, xy, ... of the
 *  coordinates are tried (they hold the null space of first and second differences on grids and between
 *  points), then, when `thorough`, a block inverse iteration on L'L + shift. Either way a trial space X of
 *  orthonormal columns is reduced by the singular values of L X: those below 1e-10 of the component's largest
 *  column norm are null (Rayleigh-Ritz).
 *
 *  Pins: d columns on which the null vectors are well conditioned (column pivoting on N'), so that L without
 *  them has full rank. Source: Bjorck, Numerical Methods for Least Squares Problems, SIAM 1996, 2.7. */
#ifndef LW_SOLVE_STANDARD_NULL_H
#define LW_SOLVE_STANDARD_NULL_H

#include "core/log.h"
#include "core/watch.h"
#include "problem/system.h"

typedef struct lw_penalty_null {
    int64_t defect;
    lw_sparse *basis; /**< columns x defect, in the coordinates of L; orthonormal within a component */
    int64_t *pin;     /**< defect */
} lw_penalty_null;

/** L: rows x columns of the system, in model units. LW_QUALIFIED, and nothing found, when there are more than
 *  `most` null vectors or the search does not fit the memory. */
lw_status lw_penalty_null_find(const lw_system *system, const lw_sparse *L, int thorough, int64_t most,
                               const lw_watch *watch, lw_penalty_null *out, lw_error *error);
void lw_penalty_null_clear(lw_penalty_null *null);

/** The components themselves. */
typedef struct lw_penalty_graph {
    int64_t count;
    int64_t *column_start,
        *column;              /**< columns of component c: column[column_start[c] .. column_start[c+1]-1] */
    int64_t *row_start, *row; /**< the same for rows; rows without entries are left out */
    double *norm;             /**< largest column norm of each */
} lw_penalty_graph;
lw_status lw_penalty_graph_make(const lw_sparse *L, lw_penalty_graph *out, lw_error *error);
void lw_penalty_graph_clear(lw_penalty_graph *graph);

/** Fills the trial space (columns x q). *q on entry the room. */
lw_status lw_penalty_trial_polynomials(const lw_system *system, const lw_penalty_graph *graph, int *q,
                                       double *X, lw_error *error);
lw_status lw_penalty_trial_inverse(const lw_sparse *L, const lw_penalty_graph *graph, int q,
                                   const lw_watch *watch, double *X, lw_error *error);
/** Makes the columns of X orthonormal within component c; the rank. Columns beyond the rank become zero. */
lw_status lw_penalty_orthonormal(const lw_penalty_graph *graph, int64_t c, int64_t columns, int q, double *X,
                                 int *rank, lw_error *error);

/** Warns when the data hardly determine the `directions` that the penalty leaves alone: the reciprocal
 * condition of A N (columns of length 1) is below 1e-5, and parameters run away along them at any damping. */
void lw_standard_warn(lw_log *log, int64_t directions, double rcond);

#endif
