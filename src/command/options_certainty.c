/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/arguments.h"

#include "core/memory.h"

#include <string.h>

static lw_status set_variance(lw_arguments *arguments, const char *value, lw_error *error)
{
    static const char *const words[] = {"stated", "estimated", NULL};
    int word;
    lw_status status = lw_value_word("variance", value, words, &word, error);
    if (status == LW_OK) {
        arguments->certainty.variance_estimated = word == 1;
        arguments->variance_named = true;
    }
    return status;
}

static lw_status set_confidence(lw_arguments *arguments, const char *value, lw_error *error)
{
    return lw_value_double("confidence", value, 0.5, 0.999999, "a probability from 0.5 to 0.999999",
                           &arguments->certainty.confidence, error);
}

static lw_status set_alpha(lw_arguments *arguments, const char *value, lw_error *error)
{
    return lw_value_double("alpha", value, 1e-9, 0.5, "a probability from 1e-9 to 0.5",
                           &arguments->certainty.alpha, error);
}

static lw_status set_power(lw_arguments *arguments, const char *value, lw_error *error)
{
    return lw_value_double("power", value, 0.01, 0.999999, "a probability from 0.01 to 0.999999",
                           &arguments->certainty.power, error);
}

static lw_status set_sigma(lw_arguments *arguments, const char *value, lw_error *error)
{
    static const char *const words[] = {"noise", "posterior", "none", NULL};
    int word;
    lw_status status = lw_value_word("sigma", value, words, &word, error);
    if (status != LW_OK) return status;
    arguments->no_sigma = word == 2;
    arguments->sigma_named = true;
    arguments->certainty.meaning = word == 1 ? LW_MEANS_POSTERIOR : LW_MEANS_NOISE;
    return LW_OK;
}

static lw_status set_covariance_of(lw_arguments *arguments, const char *value, lw_error *error)
{
    (void)error;
    arguments->covariance_of = value;
    return LW_OK;
}

static lw_status set_resolution_of(lw_arguments *arguments, const char *value, lw_error *error)
{
    (void)error;
    arguments->resolution_of = value;
    return LW_OK;
}

#define SET_SWITCH(name)                                                                                     \
    static lw_status set_##name(lw_arguments *arguments, const char *value, lw_error *error)                 \
    {                                                                                                        \
        (void)value, (void)error;                                                                            \
        arguments->name = true;                                                                              \
        return LW_OK;                                                                                        \
    }
SET_SWITCH(search_outliers)
SET_SWITCH(variance_components)
SET_SWITCH(fail_on_reject)

const lw_option lw_certainty_option_table[] = {
    {"variance", "KIND", 0, LW_TAKES_CERTAINTY,
     "variance factor: stated (1; default where sigma was given) or estimated (s0^2)", set_variance},
    {"confidence", "P", 0, LW_TAKES_CERTAINTY, "of intervals, ellipses and the global test (default 0.95)",
     set_confidence},
    {"alpha", "P", 0, LW_TAKES_CERTAINTY,
     "level of the test of a single reading (default 0.001); the outlier search tests the whole family at 1 "
     "- confidence",
     set_alpha},
    {"power", "P", 0, LW_TAKES_CERTAINTY, "power of the test of a single reading (default 0.80)", set_power},
    {"sigma", "MEANING", 0, LW_TAKES_CERTAINTY,
     "with damping: noise (default: data noise carried through, bias not included), posterior (the penalty "
     "is a true prior), none (nor resolution); an iterative engine on more than 2000 parameters gives sigmas "
     "only where this is named",
     set_sigma},
    {"covariance-of", "FILE|all", 0, LW_TAKES_CERTAINTY,
     "write parameter_covariance.csv for the parameters listed in FILE, one a line", set_covariance_of},
    {"resolution-of", "LIST", 0, LW_TAKES_CERTAINTY,
     "write resolution.csv: rows of the resolution matrix for these parameters, a comma list",
     set_resolution_of},
    {"search-outliers", NULL, 0, LW_TAKES_NETWORK,
     "set the most significant reading aside, solve again, repeat; every step in outliers.csv",
     set_search_outliers},
    {"variance-components", NULL, 0, LW_TAKES_NETWORK,
     "estimate a variance factor for each group of observations", set_variance_components},
    {"fail-on-reject", NULL, 0, LW_TAKES_CERTAINTY, "exit 1 when the global test rejects",
     set_fail_on_reject},
    {0}};
