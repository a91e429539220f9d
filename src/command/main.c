/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The command table and its dispatch. */
#include "command/arguments.h"
#include "command/command.h"
#include "command/progress.h"

#include "core/memory.h"
#include "matrix/dense.h"

#include <stdio.h>
#include <string.h>

#define COMMON (LW_TAKES_FILES | LW_TAKES_MACHINE)

const lw_command lw_commands[] = {
    {"inspect", "PROBLEM", "check a problem: sizes, coverage, rank and datum, conditioning; solves nothing",
     "Reads the folder PROBLEM and says what can be said before anything is solved. A faulty problem is "
     "reported as far as it "
     "can be read; the exit status is then 3.",
     COMMON | LW_TAKES_ENGINE, lw_command_inspect},
    {"solve", "PROBLEM", "estimate the parameters at one damping",
     "Reads the folder PROBLEM, estimates the parameters and writes a run folder with the estimates, their "
     "standard deviations, "
     "the residuals with their test statistics, a summary and a report.",
     COMMON | LW_TAKES_RUN | LW_TAKES_MODEL | LW_TAKES_ENGINE | LW_TAKES_CERTAINTY | LW_TAKES_NETWORK,
     lw_command_solve},
    {"sweep", "PROBLEM", "estimate the parameters over a range of dampings and report the trade-off",
     "Decomposes the problem once and reads from it the trade-off between misfit and size, what each "
     "criterion chooses, and the "
     "models. parameters.csv and residuals.csv are those of the first criterion, in the order corner, "
     "discrepancy, gcv, risk, that "
     "chooses without a warning.",
     COMMON | LW_TAKES_RUN | LW_TAKES_SWEEP | LW_TAKES_ENGINE | LW_TAKES_CERTAINTY, lw_command_sweep},
    {"probe", "PROBLEM", "what can these data resolve? spikes, checkerboards, noise trials",
     "Makes data of a known pattern with the same equations, weights and noise, inverts them with the same "
     "penalty and damping, and "
     "compares what comes back. Good recovery of small patterns does not prove good recovery of large ones, "
     "and such a test "
     "says nothing of errors in the equations themselves.",
     COMMON | LW_TAKES_RUN | LW_TAKES_MODEL | LW_TAKES_ENGINE | LW_TAKES_PROBE, lw_command_probe},
    {"pack", "PROBLEM", "keep a problem in binary for fast rereading",
     "Writes the problem as one checked binary file into the folder --out; every command takes that folder "
     "in place of PROBLEM and "
     "gives the same bytes.",
     COMMON | LW_TAKES_RUN, lw_command_pack},
    {0}};

static void write_help(FILE *to)
{
    fprintf(to, "Usage: leastwise COMMAND PROBLEM [OPTION...]\n\n"
                "Least squares and regularized inversion of measurement data. A problem is a folder of plain "
                "CSV files.\n\n");
    for (const lw_command *command = lw_commands; command->name; command++)
        fprintf(to, "  leastwise %-8s %s   %s\n", command->name, command->operands, command->summary);
    fprintf(to, "\nleastwise COMMAND --help tells the options of a command.\n"
                "Exit status: 0 done; 1 done with a warning that changes how the result may be used; 2 wrong "
                "usage; 3 faulty input;\n"
                "4 cannot be solved as stated; 5 the system failed; 130 interrupted.\n");
}

static const lw_command *find(const char *name)
{
    for (const lw_command *command = lw_commands; command->name; command++)
        if (strcmp(command->name, name) == 0) return command;
    return NULL;
}

int main(int argc, char **argv)
{
    if (argc < 2) {
        write_help(stderr);
        return 2;
    }
    const char *word = argv[1];
    if (strcmp(word, "--help") == 0 || strcmp(word, "-h") == 0) {
        write_help(stdout);
        return 0;
    }
    if (strcmp(word, "--version") == 0) {
        printf("leastwise %s\n", PACKAGE_VERSION);
        return 0;
    }
    if (strcmp(word, "--completion") == 0) {
        lw_completion_write(stdout);
        return 0;
    }
    if (strcmp(word, "--manual") == 0) {
        const lw_command *command = argc > 2 ? find(argv[2]) : NULL;
        if (argc > 2 && !command) {
            fprintf(stderr, "leastwise --manual: found '%s', expected a command\n", argv[2]);
            return 2;
        }
        lw_manual_write(command, stdout);
        return 0;
    }
    const lw_command *command = find(word);
    if (!command) {
        fprintf(stderr, "leastwise: found '%s', expected a command; leastwise --help lists them\n", word);
        return 2;
    }
    lw_memory_tune();
    lw_dense_single_thread();
    lw_interrupt_install();
    return command->run(command, argc - 1, argv + 1);
}
