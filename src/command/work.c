/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/work.h"

#include "core/decimal.h"
#include "core/memory.h"
#include "problem/scale.h"
#include "run/folder.h"
#include "run/write.h"

#include <stdio.h>
#include <string.h>
#include <sys/stat.h>

double lw_work_lap(lw_work *work)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    double seconds =
        (double)(now.tv_sec - work->mark.tv_sec) + 1e-9 * (double)(now.tv_nsec - work->mark.tv_nsec);
    work->mark = now;
    return seconds;
}

char *lw_work_out(const lw_arguments *arguments)
{
    if (arguments->out) return lw_copy_text(arguments->out);
    size_t length = strlen(arguments->problem);
    while (length > 1 && arguments->problem[length - 1] == '/') length--;
    size_t room = length + strlen(arguments->command) + 2;
    char *text = lw_alloc(room, 1);
    if (text) snprintf(text, room, "%.*s-%s", (int)length, arguments->problem, arguments->command);
    return text;
}

/* An iterative run never touches the low parts; with `auto` they are kept up to this size of the design file.
 */
#define KEEP_LOW_BYTES (INT64_C(512) << 20)

static bool keeps_low(const lw_arguments *arguments)
{
    if (arguments->read.keep_low) return true;
    const lw_engine *engine = arguments->engine_named ? lw_engine_find(arguments->solve.engine) : NULL;
    if (engine) return (engine->abilities & LW_REFINED) != 0;
    char path[4200];
    struct stat info;
    if (arguments->read.design)
        snprintf(path, sizeof path, "%s", arguments->read.design);
    else
        snprintf(path, sizeof path, "%s/design.csv", arguments->problem);
    return stat(path, &info) != 0 || info.st_size <= KEEP_LOW_BYTES;
}

static lw_status scale_sigmas(lw_work *work, lw_error *error)
{
    for (int i = 0; i < work->arguments->scales; i++) {
        const char *text = work->arguments->scale_group[i];
        double factor = work->arguments->scale_factor[i];
        size_t length = (size_t)(strrchr(text, '=') - text);
        lw_status status = lw_problem_scale_sigma(work->problem, text, length, factor, error);
        if (status != LW_OK) return status;
        lw_log_add(&work->log,
                   "The stated sigmas of %.*s were multiplied by %.6g: the test of the fit then proves less.",
                   length ? (int)length : 11, length ? text : "all readings", factor);
    }
    return LW_OK;
}

/* The run as writers and report see it: everything borrowed from work. */
static void lend(lw_work *work)
{
    lw_run *run = &work->run;
    run->version = PACKAGE_VERSION;
    run->command = work->arguments->command;
    run->command_line = work->arguments->command_line;
    run->folder = work->out;
    run->problem = work->problem;
    run->system = work->system;
    run->check = &work->check;
    run->engine = work->engine;
    run->estimate = work->estimate;
    run->curve = work->curve;
    run->probe = work->probe;
    run->models = work->models;
    run->certainty = work->certainty;
    run->asked = &work->arguments->certainty;
    run->outliers = work->outliers;
    run->weight = work->weight;
    run->at_bound = work->at_bound;
    run->bound_multiplier = work->bound_multiplier;
    run->variance_estimated = work->arguments->certainty.variance_estimated;
    run->tolerance = work->arguments->solve.tolerance;
    run->seed = work->arguments->seed;
    run->warnings = &work->log;
}

/* Threads, progress and log. */
static lw_status equip(lw_work *work, lw_arguments *arguments, lw_error *error)
{
    work->arguments = arguments;
    clock_gettime(CLOCK_MONOTONIC, &work->mark);
    lw_progress_begin(&work->progress, arguments->quiet);
    lw_status status = lw_team_new(arguments->threads, &work->team, error);
    work->watch = (lw_watch){.tick = lw_progress_tick,
                             .tick_state = &work->progress,
                             .cancel = &lw_interrupt_asked,
                             .memory = arguments->memory,
                             .seed = arguments->seed,
                             .team = work->team,
                             .log = &work->log};
    work->run.effective_parameters = LW_UNKNOWN;
    work->run.damping_chosen_by = "none";
    return status;
}

lw_status lw_work_read(lw_work *work, lw_arguments *arguments, lw_error *error)
{
    lw_status status = work->team ? LW_OK : equip(work, arguments, error);
    if (status != LW_OK) return status;
    arguments->read.keep_low = keeps_low(arguments);
    arguments->read.reserved = lw_reserved_columns;
    status = lw_problem_read(arguments->problem, &arguments->read, &work->watch, &work->problem, error);
    if (work->problem) {
        lw_status more = status == LW_OK ? scale_sigmas(work, error) : LW_OK;
        if (more == LW_OK)
            more = lw_check_problem(work->problem, &work->log, &work->check, status == LW_OK ? error : NULL);
        if (status == LW_OK) status = more;
        if (!arguments->variance_named) arguments->certainty.variance_estimated = !work->problem->sigma;
    }
    lw_memory_trim();
    work->run.seconds.read = lw_work_lap(work);
    lend(work);
    return status;
}

lw_status lw_work_open(lw_work *work, lw_arguments *arguments, lw_error *error)
{
    lw_status status = equip(work, arguments, error);
    if (status != LW_OK) return status;
    work->out = lw_work_out(arguments);
    if (!work->out) return lw_fail_memory(error, "a path", strlen(arguments->problem));
    status = lw_folder_check(work->out, arguments->overwrite, error);
    return status == LW_OK ? lw_work_read(work, arguments, error) : status;
}

lw_status lw_work_system(lw_work *work, lw_error *error)
{
    lw_decomposition_free(work->decomposition);
    work->decomposition = NULL;
    lw_system_free(work->system);
    work->system = NULL;
    lw_system_options options = {.penalty = work->arguments->penalty, .row_factor = work->row_factor};
    lw_status status = lw_system_new(work->problem, &options, &work->watch, &work->system, error);
    lend(work);
    return status;
}

lw_status lw_work_decompose(lw_work *work, double lambda, bool sweep, lw_error *error)
{
    lw_decomposition_free(work->decomposition);
    work->decomposition = NULL;
    lw_solve_options options = work->arguments->solve;
    options.sweep = sweep;
    lw_status status = lw_decompose(work->system, lambda, &options, &work->watch, &work->engine,
                                    &work->decomposition, error);
    const lw_engine *engine = status >= 0 ? lw_engine_find(work->decomposition->methods->engine) : NULL;
    if (options.storage == LW_STORE_SINGLE && engine)
        lw_log_add(&work->log,
                   engine->abilities & LW_DIRECT
                       ? "--storage single has no effect: the %s engine factors in double precision."
                       : "The %s engine kept the coefficients in single precision; sums are double.",
                   engine->name);
    lend(work);
    return status;
}

void lw_work_close(lw_work *work)
{
    lw_progress_end(&work->progress);
    lw_estimate_free(work->estimate);
    lw_certainty_free(work->certainty);
    lw_outlier_log_free(work->outliers);
    lw_curve_free(work->curve);
    lw_probe_free(work->probe);
    lw_decomposition_free(work->decomposition);
    lw_system_free(work->system);
    lw_check_clear(&work->check);
    lw_problem_free(work->problem);
    lw_free(work->models);
    lw_free(work->weight);
    lw_free(work->bound_multiplier);
    lw_free(work->at_bound);
    lw_free(work->covariance_of);
    lw_free(work->resolution_of);
    lw_free(work->row_factor);
    lw_free(work->out);
    lw_log_clear(&work->log);
    lw_team_free(work->team);
}

int lw_work_exit(const lw_work *work, lw_status status, const lw_error *error)
{
    if (status < 0) fprintf(stderr, "%s\n", error->text[0] ? error->text : lw_status_name(status));
    if (status == LW_OK && work) status = work->qualified;
    switch (status) {
    case LW_OK:
        return 0;
    case LW_INTERRUPTED:
        return 130;
    case LW_NOT_CONVERGED:
    case LW_QUALIFIED:
        return 1;
    case LW_BAD_USAGE:
        return 2;
    case LW_BAD_INPUT:
        return 3;
    case LW_UNSOLVABLE:
        return 4;
    case LW_NO_MEMORY:
    case LW_SYSTEM:
    case LW_BAD_SHAPE:
        return 5;
    }
    return 5;
}
