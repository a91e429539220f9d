/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/problem.h"

#include "core/memory.h"

#include <sys/mman.h>

const char *lw_carried_text(const lw_carried *carried, int64_t row, int column)
{
    int64_t at = carried->field[row * carried->columns + column];
    return at < 0 ? "" : carried->text + at;
}

static void carried_clear(lw_carried *carried)
{
    for (int c = 0; c < carried->columns && carried->name != NULL; c++) lw_free(carried->name[c]);
    lw_free(carried->name);
    lw_free(carried->text);
    lw_free(carried->field);
}

static void covariance_free(lw_covariance *covariance)
{
    if (covariance == NULL) return;
    lw_free(covariance->start);
    lw_free(covariance->value_start);
    lw_free(covariance->member);
    lw_free(covariance->value);
    lw_free(covariance->low);
    lw_free(covariance->block_of);
    lw_free(covariance);
}

static void free_observations(lw_problem *problem)
{
    lw_ids_free(problem->observations);
    lw_free(problem->value);
    lw_free(problem->value_low);
    lw_free(problem->sigma);
    lw_free(problem->sigma_low);
    lw_free(problem->group);
    lw_ids_free(problem->group_names);
    covariance_free(problem->covariance);
    carried_clear(&problem->observation_carried);
}

static void free_parameters(lw_problem *problem)
{
    lw_ids_free(problem->parameters);
    lw_free(problem->prior);
    lw_free(problem->prior_low);
    lw_free(problem->prior_sigma);
    lw_free(problem->prior_sigma_low);
    lw_free(problem->fixed);
    lw_free(problem->fixed_value);
    lw_free(problem->fixed_low);
    lw_free(problem->lower);
    lw_free(problem->upper);
    lw_free(problem->damp_weight);
    lw_free(problem->datum);
    lw_free(problem->point);
    lw_free(problem->region);
    lw_free(problem->axis);
    lw_ids_free(problem->point_names);
    lw_ids_free(problem->region_names);
    for (int k = 0; k < 3; k++) lw_free(problem->coordinate[k]);
    carried_clear(&problem->parameter_carried);
}

void lw_problem_free(lw_problem *problem)
{
    if (problem == NULL) return;
    free_observations(problem);
    free_parameters(problem);
    lw_sparse_free(problem->design);
    lw_sparse_free(problem->penalty);
    lw_ids_free(problem->penalty_rows);
    lw_sparse_free(problem->conditions);
    lw_free(problem->condition_value);
    lw_free(problem->condition_low);
    lw_ids_free(problem->condition_names);
    for (int k = 0; k < problem->input_count; k++) lw_free(problem->inputs[k].path);
    lw_free(problem->inputs);
    lw_free(problem->value_unit);
    lw_free(problem->parameter_unit);
    lw_free(problem->folder);
    if (problem->mapping != NULL) (void)munmap(problem->mapping, problem->mapping_bytes);
    lw_free(problem);
}
