/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/command.h"
#include "command/work.h"

int lw_command_solve(const lw_command *self, int argc, char **argv)
{
    lw_arguments arguments;
    lw_error error = {0};
    lw_work work = {0};
    double lambda;
    lw_status status =
        lw_arguments_read(argc, argv, self->doc, self->operands, self->groups, &arguments, &error);
    if (status == LW_OK) status = lw_work_open(&work, &arguments, &error);
    if (status == LW_OK) status = lw_work_system(&work, &error);
    if (status == LW_OK) status = lw_work_damping(&work, &lambda, &error);
    if (status == LW_OK && work.qualified != LW_INTERRUPTED)
        status = lw_work_estimate(&work, lambda, lw_damping_choice_name(arguments.damping), &error);
    if (status == LW_OK && work.estimate) status = lw_work_write(&work, &error);
    lw_progress_end(&work.progress);
    int exit_status = lw_work_exit(&work, status, &error);
    lw_work_close(&work);
    lw_arguments_clear(&arguments);
    return exit_status;
}
