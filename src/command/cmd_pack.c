/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/command.h"
#include "command/work.h"

#include "problem/pack.h"

#include "core/memory.h"

#include <stdio.h>
#include <unistd.h>

/* The folder of the pack may hold an older pack only with --overwrite; pack_write replaces it in one step. */
static lw_status find_place(lw_work *work, const lw_arguments *arguments, lw_error *error)
{
    char path[4200];
    work->out = lw_work_out(arguments);
    if (!work->out) return lw_fail_memory(error, "a path", 1);
    snprintf(path, sizeof path, "%s/%s", work->out, LW_PACK_NAME);
    if (!arguments->overwrite && access(path, F_OK) == 0)
        return lw_fail(error, LW_BAD_USAGE,
                       "%s: exists already: give --overwrite, or another folder with --out", path);
    return LW_OK;
}

int lw_command_pack(const lw_command *self, int argc, char **argv)
{
    lw_arguments arguments;
    lw_error error = {0};
    lw_work work = {0};
    lw_status status =
        lw_arguments_read(argc, argv, self->doc, self->operands, self->groups, &arguments, &error);
    if (status == LW_OK) status = find_place(&work, &arguments, &error);
    arguments.read.keep_low = true;
    if (status == LW_OK) status = lw_work_read(&work, &arguments, &error);
    if (status == LW_OK) status = lw_pack_write(work.problem, work.out, &work.watch, &error);
    lw_progress_end(&work.progress);
    if (status == LW_OK && !arguments.quiet)
        printf("Packed %lld observations, %lld parameters, %lld nonzeros into %s; give that folder to any "
               "command as PROBLEM.\n",
               (long long)work.problem->m, (long long)work.problem->n,
               (long long)lw_sparse_nonzeros(work.problem->design), work.out);
    int exit_status = lw_work_exit(&work, status, &error);
    lw_work_close(&work);
    lw_arguments_clear(&arguments);
    return exit_status;
}
