/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Manual pages and shell completion, from the command table and the option tables. */
#include "command/arguments.h"
#include "command/command.h"

#include <ctype.h>
#include <string.h>

/* Text with troff's specials escaped. */
static void put(FILE *to, const char *text)
{
    for (; *text; text++) {
        if (*text == '\\')
            fputs("\\e", to);
        else if (*text == '-')
            fputs("\\-", to);
        else
            fputc(*text, to);
    }
}

static void upper(FILE *to, const char *text)
{
    for (; *text; text++) fputc(toupper((unsigned char)*text), to);
}

static void write_options(const lw_command *command, FILE *to)
{
    const lw_option *option;
    for (int i = 0; (option = lw_option_at(i)); i++) {
        if (!(option->groups & command->groups)) continue;
        fputs(".TP\n", to);
        if (option->letter) fprintf(to, "\\fB\\-%c\\fR, ", option->letter);
        fputs("\\fB\\-\\-", to);
        put(to, option->name);
        fputs("\\fR", to);
        if (option->argument) {
            fputs("=\\fI", to);
            put(to, option->argument);
            fputs("\\fR", to);
        }
        fputc('\n', to);
        put(to, option->words);
        fputc('\n', to);
    }
}

static void write_exit_status(FILE *to)
{
    fputs(".SH EXIT STATUS\n0 done; 1 done with a warning that changes how the result may be used; 2 wrong "
          "usage; 3 faulty input; "
          "4 cannot be solved as stated; 5 the system failed; 130 interrupted.\n"
          ".SH CAUTION\nResults do not replace local regulations and the judgement of licensed practice.\n",
          to);
}

void lw_manual_write(const lw_command *command, FILE *to)
{
    fputs(".TH LEASTWISE", to);
    if (command) fputc('\\', to), fputc('-', to), upper(to, command->name);
    fprintf(to, " 1 \"\" \"leastwise %s\"\n.SH NAME\nleastwise", PACKAGE_VERSION);
    if (command) {
        fprintf(to, "\\-%s \\- ", command->name);
        put(to, command->summary);
        fprintf(to, "\n.SH SYNOPSIS\n\\fBleastwise %s\\fR \\fI%s\\fR [\\fIOPTION\\fR...]\n.SH DESCRIPTION\n",
                command->name, command->operands);
        put(to, command->doc);
        fputs("\n.SH OPTIONS\n", to);
        write_options(command, to);
    } else {
        fputs(" \\- least squares and regularized inversion of measurement data\n"
              ".SH SYNOPSIS\n\\fBleastwise\\fR \\fICOMMAND\\fR \\fIPROBLEM\\fR [\\fIOPTION\\fR...]\n.SH "
              "COMMANDS\n",
              to);
        for (const lw_command *each = lw_commands; each->name; each++) {
            fprintf(to, ".TP\n\\fB%s\\fR\n", each->name);
            put(to, each->summary);
            fputc('\n', to);
        }
    }
    write_exit_status(to);
}

void lw_completion_write(FILE *to)
{
    fputs("# bash completion for leastwise\n_leastwise() {\n"
          "    local word=${COMP_WORDS[COMP_CWORD]} command=${COMP_WORDS[1]}\n"
          "    if [ \"$COMP_CWORD\" = 1 ]; then\n        COMPREPLY=($(compgen -W '",
          to);
    for (const lw_command *each = lw_commands; each->name; each++) fprintf(to, "%s ", each->name);
    fputs("--help --version' -- \"$word\"))\n        return\n    fi\n    case $command in\n", to);
    for (const lw_command *each = lw_commands; each->name; each++) {
        fprintf(to, "    %s) COMPREPLY=($(compgen -d -W '", each->name);
        const lw_option *option;
        for (int i = 0; (option = lw_option_at(i)); i++)
            if (option->groups & each->groups) fprintf(to, "--%s ", option->name);
        fputs("--help' -- \"$word\")) ;;\n", to);
    }
    fputs("    esac\n}\ncomplete -o filenames -F _leastwise leastwise\n", to);
}
