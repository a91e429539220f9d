/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/pack_file.h"

#include "table/digest.h"

#define AT(field) offsetof(lw_problem, field)

const lw_pack_array lw_pack_arrays[] = {
    {"value", AT(value), LW_PACK_M, LW_PACK_FINITE, 0, AT(value_low)},
    {"value.low", AT(value_low), LW_PACK_M, LW_PACK_FINITE, 0, AT(value)},
    {"sigma", AT(sigma), LW_PACK_M, LW_PACK_POSITIVE, 0, AT(sigma_low)},
    {"sigma.low", AT(sigma_low), LW_PACK_M, LW_PACK_FINITE, 0, AT(sigma)},
    {"group", AT(group), LW_PACK_M, LW_PACK_LABEL, AT(group_names), AT(group_names)},
    {"prior", AT(prior), LW_PACK_N, LW_PACK_FINITE, 0, AT(prior_low)},
    {"prior.low", AT(prior_low), LW_PACK_N, LW_PACK_FINITE, 0, AT(prior)},
    {"prior_sigma", AT(prior_sigma), LW_PACK_N, LW_PACK_POSITIVE_OR_NAN, 0, AT(prior_sigma_low)},
    {"prior_sigma.low", AT(prior_sigma_low), LW_PACK_N, LW_PACK_FINITE_OR_NAN, 0, AT(prior_sigma)},
    {"fixed", AT(fixed), LW_PACK_N, LW_PACK_FLAG, 0, AT(fixed_value)},
    {"fixed_value", AT(fixed_value), LW_PACK_N, LW_PACK_FINITE, 0, AT(fixed_low)},
    {"fixed_value.low", AT(fixed_low), LW_PACK_N, LW_PACK_FINITE, 0, AT(fixed)},
    {"lower", AT(lower), LW_PACK_N, LW_PACK_NOT_NAN, 0, 0},
    {"upper", AT(upper), LW_PACK_N, LW_PACK_NOT_NAN, 0, 0},
    {"damp_weight", AT(damp_weight), LW_PACK_N, LW_PACK_NOT_NEGATIVE, 0, 0},
    {"datum", AT(datum), LW_PACK_N, LW_PACK_FLAG, 0, 0},
    {"axis", AT(axis), LW_PACK_N, LW_PACK_AXIS, 0, 0},
    {"point", AT(point), LW_PACK_N, LW_PACK_LABEL_OR_BLANK, AT(point_names), AT(point_names)},
    {"region", AT(region), LW_PACK_N, LW_PACK_LABEL_OR_BLANK, AT(region_names), AT(region_names)},
    {"x", AT(coordinate[0]), LW_PACK_N, LW_PACK_FINITE_OR_NAN, 0, 0},
    {"y", AT(coordinate[1]), LW_PACK_N, LW_PACK_FINITE_OR_NAN, 0, 0},
    {"z", AT(coordinate[2]), LW_PACK_N, LW_PACK_FINITE_OR_NAN, 0, 0},
    {"condition_value", AT(condition_value), LW_PACK_C, LW_PACK_FINITE, 0, AT(conditions)},
    {"condition_value.low", AT(condition_low), LW_PACK_C, LW_PACK_FINITE, 0, AT(condition_value)},
};
const int lw_pack_array_count = (int)(sizeof lw_pack_arrays / sizeof *lw_pack_arrays);

const lw_pack_member lw_pack_ids[LW_PACK_IDS] = {
    {"observations", AT(observations)},       {"parameters", AT(parameters)},
    {"group_names", AT(group_names)},         {"point_names", AT(point_names)},
    {"region_names", AT(region_names)},       {"penalty_rows", AT(penalty_rows)},
    {"condition_names", AT(condition_names)},
};
const lw_pack_member lw_pack_matrices[LW_PACK_MATRICES] = {
    {"design", AT(design)}, {"penalty", AT(penalty)}, {"conditions", AT(conditions)}};
const lw_pack_member lw_pack_carried[LW_PACK_CARRIED] = {{"with_observations", AT(observation_carried)},
                                                         {"with_parameters", AT(parameter_carried)}};

size_t lw_pack_element(lw_pack_rule rule)
{
    if (rule == LW_PACK_FLAG || rule == LW_PACK_AXIS) return 1;
    return rule == LW_PACK_LABEL || rule == LW_PACK_LABEL_OR_BLANK ? sizeof(int32_t) : sizeof(double);
}

int64_t lw_pack_count(lw_pack_length length, const lw_pack_sizes *sizes)
{
    return length == LW_PACK_M ? sizes->m : length == LW_PACK_N ? sizes->n : sizes->conditions;
}

uint64_t lw_pack_hash(const lw_pack_header *header, const lw_pack_section *table)
{
    lw_pack_header plain = *header;
    plain.hash = 0;
    uint64_t part[2] = {lw_hash(&plain, sizeof plain),
                        lw_hash(table, (size_t)header->sections * sizeof *table)};
    return lw_hash(part, sizeof part);
}
