/** The command table: drives dispatch, --help, the manual pages and shell completion. */
#ifndef LW_COMMAND_COMMAND_H
#define LW_COMMAND_COMMAND_H

#include <stdio.h>

typedef struct lw_command {
    const char *name;
    const char *operands; /**< "PROBLEM" */
    const char *summary;  /**< one line */
    const char *doc;      /**< paragraphs for --help and the manual */
    unsigned groups;      /**< of options, see arguments.h */
    int (*run)(const struct lw_command *self, int argc, char **argv); /**< the exit status */
} lw_command;

extern const lw_command lw_commands[]; /**< ended by a NULL name */

int lw_command_inspect(const lw_command *self, int argc, char **argv);
int lw_command_solve(const lw_command *self, int argc, char **argv);
int lw_command_sweep(const lw_command *self, int argc, char **argv);
int lw_command_probe(const lw_command *self, int argc, char **argv);
int lw_command_pack(const lw_command *self, int argc, char **argv);

/** The manual page (troff, man macros) of a command, or of the program for NULL; and the completion script
 * for bash. */
void lw_manual_write(const lw_command *command, FILE *to);
void lw_completion_write(FILE *to);

#endif
