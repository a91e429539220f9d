/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/command.h"
#include "command/work.h"

#include <math.h>

/* The choice whose model is written: the first of corner, discrepancy, gcv, risk without a warning, else the
 * first at all. */
static const lw_choice *written_choice(const lw_curve *curve)
{
    static const lw_criterion order[] = {LW_BY_CORNER, LW_BY_DISCREPANCY, LW_BY_GCV, LW_BY_RISK};
    for (int warned = 0; warned < 2; warned++)
        for (int i = 0; i < LW_CRITERIA; i++) {
            const lw_choice *choice = lw_curve_choice(curve, order[i]);
            if (choice && !isnan(choice->damping) && (warned || !choice->warning[0])) return choice;
        }
    return NULL;
}

static lw_status estimate_choice(lw_work *work, lw_error *error)
{
    const lw_arguments *arguments = work->arguments;
    const lw_choice *choice = written_choice(work->curve);
    if (arguments->damping == LW_DAMPING_VALUE)
        return lw_work_estimate(work, arguments->damping_value, "value", error);
    if (arguments->damping > LW_DAMPING_VALUE) {
        lw_status status = lw_work_choice(work, &choice, error);
        if (status != LW_OK) return status;
    }
    if (choice) return lw_work_estimate(work, choice->damping, lw_criterion_name(choice->criterion), error);
    lw_log_add(&work->log, "No criterion chose a damping: there is no parameters.csv. Pick one from the "
                           "curve and solve with --damping.");
    work->run.damping_chosen_by = "none";
    if (work->qualified == LW_OK) work->qualified = LW_QUALIFIED;
    return LW_OK;
}

int lw_command_sweep(const lw_command *self, int argc, char **argv)
{
    lw_arguments arguments;
    lw_error error = {0};
    lw_work work = {0};
    lw_status status =
        lw_arguments_read(argc, argv, self->doc, self->operands, self->groups, &arguments, &error);
    if (status == LW_OK) status = lw_work_open(&work, &arguments, &error);
    if (status == LW_OK) status = lw_work_system(&work, &error);
    if (status == LW_OK) status = lw_work_sweep(&work, &error);
    if (status == LW_OK) status = lw_work_models(&work, &error);
    if (status == LW_OK && work.qualified != LW_INTERRUPTED) status = estimate_choice(&work, &error);
    if (status == LW_OK) status = lw_work_write(&work, &error);
    lw_progress_end(&work.progress);
    int exit_status = lw_work_exit(&work, status, &error);
    lw_work_close(&work);
    lw_arguments_clear(&arguments);
    return exit_status;
}
