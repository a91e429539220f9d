/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Connected components of the graph of observations and parameters (union-find over the design; fixed
 * parameters do not connect, for they are constants). */
#ifndef LW_PROBLEM_COMPONENT_H
#define LW_PROBLEM_COMPONENT_H

#include "problem/problem.h"

typedef struct lw_components {
    int64_t count;           /**< components with at least one free parameter */
    int32_t *of_parameter;   /**< n: component, -1 for fixed parameters */
    int32_t *of_observation; /**< m: component, -1 where an observation touches no free parameter */
    int64_t *parameters, *observations; /**< count: how many of each */
} lw_components;

lw_status lw_components_find(const lw_problem *problem, lw_components *out, lw_error *error);
void lw_components_clear(lw_components *components);

#endif
