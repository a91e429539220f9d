/** The options of all commands, each stated once: a table entry has its name, words for --help and the
 * manual, the groups of commands that take it, and the function that reads its value into lw_arguments. */
#ifndef LW_COMMAND_ARGUMENTS_H
#define LW_COMMAND_ARGUMENTS_H

#include "certainty/certainty.h"
#include "problem/problem.h"
#include "problem/system.h"
#include "solve/engine.h"
#include "solve/robust.h"
#include "tradeoff/choose.h"

#include <stdbool.h>
#include <stdint.h>

typedef enum lw_damping_choice {
    LW_DAMPING_NONE = 0,
    LW_DAMPING_VALUE,
    LW_DAMPING_CORNER,
    LW_DAMPING_GCV,
    LW_DAMPING_DISCREPANCY,
    LW_DAMPING_RISK
} lw_damping_choice;
const char *lw_damping_choice_name(lw_damping_choice choice);

typedef enum lw_models_wanted { LW_MODELS_ALL = 0, LW_MODELS_CHOSEN, LW_MODELS_NONE } lw_models_wanted;
typedef enum lw_pattern_kind { LW_PATTERN_CHECKER = 0, LW_PATTERN_SPIKES, LW_PATTERN_FILE } lw_pattern_kind;

#define LW_MOST_SCALES 32
#define LW_MOST_SIZES 8

typedef struct lw_arguments {
    const char *command, *problem;
    char *command_line;
    /* files */
    lw_read_options read;
    const char *scale_group[LW_MOST_SCALES]; /**< --scale-sigma GROUP=FACTOR; "" = every reading */
    double scale_factor[LW_MOST_SCALES];
    int scales;
    /* run */
    const char *out;
    bool overwrite, quiet;
    int threads;
    int64_t memory;
    uint64_t seed;
    /* model */
    lw_damping_choice damping;
    double damping_value, noise_factor;
    double grid_from, grid_to; /**< --dampings FROM:TO:COUNT, 0 = from the problem */
    int grid_count;
    double *grid_list; /**< --dampings A,B,C; owned */
    unsigned criteria; /**< bits of lw_criterion; 0 = all that apply */
    lw_penalty_options penalty;
    lw_misfit_kind misfit;
    lw_models_wanted models;
    bool vtk;
    /* engine */
    lw_solve_options solve;
    bool engine_named;
    /* certainty */
    lw_certainty_options certainty;
    bool variance_named, no_sigma, sigma_named;
    const char *covariance_of, *resolution_of;
    bool search_outliers, variance_components, fail_on_reject;
    /* probe */
    lw_pattern_kind pattern;
    const char *pattern_file;
    double pattern_size[LW_MOST_SIZES];
    int pattern_sizes;
    bool pattern_in_units;
    double pattern_amplitude;
    int trials;
    bool bootstrap;
} lw_arguments;

/** Groups of options; a command takes the entries that share a bit with its own. */
enum {
    LW_TAKES_FILES = 1,
    LW_TAKES_RUN = 2,
    LW_TAKES_MODEL = 4,
    LW_TAKES_ENGINE = 8,
    LW_TAKES_CERTAINTY = 16,
    LW_TAKES_SWEEP = 32,
    LW_TAKES_PROBE = 64,
    LW_TAKES_MACHINE = 128, /**< threads, memory, seed, quiet */
    LW_TAKES_NETWORK = 256  /**< outliers, components: solve only */
};

typedef struct lw_option {
    const char *name, *argument; /**< argument NULL: a switch */
    int letter;                  /**< short option, 0 none */
    unsigned groups;
    const char *words;
    lw_status (*set)(lw_arguments *arguments, const char *value, lw_error *error);
} lw_option;

/** The tables, each ended by a NULL name. */
extern const lw_option lw_file_options[], lw_run_options[], lw_model_options[], lw_certainty_option_table[],
    lw_probe_options[];
/** Entry number i over all tables, or NULL at the end. */
const lw_option *lw_option_at(int i);

/** Reads the words of a command (argv[0] = its name) with argp. Exits with status 2 on wrong usage, 0 after
 * --help. */
lw_status lw_arguments_read(int argc, char **argv, const char *doc, const char *operands, unsigned groups,
                            lw_arguments *out, lw_error *error);
void lw_arguments_clear(lw_arguments *arguments);

/** Reading of values; the message says found and expected. */
lw_status lw_value_double(const char *option, const char *text, double low, double high, const char *expected,
                          double *out, lw_error *error);
lw_status lw_value_integer(const char *option, const char *text, int64_t low, int64_t high, int64_t *out,
                           lw_error *error);
/** The position of text in words (NULL-terminated), or LW_BAD_USAGE listing them. */
lw_status lw_value_word(const char *option, const char *text, const char *const *words, int *out,
                        lw_error *error);
/** "4G", "512M", "1000000" in bytes. */
lw_status lw_value_memory(const char *option, const char *text, int64_t *out, lw_error *error);

#endif
