/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The operator L of the penalty ||L (x - x0)||^2, in model units, rows x n parameters.
 *
 *  smallest   L = diag(damp_weight); n rows
 *  flattest   first differences:                   ||L x||^2 ~ integral of |grad m|^2 / V
 *  smoothest  second differences along each axis:  ||L x||^2 ~ integral of (m_xx^2 + m_yy^2 + m_zz^2) / V
 *  own        penalty.csv
 *
 *  Part in differences take the parameters that have every coordinate that any parameter has, and a
 *  damp_weight that is not 0; the others (a delay, an intercept) are left alone. Differences never cross from
 *  one region to another (a blank region is a region). V is a reference volume, the product of the mean
 *  spacings; s_a is the stretch of axis a.
 *
 *  A region is a grid when each of its cells has a neighbour along an axis, that is one that differs in one
 *  coordinate only and by one place in the sorted list of that coordinate's values (values closer than 1e-9
 *  of the range are one; the list is that of all regions, or, should the region be no grid on it, its own).
 *  Cells may be missing: nothing is differenced across a gap. h: spacing to the next value; w: width of a
 *  cell, half the distance between the values on both sides, at an end the one spacing:
 *
 *     flattest, i and j along a:     s_a sqrt(h_a w_b w_c / V) (m_j - m_i) / h_a
 *     smoothest, l, i, r along a:    s_a sqrt(w_a w_b w_c / V) 2 / (h_l + h_r)
 *                                      ((m_r - m_i) / h_r - (m_i - m_l) / h_l)
 *
 *  On a unit-spaced line the rows are (-1, 1) and (1, -2, 1).
 *
 *  Other regions are scattered points in d dimensions (axes with one value only are left out). Axes are
 *  stretched first, by 1/s_a for flattest and 1/sqrt(s_a) for smoothest. Nearest neighbours by a k-d tree, n
 *  log n; of two at the same distance the one with the smaller coordinates (x, then y, then z) comes first.
 *  With v_i = (mean distance of the 2d nearest)^d and h_ij the distance:
 *
 *     flattest   one row for each pair of which one is among the 2d nearest of the other:
 *                  sqrt((v_i + v_j) / (2 mean v)) (m_j - m_i) / h_ij
 *     smoothest  one row a point, from the value sum_j c_j m_j at i of the plane fitted to its 3d nearest
 *                (weights 1/h^2; more neighbours, up to 8d, until they span a plane; else no row):
 *                  sqrt(v_i / mean v) 2d / (sum_j c_j h_ij^2) (sum_j c_j m_j - m_i)
 *                which is the Laplacian of an isotropic quadratic, and (1, -2, 1) / h^2 on three in a line
 *
 *  The coefficients of a row sum to exactly zero (they are rounded to a common last bit), so a constant costs
 *  nothing; under smoothest a plane costs nothing up to rounding.
 *
 *  Sources: Constable, Parker & Constable, Geophysics 52:289-300, 1987 (first and second differences);
 *  Bentley, Comm. ACM 18(9):509-517, 1975 (k-d tree); Fornberg, Math. Comp. 51:699-706, 1988 (unequal
 *  spacing); Lancaster & Salkauskas, Math. Comp. 37:141-158, 1981 (weighted local fits). */
#ifndef LW_PROBLEM_PENALTY_H
#define LW_PROBLEM_PENALTY_H

#include "problem/problem.h"

typedef enum lw_penalty_kind {
    LW_PREFER_SMALLEST = 0,
    LW_PREFER_FLATTEST,
    LW_PREFER_SMOOTHEST,
    LW_PREFER_OWN
} lw_penalty_kind;

typedef struct lw_penalty_options {
    lw_penalty_kind prefer;
    double stretch[3];    /**< direction weights for x, y, z; 0 means 1 */
    double also_smallest; /**< share of the smallest penalty that is added, 0 none */
} lw_penalty_options;

/** The trade's word for a kind: "smallest", "flattest", ... */
const char *lw_penalty_name(lw_penalty_kind kind);
/** also_smallest appends the rows also_smallest * damp_weight_j x_j, where damp_weight_j > 0.
 *  L (rows x n) for flattest, smoothest, own, and for smallest as a diagonal matrix. LW_BAD_USAGE with the
 *  reason when the problem lacks coordinates or penalty.csv. */
lw_status lw_penalty_make(const lw_problem *problem, const lw_penalty_options *options, const lw_watch *watch,
                          lw_sparse **out, lw_error *error);

#endif
