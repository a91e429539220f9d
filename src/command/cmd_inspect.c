/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/command.h"
#include "command/work.h"

#include "command/inspection.h"

#include <stdio.h>

int lw_command_inspect(const lw_command *self, int argc, char **argv)
{
    lw_arguments arguments;
    lw_error error = {0}, rank_error = {0};
    lw_work work = {0};
    lw_status status =
        lw_arguments_read(argc, argv, self->doc, self->operands, self->groups, &arguments, &error);
    if (status == LW_OK) {
        arguments.read.tolerate = true;
        status = lw_work_read(&work, &arguments, &error);
    }
    if (work.problem && (status == LW_OK || status == LW_BAD_INPUT)) lw_inspection_facts(&work, stdout);
    lw_status rank_status = LW_OK;
    if (status == LW_OK) rank_status = lw_inspection_rank(&work, stdout, &rank_error);
    lw_progress_end(&work.progress);
    for (size_t i = 0; i < work.log.count; i++) printf("! %s\n", work.log.text[i]);
    fflush(stdout);
    work.qualified = LW_OK;
    int exit_status =
        lw_work_exit(&work, status != LW_OK ? status : rank_status, status != LW_OK ? &error : &rank_error);
    lw_work_close(&work);
    lw_arguments_clear(&arguments);
    return exit_status;
}
