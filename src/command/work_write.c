/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/plot.h"
#include "command/work.h"

#include "core/decimal.h"
#include "core/memory.h"
#include "report/report.h"
#include "run/folder.h"
#include "run/verdict.h"
#include "run/vtk.h"
#include "run/write.h"

#include <math.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

/* One file of a run: who writes it, and when it is there. */
typedef struct writing {
    const char *name;
    bool (*wanted)(const lw_work *work);
    lw_status (*write)(const lw_work *work, const char *path, lw_error *error);
} writing;

static bool has_estimate(const lw_work *work)
{
    return work->estimate != NULL;
}
static bool has_curve(const lw_work *work)
{
    return work->curve != NULL;
}
static bool has_models(const lw_work *work)
{
    return work->curve && ((work->arguments->models == LW_MODELS_ALL && work->models) ||
                           (work->arguments->models == LW_MODELS_CHOSEN && work->estimate));
}
static bool has_covariance(const lw_work *work)
{
    return work->certainty && work->covariance_of && work->certainty->covariance;
}
static bool has_resolution(const lw_work *work)
{
    return work->certainty && work->certainty->resolution_rows;
}
static bool has_ellipses(const lw_work *work)
{
    return work->certainty && work->certainty->ellipse_count > 0;
}
static bool has_outliers(const lw_work *work)
{
    return work->outliers != NULL;
}
static bool has_recovery(const lw_work *work)
{
    return work->probe && work->probe->patterns > 0;
}
static bool has_spread(const lw_work *work)
{
    return work->probe && work->probe->trials > 0;
}
static bool has_vtk(const lw_work *work)
{
    return work->arguments->vtk && work->estimate;
}
static bool always(const lw_work *work)
{
    (void)work;
    return true;
}

static lw_status write_parameters(const lw_work *work, const char *path, lw_error *error)
{
    return lw_write_parameters(&work->run, path, error);
}
static lw_status write_residuals(const lw_work *work, const char *path, lw_error *error)
{
    return lw_write_residuals(&work->run, path, error);
}
static lw_status write_tradeoff(const lw_work *work, const char *path, lw_error *error)
{
    return lw_write_tradeoff(&work->run, path, error);
}
static lw_status write_models(const lw_work *work, const char *path, lw_error *error)
{
    double only = work->arguments->models == LW_MODELS_CHOSEN ? work->run.damping : LW_UNKNOWN;
    return lw_write_models(&work->run, only, path, error);
}
static lw_status write_covariance(const lw_work *work, const char *path, lw_error *error)
{
    return lw_write_parameter_covariance(&work->run, path, error);
}
static lw_status write_resolution(const lw_work *work, const char *path, lw_error *error)
{
    const lw_certainty_options *options = &work->arguments->certainty;
    return lw_write_resolution_rows(&work->run, options->resolution_of, options->resolution_count, path,
                                    error);
}
static lw_status write_ellipses(const lw_work *work, const char *path, lw_error *error)
{
    return lw_write_ellipses(&work->run, path, error);
}
static lw_status write_outliers(const lw_work *work, const char *path, lw_error *error)
{
    return lw_write_outliers(&work->run, path, error);
}
static lw_status write_recovery(const lw_work *work, const char *path, lw_error *error)
{
    return lw_write_recovery(&work->run, path, error);
}
static lw_status write_spread(const lw_work *work, const char *path, lw_error *error)
{
    return lw_write_spread(&work->run, path, error);
}
static lw_status write_vtk(const lw_work *work, const char *path, lw_error *error)
{
    return lw_write_vtk(&work->run, path, error);
}
static lw_status write_report(const lw_work *work, const char *path, lw_error *error)
{
    return lw_report_write(&work->run, path, error);
}

static const writing files[] = {{"parameters.csv", has_estimate, write_parameters},
                                {"residuals.csv", has_estimate, write_residuals},
                                {"tradeoff.csv", has_curve, write_tradeoff},
                                {"models.csv", has_models, write_models},
                                {"parameter_covariance.csv", has_covariance, write_covariance},
                                {"resolution.csv", has_resolution, write_resolution},
                                {"ellipses.csv", has_ellipses, write_ellipses},
                                {"outliers.csv", has_outliers, write_outliers},
                                {"recovery.csv", has_recovery, write_recovery},
                                {"spread.csv", has_spread, write_spread},
                                {"model.vtk", has_vtk, write_vtk},
                                {"report.html", always, write_report}};

static void print_verdict(const lw_work *work)
{
    lw_verdict verdict;
    lw_verdict_make(&work->run, &verdict);
    printf("%s\n", verdict.headline);
    for (int k = 0; k < LW_VERDICT_NUMBERS; k++)
        if (verdict.number[k].label[0])
            printf("  %-25s %s\n", verdict.number[k].label, verdict.number[k].value);
    if (work->curve) lw_plot_choices(work->curve, stdout);
    if (work->curve && isatty(STDOUT_FILENO)) lw_plot_curve(work->curve, stdout);
    for (int k = 0; k < verdict.cautions; k++) printf("! %s\n", verdict.caution[k]);
    for (size_t k = 0; k < work->log.count; k++) printf("! %s\n", work->log.text[k]);
    printf("Run: %s   report: %s/report.html\n", work->out, work->out);
    fflush(stdout);
}

lw_status lw_work_write(lw_work *work, lw_error *error)
{
    lw_folder *folder;
    lw_run *run = &work->run;
    lw_status status = lw_run_measure(run, error);
    if (status == LW_OK) status = lw_folder_begin(work->out, work->arguments->overwrite, &folder, error);
    if (status != LW_OK) return status;
    const size_t count = sizeof files / sizeof *files;
    for (size_t k = 0; k < count && status == LW_OK; k++) {
        if (!files[k].wanted(work)) continue;
        lw_watch_tick(&work->watch, "writing", (double)k, (double)count, files[k].name);
        const char *path = lw_folder_file(folder, files[k].name);
        status = path ? files[k].write(work, path, error) : lw_fail_memory(error, "a path", 1);
    }
    run->seconds.write = lw_work_lap(work);
    if (status == LW_OK) {
        const char *path = lw_folder_file(folder, "summary.json");
        status = path ? lw_write_summary(run, path, error) : lw_fail_memory(error, "a path", 1);
    }
    lw_progress_end(&work->progress);
    if (status == LW_OK)
        status = lw_folder_commit(folder, error);
    else
        lw_folder_abandon(folder);
    if (status == LW_OK && !work->arguments->quiet) print_verdict(work);
    return status;
}
