/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A problem folder: which files there are, and the order in which they are read. */
#include "problem/read.h"

#include "core/memory.h"
#include "problem/pack.h"

#include <errno.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>

enum { OBSERVATIONS, PARAMETERS, DESIGN, COVARIANCE, PENALTY, CONDITIONS, FILES };

static const char *const usual_name[FILES] = {"observations.csv", "parameters.csv", "design.csv",
                                              "covariance.csv",   "penalty.csv",    "conditions.csv"};

static bool exists(const char *path)
{
    struct stat about;
    return stat(path, &about) == 0 || errno != ENOENT;
}

static bool ends_with(const char *text, const char *end)
{
    size_t length = strlen(text), more = strlen(end);
    return length >= more && strcmp(text + length - more, end) == 0;
}

char *lw_join_path(const char *folder, const char *name)
{
    size_t length = strlen(folder);
    while (length > 1 && folder[length - 1] == '/') length--;
    size_t bytes = length + strlen(name) + 2;
    char *path = LW_NEW_ARRAY(char, bytes);
    if (path != NULL)
        (void)snprintf(path, bytes, "%.*s%s%s", (int)length, folder, folder[length - 1] == '/' ? "" : "/",
                       name);
    return path;
}

static void refuse_missing(lw_reading *reading, const char *path, const char *what)
{
    lw_reading_fault(reading, "%s:1:1: found no such file, expected %s", path, what);
}

/* design.csv, or design.mtx when there is no design.csv. */
static lw_status find_design(lw_reading *reading, const char *folder, char **path)
{
    char *market = lw_join_path(folder, "design.mtx");
    if (market == NULL) return lw_fail_memory(reading->error, "a path", strlen(folder));
    bool both = exists(*path) && exists(market);
    if (both) lw_reading_fault(reading, "%s:1:1: found beside design.csv, expected one of the two", market);
    if (!exists(*path) && exists(market)) {
        lw_free(*path);
        *path = market;
        return LW_OK;
    }
    lw_free(market);
    return LW_OK;
}

/* Paths of all files; NULL where an optional one is absent. */
static lw_status find_files(lw_reading *reading, const char *folder, char *path[FILES])
{
    const lw_read_options *o = reading->options;
    const char *named[FILES] = {o->observations, o->parameters, o->design,
                                o->covariance,   o->penalty,    o->conditions};
    static const char *const expected[FILES] = {
        "the observations (observation,value[,sigma][,group])",
        "the parameters",
        "the design (observation,parameter,coefficient), as design.csv or design.mtx",
        "the covariances",
        "the rows of the penalty",
        "the conditions"};
    for (int k = 0; k < FILES; k++) {
        path[k] = named[k] != NULL ? lw_copy_text(named[k]) : lw_join_path(folder, usual_name[k]);
        if (path[k] == NULL) return lw_fail_memory(reading->error, "a path", strlen(folder));
        if (k == DESIGN && named[k] == NULL) {
            lw_status status = find_design(reading, folder, path + k);
            if (status != LW_OK) return status;
        }
        if (exists(path[k])) continue;
        if (k == OBSERVATIONS || k == DESIGN || named[k] != NULL)
            refuse_missing(reading, path[k], expected[k]);
        lw_free(path[k]);
        path[k] = NULL;
    }
    return LW_OK;
}

static lw_status start(lw_reading *reading, const char *folder)
{
    lw_problem *problem = reading->problem;
    const lw_read_options *options = reading->options;
    lw_status status = lw_ids_new(0, &problem->observations, reading->error);
    if (status == LW_OK) status = lw_ids_new(0, &problem->parameters, reading->error);
    if (status != LW_OK) return status;
    problem->folder = lw_copy_text(folder);
    problem->value_unit = lw_copy_text(options->value_unit != NULL ? options->value_unit : "");
    problem->parameter_unit = lw_copy_text(options->parameter_unit != NULL ? options->parameter_unit : "");
    if (!problem->folder || !problem->value_unit || !problem->parameter_unit)
        return lw_fail_memory(reading->error, "a problem", strlen(folder));
    return LW_OK;
}

/* What a faulty problem lacks is made empty, so that it can be looked at. */
static lw_status complete(lw_reading *reading)
{
    lw_problem *problem = reading->problem;
    if (problem->design != NULL) return LW_OK;
    problem->m = lw_ids_count(problem->observations);
    problem->n = lw_ids_count(problem->parameters);
    return lw_sparse_new(problem->m, problem->n, 0, 0, &problem->design, reading->error);
}

static lw_status read_files(lw_reading *reading, char *const path[FILES])
{
    lw_status status = LW_OK;
    reading->covariance_given = path[COVARIANCE] != NULL;
    reading->parameters_whole = true;
    if (path[OBSERVATIONS] != NULL) status = lw_read_observations(reading, path[OBSERVATIONS]);
    if (status == LW_OK && path[PARAMETERS] != NULL) status = lw_read_parameters(reading, path[PARAMETERS]);
    int before = reading->error->faults;
    if (status == LW_OK && path[DESIGN] != NULL)
        status = ends_with(path[DESIGN], ".mtx") ? lw_read_market(reading, path[DESIGN])
                                                 : lw_read_design(reading, path[DESIGN]);
    if (!reading->parameters_given && (reading->error->faults > before || path[DESIGN] == NULL))
        reading->parameters_whole =
            false; /* then the design had to tell the parameters, and did not tell all */
    if (status == LW_OK) status = complete(reading);
    if (status == LW_OK && path[COVARIANCE] != NULL) status = lw_read_covariance(reading, path[COVARIANCE]);
    if (status == LW_OK && path[PENALTY] != NULL) status = lw_read_penalty(reading, path[PENALTY]);
    if (status == LW_OK && path[CONDITIONS] != NULL) status = lw_read_conditions(reading, path[CONDITIONS]);
    return status;
}

static lw_status read_folder(lw_reading *reading, const char *folder)
{
    char *path[FILES] = {NULL};
    lw_status status = start(reading, folder);
    if (status == LW_OK) status = find_files(reading, folder, path);
    if (status == LW_OK) status = read_files(reading, path);
    lw_csv_close(reading->observations);
    for (int k = 0; k < FILES; k++) lw_free(path[k]);
    return status;
}

static bool names_files(const lw_read_options *o)
{
    return o->design || o->observations || o->parameters || o->covariance || o->penalty || o->conditions;
}

lw_status lw_problem_read(const char *folder, const lw_read_options *options, const lw_watch *watch,
                          lw_problem **out, lw_error *error)
{
    static const lw_read_options plain = {.keep_low = true};
    lw_error own = {0};
    lw_reading reading = {.options = options != NULL ? options : &plain,
                          .watch = watch,
                          .sigma_column = -1,
                          .error = error != NULL ? error : &own};
    *out = NULL;
    *reading.error = (lw_error){0};
    if (folder[0] == '\0') folder = ".";
    if (!names_files(reading.options)) {
        bool taken;
        lw_status status = lw_pack_find(folder, reading.options, watch, &taken, out, reading.error);
        if (status != LW_OK || taken) return status;
        if (!exists(folder))
            return lw_fail(reading.error, LW_BAD_INPUT, "%s: found no such folder, expected a problem folder",
                           folder);
    }
    reading.problem = LW_NEW(lw_problem);
    if (reading.problem == NULL) return lw_fail_memory(reading.error, "a problem", sizeof(lw_problem));
    lw_status status = read_folder(&reading, folder);
    if (status == LW_OK && reading.faulty) status = LW_BAD_INPUT;
    if (status == LW_OK || (status == LW_BAD_INPUT && reading.faulty && reading.options->tolerate))
        *out = reading.problem;
    else
        lw_problem_free(reading.problem);
    lw_error_order(reading.error);
    if (status != LW_OK) reading.error->status = status;
    return status;
}
