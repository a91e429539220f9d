/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/arguments.h"

#include "core/memory.h"

#include <argp.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define FIRST_KEY 256
#define MOST_OPTIONS 80

static const lw_option *const tables[] = {lw_file_options, lw_run_options, lw_model_options,
                                          lw_certainty_option_table, lw_probe_options};

const lw_option *lw_option_at(int i)
{
    for (size_t t = 0; t < sizeof tables / sizeof *tables; t++)
        for (const lw_option *option = tables[t]; option->name; option++)
            if (i-- == 0) return option;
    return NULL;
}

/* What argp's parser is given. */
typedef struct reading {
    lw_arguments *arguments;
    lw_error *error;
    lw_status status;
} reading;

static const lw_option *option_of_key(int key)
{
    if (key >= FIRST_KEY) return lw_option_at(key - FIRST_KEY);
    for (int i = 0; lw_option_at(i); i++)
        if (lw_option_at(i)->letter == key && key) return lw_option_at(i);
    return NULL;
}

static error_t read_option(int key, char *value, struct argp_state *state)
{
    reading *job = state->input;
    switch (key) {
    case ARGP_KEY_ARG:
        if (job->arguments->problem)
            argp_error(state, "found a second operand '%s', expected one PROBLEM folder", value);
        job->arguments->problem = value;
        return 0;
    case ARGP_KEY_END:
        if (!job->arguments->problem) argp_error(state, "no PROBLEM folder given");
        return 0;
    default:
        break;
    }
    const lw_option *option = option_of_key(key);
    if (!option) return ARGP_ERR_UNKNOWN;
    lw_status status = option->set(job->arguments, value, job->error);
    if (status != LW_OK) {
        if (status == LW_BAD_USAGE) argp_error(state, "%s", job->error->text);
        job->status = status;
        return EINVAL;
    }
    return 0;
}

static void make_defaults(lw_arguments *out)
{
    memset(out, 0, sizeof *out);
    out->memory = LW_DEFAULT_MEMORY;
    out->seed = LW_DEFAULT_SEED;
    out->noise_factor = 1.0;
    out->certainty.confidence = 0.95;
    out->certainty.alpha = 0.001;
    out->certainty.power = 0.80;
    out->certainty.sigma = out->certainty.reliability = true;
    out->solve.tolerance = 1e-6;
}

static char *words_of(int argc, char **argv)
{
    size_t length = sizeof "leastwise";
    for (int i = 0; i < argc; i++) length += strlen(argv[i]) + 1;
    char *text = lw_alloc(length, 1);
    if (!text) return NULL;
    strcpy(text, "leastwise");
    for (int i = 0; i < argc; i++) strcat(strcat(text, " "), argv[i]);
    return text;
}

/* Every long option must be written out: an abbreviation that is taken for another option would be silent. */
static lw_status check_names(int argc, char **argv, unsigned groups, lw_error *error)
{
    for (int k = 1; k < argc && strcmp(argv[k], "--") != 0; k++) {
        if (strncmp(argv[k], "--", 2) != 0) continue;
        const char *name = argv[k] + 2;
        size_t length = strcspn(name, "=");
        bool known =
            (length == 4 && strncmp(name, "help", 4) == 0) || (length == 5 && strncmp(name, "usage", 5) == 0);
        const lw_option *option, *near = NULL;
        for (int i = 0; !known && (option = lw_option_at(i)); i++) {
            if (!(option->groups & groups)) continue;
            known = strlen(option->name) == length && strncmp(option->name, name, length) == 0;
            if (strncmp(option->name, name, length < 4 ? length : 4) == 0) near = option;
        }
        if (!known)
            return lw_fail(
                error, LW_BAD_USAGE,
                "leastwise %s: found the unknown option --%.*s%s%s%s; leastwise %s --help lists the options",
                argv[0], (int)length, name, near ? ", did you mean --" : "", near ? near->name : "",
                near ? "?" : "", argv[0]);
        const lw_option *exact = NULL;
        for (int i = 0; (option = lw_option_at(i)); i++)
            if ((option->groups & groups) && strlen(option->name) == length &&
                strncmp(option->name, name, length) == 0)
                exact = option;
        if (exact && exact->argument && name[length] != '=') k++; /* its value is the next word */
    }
    return LW_OK;
}

lw_status lw_arguments_read(int argc, char **argv, const char *doc, const char *operands, unsigned groups,
                            lw_arguments *out, lw_error *error)
{
    struct argp_option options[MOST_OPTIONS] = {{0}};
    int count = 0;
    make_defaults(out);
    lw_status named = check_names(argc, argv, groups, error);
    if (named != LW_OK) return named;
    for (int i = 0; lw_option_at(i) && count < MOST_OPTIONS - 1; i++) {
        const lw_option *option = lw_option_at(i);
        if (!(option->groups & groups)) continue;
        options[count++] = (struct argp_option){.name = option->name,
                                                .key = option->letter ? option->letter : FIRST_KEY + i,
                                                .arg = option->argument,
                                                .doc = option->words};
    }
    out->command = argv[0];
    out->command_line = words_of(argc, argv);
    if (!out->command_line) return lw_fail_memory(error, "the command line", 1);
    char name[64], *first = argv[0];
    snprintf(name, sizeof name, "leastwise %s", argv[0]);
    argv[0] = name; /* argp names the program in its messages */
    reading job = {out, error, LW_OK};
    struct argp parser = {.options = options, .parser = read_option, .args_doc = operands, .doc = doc};
    argp_err_exit_status = 2;
    error_t failed = argp_parse(&parser, argc, argv, 0, NULL, &job);
    argv[0] = first;
    if (job.status != LW_OK) return job.status;
    return failed ? lw_fail(error, LW_BAD_USAGE, "wrong usage: see leastwise %s --help", out->command)
                  : LW_OK;
}

void lw_arguments_clear(lw_arguments *arguments)
{
    lw_free(arguments->grid_list);
    lw_free(arguments->command_line);
    memset(arguments, 0, sizeof *arguments);
}
