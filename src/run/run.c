/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/run.h"
#include "core/decimal.h"

#include "core/memory.h"
#include "matrix/vector.h"

#include <math.h>

const char *lw_run_objective(void)
{
    return "minimise (A x - b)' P (A x - b) + lambda^2 ||L (x - x0)||^2, P = inverse covariance of the "
           "observations; "
           "residual = predicted - observed";
}

/* rms = sqrt(sum v_i^2 / m) over the observations used;
 * variance reduction = 1 - ||W (A x - b)||^2 / ||W (A x0 - b)||^2, the same observations. */
lw_status lw_run_measure(lw_run *run, lw_error *error)
{
    const lw_system *system = run->system;
    const lw_estimate *estimate = run->estimate;
    run->rms = run->variance_reduction = LW_UNKNOWN;
    if (!system || !estimate) return LW_OK;
    double sum = 0.0, start = 0.0;
    int64_t used = 0;
    for (int64_t i = 0; i < system->observations; i++) {
        if (system->row_factor && system->row_factor[i] == 0.0) continue;
        sum += estimate->residual[i] * estimate->residual[i];
        start += system->b[i] * system->b[i];
        used++;
    }
    if (used > 0) run->rms = sqrt(sum / (double)used);
    if (start > 0.0) run->variance_reduction = 1.0 - estimate->point.misfit * estimate->point.misfit / start;
    (void)error;
    return LW_OK;
}
