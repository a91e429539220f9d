/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/arguments.h"

#include <stdio.h>
#include <string.h>

#define SET_TEXT(name, field)                                                                                \
    static lw_status set_##name(lw_arguments *arguments, const char *value, lw_error *error)                 \
    {                                                                                                        \
        (void)error;                                                                                         \
        arguments->field = value;                                                                            \
        return LW_OK;                                                                                        \
    }
SET_TEXT(design, read.design)
SET_TEXT(observations, read.observations)
SET_TEXT(parameters, read.parameters)
SET_TEXT(covariance, read.covariance)
SET_TEXT(penalty, read.penalty)
SET_TEXT(conditions, read.conditions)
SET_TEXT(value_unit, read.value_unit)
SET_TEXT(parameter_unit, read.parameter_unit)
SET_TEXT(out, out)

static lw_status set_repeated(lw_arguments *arguments, const char *value, lw_error *error)
{
    static const char *const words[] = {"refuse", "add", NULL};
    int word;
    lw_status status = lw_value_word("repeated", value, words, &word, error);
    if (status == LW_OK) arguments->read.add_repeated = word == 1;
    return status;
}

static lw_status set_scale_sigma(lw_arguments *arguments, const char *value, lw_error *error)
{
    const char *equals = strrchr(value, '=');
    if (!equals || arguments->scales == LW_MOST_SCALES)
        return lw_fail(error, LW_BAD_USAGE,
                       "--scale-sigma: found '%.60s', expected GROUP=FACTOR (at most %d times)", value,
                       LW_MOST_SCALES);
    double factor;
    lw_status status = lw_value_double("scale-sigma", equals + 1, 1e-12, 1e12,
                                       "GROUP=FACTOR with a positive factor", &factor, error);
    if (status != LW_OK) return status;
    arguments->scale_group[arguments->scales] = value;
    arguments->scale_factor[arguments->scales++] = factor;
    return LW_OK;
}

static lw_status set_overwrite(lw_arguments *arguments, const char *value, lw_error *error)
{
    (void)value, (void)error;
    arguments->overwrite = true;
    return LW_OK;
}

static lw_status set_quiet(lw_arguments *arguments, const char *value, lw_error *error)
{
    (void)value, (void)error;
    arguments->quiet = true;
    return LW_OK;
}

static lw_status set_threads(lw_arguments *arguments, const char *value, lw_error *error)
{
    int64_t number;
    lw_status status = lw_value_integer("threads", value, 1, 1024, &number, error);
    if (status == LW_OK) arguments->threads = (int)number;
    return status;
}

static lw_status set_memory(lw_arguments *arguments, const char *value, lw_error *error)
{
    return lw_value_memory("memory", value, &arguments->memory, error);
}

static lw_status set_seed(lw_arguments *arguments, const char *value, lw_error *error)
{
    int64_t number;
    lw_status status = lw_value_integer("seed", value, 0, INT64_C(1) << 53, &number, error);
    if (status == LW_OK) arguments->seed = (uint64_t)number;
    return status;
}

#define EVERY (LW_TAKES_FILES)
const lw_option lw_file_options[] = {
    {"design", "FILE", 0, EVERY, "design matrix, CSV or .mtx (default PROBLEM/design.csv or design.mtx)",
     set_design},
    {"observations", "FILE", 0, EVERY, "observations (default PROBLEM/observations.csv)", set_observations},
    {"parameters", "FILE", 0, EVERY, "parameters (default PROBLEM/parameters.csv, if it is there)",
     set_parameters},
    {"covariance", "FILE", 0, EVERY,
     "covariances of correlated observations (default PROBLEM/covariance.csv)", set_covariance},
    {"penalty", "FILE", 0, EVERY, "own penalty operator L (default PROBLEM/penalty.csv)", set_penalty},
    {"conditions", "FILE", 0, EVERY, "exact conditions (default PROBLEM/conditions.csv)", set_conditions},
    {"repeated", "refuse|add", 0, EVERY,
     "a repeated (observation, parameter) pair: refuse (default), or add the coefficients", set_repeated},
    {"value-unit", "TEXT", 0, EVERY, "unit of the observations, printed and never interpreted",
     set_value_unit},
    {"parameter-unit", "TEXT", 0, EVERY, "unit of the parameters, printed and never interpreted",
     set_parameter_unit},
    {"scale-sigma", "GROUP=FACTOR", 0, EVERY,
     "multiply the stated sigmas of a group (all observations: =FACTOR); may be given again",
     set_scale_sigma},
    {0}};

const lw_option lw_run_options[] = {
    {"out", "DIR", 'o', LW_TAKES_RUN, "the run folder (default PROBLEM-COMMAND)", set_out},
    {"overwrite", NULL, 0, LW_TAKES_RUN, "replace a run that exists", set_overwrite},
    {"threads", "N", 0, LW_TAKES_MACHINE,
     "threads (default: all processors); the results are the same for any number", set_threads},
    {"memory", "SIZE", 0, LW_TAKES_MACHINE, "memory that the work may take, like 512M or 8G (default 4G)",
     set_memory},
    {"seed", "N", 0, LW_TAKES_MACHINE, "seed of everything random; printed in the report (default 20260401)",
     set_seed},
    {"quiet", NULL, 0, LW_TAKES_MACHINE, "no progress and no verdict on the terminal", set_quiet},
    {0}};
