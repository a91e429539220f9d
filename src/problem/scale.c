/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/scale.h"

#include "core/decimal.h"

static void multiply(double *high, double *low, int64_t i, double factor)
{
    lw_decimal value = lw_decimal_multiply((lw_decimal){high[i], low ? low[i] : 0.0}, lw_decimal_of(factor));
    high[i] = value.high;
    if (low) low[i] = value.low;
}

lw_status lw_problem_scale_sigma(lw_problem *problem, const char *group, size_t length, double factor,
                                 lw_error *error)
{
    int64_t wanted = -1;
    if (!problem->sigma)
        return lw_fail(error, LW_BAD_USAGE,
                       "--scale-sigma: the observations state no sigma that could be scaled");
    if (length > 0) {
        wanted = problem->group_names ? lw_ids_find(problem->group_names, group, length) : -1;
        if (wanted < 0)
            return lw_fail(error, LW_BAD_USAGE,
                           "--scale-sigma: found '%.*s', expected a group of the observations", (int)length,
                           group);
    }
    for (int64_t i = 0; i < problem->m; i++)
        if (length == 0 || problem->group[i] == wanted)
            multiply(problem->sigma, problem->sigma_low, i, factor);
    lw_covariance *covariance = problem->covariance;
    for (int64_t k = 0; covariance && k < covariance->blocks; k++) {
        int64_t first = covariance->start[k], size = covariance->start[k + 1] - first;
        for (int64_t a = 0; a < size; a++)
            for (int64_t b = 0; b < size; b++) {
                int64_t at = covariance->value_start[k] + a + b * size;
                for (int side = 0; side < 2; side++) {
                    int32_t row = covariance->member[first + (side ? b : a)];
                    if (length == 0 || problem->group[row] == wanted)
                        multiply(covariance->value, covariance->low, at, factor);
                }
            }
    }
    return LW_OK;
}
