/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Rank defects: finding null vectors, saying in words what they are, and the free datum.
 *
 *  Free datum: minimise sum over the datum parameters of (x - x0)^2 among all least-squares solutions. With M
 * G = 0, D = diag(scale^2 of datum columns, else 0) and G'DG = I: z_free = S z,  S = I - G T,  T = G'D;
 * Q_free = S Q S' Source: Baarda, S-transformations and criterion matrices, Netherlands Geodetic Commission
 * 5(1), 1973; Teunissen, Zero order design: generalized inverses, adjustment, the datum problem and
 * S-transformations, 1985. */
#ifndef LW_SOLVE_DATUM_H
#define LW_SOLVE_DATUM_H

#include "core/watch.h"
#include "matrix/suitesparse.h"
#include "solve/decomposition.h"

typedef struct lw_datum {
    lw_null_space space;
    double *weight; /**< columns x defect: T' = D G; NULL: not free (conditions define the datum) */
} lw_datum;

struct lw_direct;

/** Connected components of the graph of columns that share a row of M: of_column (columns), sizes not
 * counted. */
lw_status lw_datum_components(const lw_sparse *M, int32_t *of_column, int64_t *count, lw_error *error);

#define LW_DATUM_VECTORS 8 /**< most null vectors of one component that the search can tell */

/** Null vectors of M by block inverse iteration with a shifted factor of N = M'M (pattern as analysed in
 * `factor`, whose numbers are overwritten): every component has its own Rayleigh-Ritz step, all share the
 * solves. basis: columns x LW_DATUM_VECTORS, orthonormal in each component, unused places zero (owned by the
 * caller; NULL when defect 0); of_column: components; *full: a component has LW_DATUM_VECTORS or more. ||M
 * v|| < 1e-8 makes a candidate. Source: Parlett, The Symmetric Eigenvalue Problem, SIAM 1998, chapters 4
 * and 11. */
lw_status lw_datum_search(const lw_sparse *M, const lw_sparse *N, lw_cholesky *factor, const lw_watch *watch,
                          int32_t *of_column, int64_t *components, double **basis, int64_t *defect, int *full,
                          lw_error *error);
/** Largest ||M v|| / ||v|| of a null vector (the columns of M have norms near 1). */
#define LW_DATUM_TOLERANCE 1e-11
/** Proves the candidates with a factor in which as many columns are held (it stands afterwards, with
 * datum.space.held, when all are confirmed): packed becomes accurate, *defect what was confirmed. */
lw_status lw_datum_confirm(struct lw_direct *direct, double lambda, const lw_sparse *M,
                           const int32_t *of_column, int64_t components, double *packed, int64_t *defect,
                           const lw_watch *watch, lw_error *error);
/** One vector a null direction, from the packed basis of the search: columns x defect. */
lw_status lw_datum_expand(int64_t columns, const int32_t *of_column, const double *packed, int64_t defect,
                          const lw_watch *watch, double **basis, lw_error *error);

/** LW_UNSOLVABLE with an explanation in words: how many defects in which component, which parameters take
 * part (up to 10 named), what would fix it. basis: columns x vectors, orthonormal in each component. */
lw_status lw_datum_explain(const struct lw_direct *direct, double lambda, int64_t vectors,
                           const double *basis, lw_error *error);
/** Holds columns (chosen by pivoting on the basis) and factors anew, unless lw_datum_confirm has done so, and
 * makes accurate null vectors G with G_held = I. LW_NOT_CONVERGED: they are none. */
lw_status lw_datum_hold(struct lw_direct *direct, double lambda, const double *basis, int64_t defect,
                        const lw_watch *watch, lw_error *error);
/** Frees the datum that is held: makes G'DG = I, and T. LW_UNSOLVABLE: the datum parameters do not define it.
 */
lw_status lw_datum_free(struct lw_direct *direct, lw_error *error);
/** z <- S z and g <- S' g for k vectors. */
void lw_datum_project(const lw_datum *datum, int64_t k, double *z);
void lw_datum_project_transposed(const lw_datum *datum, int64_t k, double *g);
void lw_datum_clear(lw_datum *datum);

#endif
