/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/curve.h"

#include "core/memory.h"
#include "tradeoff/corner.h"
#include "tradeoff/gcv.h"
#include "tradeoff/risk.h"

#include <math.h>
#include <string.h>

static const char *const names[LW_CRITERIA] = {"corner", "gcv", "discrepancy", "risk"};

const char *lw_criterion_name(lw_criterion criterion)
{
    return (unsigned)criterion < LW_CRITERIA ? names[criterion] : "unknown";
}

bool lw_criterion_find(const char *name, lw_criterion *out)
{
    for (int i = 0; i < LW_CRITERIA; i++)
        if (strcmp(name, names[i]) == 0) {
            *out = (lw_criterion)i;
            return true;
        }
    return false;
}

void lw_curve_free(lw_curve *curve)
{
    if (curve == NULL) return;
    lw_free(curve->row);
    lw_free(curve);
}

const lw_choice *lw_curve_choice(const lw_curve *curve, lw_criterion criterion)
{
    for (int i = 0; i < curve->choices; i++)
        if (curve->choice[i].criterion == criterion) return &curve->choice[i];
    return NULL;
}

void lw_curve_row_fill(const lw_system *system, bool sigma_stated, const lw_point *point, lw_curve_row *out)
{
    double m = (double)system->observations_used;
    out->point = *point;
    out->gcv = lw_gcv_value(m, point);
    out->risk = sigma_stated ? lw_risk_value(m, point) : (double)NAN;
    out->curvature = lw_corner_curvature(point);
}
