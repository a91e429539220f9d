/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/arguments.h"

#include <string.h>

static lw_status set_pattern(lw_arguments *arguments, const char *value, lw_error *error)
{
    (void)error;
    if (strcmp(value, "spikes") == 0)
        arguments->pattern = LW_PATTERN_SPIKES;
    else if (strcmp(value, "checker") == 0)
        arguments->pattern = LW_PATTERN_CHECKER;
    else {
        arguments->pattern = LW_PATTERN_FILE;
        arguments->pattern_file = value;
    }
    return LW_OK;
}

static lw_status set_sizes(lw_arguments *arguments, const char *value, lw_error *error)
{
    char text[400];
    if (strlen(value) >= sizeof text) return lw_fail(error, LW_BAD_USAGE, "--sizes: too long");
    strcpy(text, value);
    arguments->pattern_sizes = 0;
    for (char *part = text, *next; part; part = next) {
        next = strchr(part, ',');
        if (next) *next++ = '\0';
        if (arguments->pattern_sizes == LW_MOST_SIZES)
            return lw_fail(error, LW_BAD_USAGE, "--sizes: more than %d sizes", LW_MOST_SIZES);
        lw_status status = lw_value_double("sizes", part, 1e-9, 1e12, "positive sizes, a comma list",
                                           &arguments->pattern_size[arguments->pattern_sizes++], error);
        if (status != LW_OK) return status;
    }
    return LW_OK;
}

static lw_status set_size_unit(lw_arguments *arguments, const char *value, lw_error *error)
{
    static const char *const words[] = {"cells", "length", NULL};
    int word;
    lw_status status = lw_value_word("size-unit", value, words, &word, error);
    if (status == LW_OK) arguments->pattern_in_units = word == 1;
    return status;
}

static lw_status set_amplitude(lw_arguments *arguments, const char *value, lw_error *error)
{
    return lw_value_double("amplitude", value, 1e-12, 1e12,
                           "a positive amplitude in the unit of the parameters",
                           &arguments->pattern_amplitude, error);
}

static lw_status set_trials(lw_arguments *arguments, const char *value, lw_error *error)
{
    int64_t number;
    lw_status status = lw_value_integer("trials", value, 2, 100000, &number, error);
    if (status == LW_OK) arguments->trials = (int)number;
    return status;
}

static lw_status set_bootstrap(lw_arguments *arguments, const char *value, lw_error *error)
{
    (void)value, (void)error;
    arguments->bootstrap = true;
    return LW_OK;
}

const lw_option lw_probe_options[] = {
    {"pattern", "spikes|checker|FILE", 0, LW_TAKES_PROBE,
     "input pattern: checker (default), spikes, or a CSV file parameter,value", set_pattern},
    {"sizes", "LIST", 0, LW_TAKES_PROBE,
     "sizes of the checkers or spacings of the spikes (default 2,4 cells)", set_sizes},
    {"size-unit", "cells|length", 0, LW_TAKES_PROBE,
     "what --sizes counts: cells (default) or units of the coordinates", set_size_unit},
    {"amplitude", "A", 0, LW_TAKES_PROBE,
     "amplitude of the pattern, in the unit of the parameters (default 5 % of the median prior, or the rms "
     "of the real model)",
     set_amplitude},
    {"trials", "N", 0, LW_TAKES_PROBE,
     "noise trials: spread of the estimate over N draws of the stated noise", set_trials},
    {"bootstrap", NULL, 0, LW_TAKES_PROBE,
     "draw the trials by resampling the observations within their groups", set_bootstrap},
    {0}};
