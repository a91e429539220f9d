/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/arguments.h"

#include "core/memory.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const char *const damping_words[] = {"none", "corner", "gcv", "discrepancy", "risk", NULL};
static const lw_damping_choice damping_choices[] = {LW_DAMPING_NONE, LW_DAMPING_CORNER, LW_DAMPING_GCV,
                                                    LW_DAMPING_DISCREPANCY, LW_DAMPING_RISK};

const char *lw_damping_choice_name(lw_damping_choice choice)
{
    if (choice == LW_DAMPING_VALUE) return "value";
    for (int i = 0; damping_words[i]; i++)
        if (damping_choices[i] == choice) return damping_words[i];
    return "none";
}

static lw_status set_damping(lw_arguments *arguments, const char *value, lw_error *error)
{
    for (int i = 0; damping_words[i]; i++)
        if (strcmp(value, damping_words[i]) == 0) {
            arguments->damping = damping_choices[i];
            return LW_OK;
        }
    lw_status status =
        lw_value_double("damping", value, 0.0, 1e300,
                        "a number >= 0 (lambda, not its square), none, corner, gcv, discrepancy or risk",
                        &arguments->damping_value, error);
    if (status == LW_OK)
        arguments->damping = arguments->damping_value > 0.0 ? LW_DAMPING_VALUE : LW_DAMPING_NONE;
    return status;
}

#define GRID_EXPECTED                                                                                        \
    "FROM:TO:COUNT with positive dampings and 3 or more of them, or a comma list of positive dampings"

static lw_status set_grid_list(lw_arguments *arguments, char *text, lw_error *error)
{
    int count = 1;
    for (const char *c = text; *c; c++) count += *c == ',';
    lw_free(arguments->grid_list);
    arguments->grid_list = LW_NEW_ARRAY(double, count);
    if (!arguments->grid_list) return lw_fail_memory(error, "the dampings", (size_t)count * sizeof(double));
    arguments->grid_count = 0;
    for (char *part = text, *next; part; part = next) {
        next = strchr(part, ',');
        if (next) *next++ = '\0';
        double value;
        lw_status status = lw_value_double("dampings", part, 1e-300, 1e300, GRID_EXPECTED, &value, error);
        if (status != LW_OK) return status;
        for (int i = 0; i < arguments->grid_count; i++)
            if (arguments->grid_list[i] == value)
                return lw_fail(error, LW_BAD_USAGE, "--dampings: found %s twice, expected each damping once",
                               part);
        arguments->grid_list[arguments->grid_count++] = value;
    }
    return LW_OK;
}

static lw_status set_dampings(lw_arguments *arguments, const char *value, lw_error *error)
{
    char text[4096];
    if (strlen(value) >= sizeof text)
        return lw_fail(error, LW_BAD_USAGE, "--dampings: too long, expected " GRID_EXPECTED);
    strcpy(text, value);
    char *first = strchr(text, ':');
    if (!first) return set_grid_list(arguments, text, error);
    *first++ = '\0';
    char *second = strchr(first, ':');
    if (!second)
        return lw_fail(error, LW_BAD_USAGE, "--dampings: found '%.60s', expected " GRID_EXPECTED, value);
    *second++ = '\0';
    int64_t count;
    lw_status status =
        lw_value_double("dampings", text, 1e-300, 1e300, GRID_EXPECTED, &arguments->grid_from, error);
    if (status == LW_OK)
        status = lw_value_double("dampings", first, 1e-300, 1e300, GRID_EXPECTED, &arguments->grid_to, error);
    if (status == LW_OK) status = lw_value_integer("dampings", second, 3, 10000, &count, error);
    if (status != LW_OK) return status;
    if (arguments->grid_from == arguments->grid_to)
        return lw_fail(error, LW_BAD_USAGE, "--dampings: FROM and TO are the same, expected " GRID_EXPECTED);
    arguments->grid_count = (int)count;
    return LW_OK;
}

static lw_status set_criteria(lw_arguments *arguments, const char *value, lw_error *error)
{
    const char *words[LW_CRITERIA + 1] = {0};
    for (int i = 0; i < LW_CRITERIA; i++) words[i] = lw_criterion_name((lw_criterion)i);
    char text[100];
    if (strlen(value) >= sizeof text) return lw_fail(error, LW_BAD_USAGE, "--criteria: too long");
    strcpy(text, value);
    arguments->criteria = 0;
    for (char *part = text, *next; part; part = next) {
        next = strchr(part, ',');
        if (next) *next++ = '\0';
        int word;
        lw_status status = lw_value_word("criteria", part, words, &word, error);
        if (status != LW_OK) return status;
        arguments->criteria |= 1u << word;
    }
    return LW_OK;
}

static lw_status set_prefer(lw_arguments *arguments, const char *value, lw_error *error)
{
    static const char *const words[] = {"smallest", "flattest", "smoothest", "own", NULL};
    int word;
    lw_status status = lw_value_word("prefer", value, words, &word, error);
    if (status == LW_OK) arguments->penalty.prefer = (lw_penalty_kind)word;
    return status;
}

static lw_status set_stretch(lw_arguments *arguments, const char *value, lw_error *error)
{
    char text[200];
    if (strlen(value) >= sizeof text) return lw_fail(error, LW_BAD_USAGE, "--stretch: too long");
    strcpy(text, value);
    for (char *part = text, *next; part; part = next) {
        next = strchr(part, ',');
        if (next) *next++ = '\0';
        if (part[0] < 'x' || part[0] > 'z' || part[1] != '=')
            return lw_fail(error, LW_BAD_USAGE, "--stretch: found '%.40s', expected like x=2,z=1", part);
        lw_status status = lw_value_double("stretch", part + 2, 1e-9, 1e9, "a positive weight, like x=2,z=1",
                                           &arguments->penalty.stretch[part[0] - 'x'], error);
        if (status != LW_OK) return status;
    }
    return LW_OK;
}

static lw_status set_also_smallest(lw_arguments *arguments, const char *value, lw_error *error)
{
    return lw_value_double("also-smallest", value, 0.0, 1e9, "a share >= 0 of the smallest penalty",
                           &arguments->penalty.also_smallest, error);
}

static lw_status set_noise_factor(lw_arguments *arguments, const char *value, lw_error *error)
{
    return lw_value_double("noise-factor", value, 1e-6, 1e6, "a positive factor", &arguments->noise_factor,
                           error);
}

static lw_status set_misfit(lw_arguments *arguments, const char *value, lw_error *error)
{
    static const char *const words[] = {"squares", "huber", "l1", NULL};
    int word;
    lw_status status = lw_value_word("misfit", value, words, &word, error);
    if (status == LW_OK) arguments->misfit = (lw_misfit_kind)word;
    return status;
}

static lw_status set_models(lw_arguments *arguments, const char *value, lw_error *error)
{
    static const char *const words[] = {"all", "chosen", "none", NULL};
    int word;
    lw_status status = lw_value_word("models", value, words, &word, error);
    if (status == LW_OK) arguments->models = (lw_models_wanted)word;
    return status;
}

static lw_status set_vtk(lw_arguments *arguments, const char *value, lw_error *error)
{
    (void)value, (void)error;
    arguments->vtk = true;
    return LW_OK;
}

static lw_status set_engine(lw_arguments *arguments, const char *value, lw_error *error)
{
    const char *words[16] = {"auto"};
    const lw_engine *table = lw_engine_table();
    int count = 1;
    for (; table[count - 1].name && count < 15; count++) words[count] = table[count - 1].name;
    int word;
    lw_status status = lw_value_word("engine", value, words, &word, error);
    if (status == LW_OK) {
        arguments->solve.engine = word == 0 ? "auto" : table[word - 1].name;
        arguments->engine_named = word != 0;
    }
    return status;
}

static lw_status set_steps(lw_arguments *arguments, const char *value, lw_error *error)
{
    return lw_value_integer("steps", value, 1, 1000000000, &arguments->solve.steps, error);
}

static lw_status set_storage(lw_arguments *arguments, const char *value, lw_error *error)
{
    static const char *const words[] = {"double", "single", NULL};
    int word;
    lw_status status = lw_value_word("storage", value, words, &word, error);
    if (status == LW_OK) arguments->solve.storage = (lw_storage)word;
    return status;
}

static lw_status set_tolerance(lw_arguments *arguments, const char *value, lw_error *error)
{
    return lw_value_double("tolerance", value, 1e-15, 0.5, "a relative error between 1e-15 and 0.5",
                           &arguments->solve.tolerance, error);
}

static lw_status set_datum(lw_arguments *arguments, const char *value, lw_error *error)
{
    static const char *const words[] = {"fixed", "free", NULL};
    int word;
    lw_status status = lw_value_word("datum", value, words, &word, error);
    if (status == LW_OK) arguments->solve.datum_free = word;
    return status;
}

#define SOLVING (LW_TAKES_MODEL)
const lw_option lw_model_options[] = {
    {"damping", "VALUE|CRITERION", 0, SOLVING | LW_TAKES_SWEEP,
     "lambda of the objective (never its square), none (default), or a criterion that chooses it: corner, "
     "gcv, discrepancy, risk; "
     "sweep: which model is written (default: what the criteria choose)",
     set_damping},
    {"dampings", "FROM:TO:COUNT|LIST", 0, SOLVING | LW_TAKES_SWEEP,
     "dampings of the sweep: logarithmic, or a comma list (default 60 that the problem determines)",
     set_dampings},
    {"criteria", "LIST", 0, LW_TAKES_SWEEP, "which of corner,gcv,discrepancy,risk (default: all that apply)",
     set_criteria},
    {"prefer", "KIND", 0, SOLVING | LW_TAKES_SWEEP,
     "what the penalty prefers: smallest (default), flattest, smoothest, own", set_prefer},
    {"stretch", "x=A,y=B,z=C", 0, SOLVING | LW_TAKES_SWEEP, "direction weights of the differences",
     set_stretch},
    {"also-smallest", "FRACTION", 0, SOLVING | LW_TAKES_SWEEP, "add a share of the smallest penalty",
     set_also_smallest},
    {"noise-factor", "F", 0, SOLVING | LW_TAKES_SWEEP,
     "scales the target of the discrepancy criterion: chi-square = F^2 m (default 1)", set_noise_factor},
    {"misfit", "KIND", 0, LW_TAKES_NETWORK, "squares (default), huber or l1: how large residuals count",
     set_misfit},
    {"models", "WHICH", 0, LW_TAKES_SWEEP,
     "which models of the sweep are written to models.csv: all (default), chosen, none", set_models},
    {"vtk", NULL, 0, LW_TAKES_CERTAINTY,
     "also write model.vtk (legacy text) for 3-D viewers; needs coordinates", set_vtk},
    {"engine", "NAME", 0, LW_TAKES_ENGINE, "auto (default), dense, cholesky, qr, lsqr, cgls, lsmr",
     set_engine},
    {"steps", "N", 0, LW_TAKES_ENGINE, "most steps of an iterative engine (default from the sizes)",
     set_steps},
    {"storage", "KIND", 0, LW_TAKES_ENGINE,
     "how an iterative engine keeps the coefficients: double (default) or single", set_storage},
    {"tolerance", "T", 0, LW_TAKES_ENGINE,
     "relative error of the model at which an iterative engine stops (default 1e-6)", set_tolerance},
    {"datum", "KIND", 0, LW_TAKES_MODEL,
     "fixed (default), or free: minimise the corrections of the datum parameters", set_datum},
    {0}};
