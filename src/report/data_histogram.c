/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/data.h"

#include "core/decimal.h"

#include <math.h>
#include <string.h>

bool lw_report_row_used(const lw_run *run, int64_t row)
{
    return !(run->system && run->system->row_factor && run->system->row_factor[row] == 0.0);
}

double lw_report_row_sigma(const lw_run *run, int64_t row)
{
    const lw_problem *problem = run->problem;
    if (row >= problem->m)
        return problem->prior_sigma ? problem->prior_sigma[run->system->prior_parameter[row - problem->m]]
                                    : LW_UNKNOWN;
    return problem->sigma ? problem->sigma[row] : 1.0;
}

/* s0 = sqrt(chi_square / (m - effective_parameters)) where the variance factor is estimated, else 1. */
double lw_report_scale(const lw_run *run, double chi_square, double effective_parameters)
{
    if (!run->variance_estimated) return 1.0;
    double used = run->system ? (double)run->system->rows_used : (double)run->problem->m;
    double freedom = used - (isnan(effective_parameters) ? 0.0 : effective_parameters);
    double s0 = freedom > 0.0 ? sqrt(chi_square / freedom) : 1.0;
    return s0 > 0.0 ? s0 : 1.0;
}

void lw_report_histogram(const lw_run *run, const double *residual, double s0, int64_t counts[LW_BINS + 2])
{
    memset(counts, 0, (LW_BINS + 2) * sizeof counts[0]);
    for (int64_t i = 0; i < run->problem->m; i++) {
        if (!lw_report_row_used(run, i)) continue;
        double place = (residual[i] / (s0 * lw_report_row_sigma(run, i)) - LW_BIN_LOW) / LW_BIN_WIDTH;
        if (place < 0.0)
            counts[0]++;
        else if (place >= (double)LW_BINS)
            counts[LW_BINS + 1]++;
        else if (!isnan(place))
            counts[1 + (int)place]++;
    }
}
