/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Variance factors by group: sum of e_i (P e)_i over the group, divided by the redundancy that the group has.
 * Source: Foerstner, zfv 104:446-453, 1979. */
#include "certainty/part.h"
#include "core/memory.h"

#include <math.h>

int64_t lw_group_slots(const lw_system *system)
{
    return (system->problem->group_names ? lw_ids_count(system->problem->group_names) : 0) + 2;
}

int64_t lw_group_slot(const lw_system *system, int64_t i)
{
    int64_t slots = lw_group_slots(system);
    const int32_t *group = system->problem->group;
    if (i >= system->observations) return slots - 1;
    return group && group[i] >= 0 ? group[i] : slots - 2;
}

lw_status lw_group_factors_make(lw_certainty_work *w, lw_error *error)
{
    const lw_system *system = w->system;
    int64_t named = lw_group_slots(system) - 2;
    lw_group_factor *slot = LW_NEW_ZEROS(lw_group_factor, named + 2);
    if (!slot) return lw_fail_memory(error, "variance factors", (size_t)named * sizeof *slot);
    for (int64_t i = 0; i < system->rows; i++) {
        if (system->row_factor && system->row_factor[i] == 0) continue;
        lw_group_factor *g = slot + lw_group_slot(system, i);
        g->observations++;
        g->chi_square += w->estimate->residual[i] * w->estimate->weighted[i];
        g->redundancy += w->redundancy ? w->redundancy->redundancy[i] : (double)NAN;
    }
    int count = 0;
    for (int64_t k = 0; k < named + 2; k++) {
        if (slot[k].observations == 0) continue;
        slot[k].group = k < named ? (int32_t)k : (k == named ? -2 : -1);
        slot[k].factor = slot[k].redundancy > 1e-9 ? slot[k].chi_square / slot[k].redundancy : (double)NAN;
        slot[k].component = slot[k].component_sigma = (double)NAN;
        slot[count++] = slot[k];
    }
    w->out->groups = slot;
    w->out->group_count = count;
    return LW_OK;
}
