/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Variance components: factors theta_k by which the stated variances of the groups are to be multiplied so
 *  that
 *
 *      q_k = e_k' P_k e_k  equals  r_k = redundancy of group k      in every group.
 *
 *  Iterated: theta <- theta (1 + S^-1 (q - r)) with the Helmert matrix S_kl = tr(E_k M E_l M), M = W Q_vv
 *  W', at the sigmas that stand; where a factor would not be positive, the almost unbiased step theta <-
 *  theta q / r instead. Standard deviations are those of normally distributed readings, theta_k sqrt(2
 *  (S^-1)_kk). Both steps have the same fixed point. S is exact up to LW_COMPONENT_EXACT rows, else from
 *  random signs (which changes the steps and the standard deviations, not the result). A group with a
 *  redundancy below 1 keeps its sigmas and gets no component.
 *  Sources: Horn, Horn & Duncan, J. Amer. Statist. Assoc. 70:380-385, 1975; Foerstner, zfv 104:446-453,
 *  1979; Koch, Parameter Estimation and Hypothesis Testing in Linear Models, 1999, 3.6. */
#ifndef LW_CERTAINTY_VARIANCE_COMPONENTS_H
#define LW_CERTAINTY_VARIANCE_COMPONENTS_H

#include "certainty/certainty.h"
#include "solve/engine.h"

#define LW_COMPONENT_EXACT 2000

typedef struct lw_variance_component {
    int32_t group; /**< as in lw_group_factor */
    int64_t observations;
    double component;  /**< factor of the stated variances; NaN not determined */
    double sigma;      /**< its standard deviation */
    double scale;      /**< sqrt(component): factor of the stated sigmas */
    double redundancy; /**< at the end */
} lw_variance_component;

typedef struct lw_variance_components {
    lw_variance_component *groups;
    int count;
    int iterations;
    bool converged; /**< no factor changed by more than 1e-9 of itself */
} lw_variance_components;
void lw_variance_components_free(lw_variance_components *components);

/** Undamped problems. most: iterations (0 = 50). LW_NOT_CONVERGED: the last iterate. Errors: LW_BAD_USAGE
 *  when the engine has no entries of the inverse; those of solving. */
lw_status lw_variance_components_estimate(const lw_problem *problem, const lw_system_options *system_options,
                                          const lw_solve_options *solve_options, int most,
                                          const lw_watch *watch, lw_variance_components **out,
                                          lw_error *error);
/** Copies component and component_sigma into the groups of a certainty. */
void lw_variance_components_attach(const lw_variance_components *components, lw_certainty *certainty);

#endif
