/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Any bytes as the files of a problem, cut at bytes 0x1e: options, observations, design, parameters,
 * covariance, penalty, conditions. No crash; a refusal has a message that names a place; what is read can be
 * checked. With clang's -fsanitize=fuzzer a fuzz target; without, replays the files named on the command
 * line. */
#define _GNU_SOURCE 1
#include "fuzz_input.h"

#include "problem/check.h"
#include "problem/problem.h"

#include <string.h>

#define MARK 0x1e
#define PARTS 7

/* The bits of the first byte. */
enum { ADD_REPEATED = 1, KEEP_LOW = 2, TOLERATE = 4, MARKET = 8 };

static void read_with(const char *folder, const lw_read_options *options)
{
    static lw_error error;
    lw_problem *problem;
    lw_status status = lw_problem_read(folder, options, NULL, &problem, &error);
    if (status != LW_OK && error.text[0] == '\0') abort();
    if (status == LW_BAD_INPUT && (error.faults == 0 || strstr(error.text, ":") == NULL)) abort();
    if ((problem != NULL) != (status == LW_OK || (status == LW_BAD_INPUT && options->tolerate))) abort();
    if (problem != NULL) {
        lw_log log = {0};
        lw_check check;
        if (problem->m != lw_ids_count(problem->observations) || problem->design->columns != problem->n)
            abort();
        if (lw_check_problem(problem, &log, &check, &error) != LW_OK) abort();
        lw_check_clear(&check);
        lw_log_clear(&log);
    }
    lw_problem_free(problem);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    char path[PARTS][FUZZ_PATH], market[FUZZ_PATH + 16];
    int fd[PARTS], parts = 0;
    unsigned bits = size > 0 ? data[0] : 0;
    for (size_t from = 0, k = 0; k <= size && parts < PARTS; k++) {
        if (k < size && data[k] != MARK) continue;
        fd[parts] = fuzz_open(data + from, k - from, path[parts]);
        parts++;
        from = k + 1;
    }
    lw_read_options options = {
        .add_repeated = bits & ADD_REPEATED, .keep_low = bits & KEEP_LOW, .tolerate = bits & TOLERATE};
    const char **file[PARTS] = {NULL,
                                &options.observations,
                                &options.design,
                                &options.parameters,
                                &options.covariance,
                                &options.penalty,
                                &options.conditions};
    bool some = false;
    for (int k = 1; k < parts; k++)
        if (lseek(fd[k], 0, SEEK_END) > 0) {
            *file[k] = path[k];
            some = true;
        }
    (void)snprintf(market, sizeof market, P_tmpdir "/fuzz-%ld.mtx", (long)getpid());
    if ((bits & MARKET) && options.design != NULL && symlink(options.design, market) == 0)
        options.design = market;
    if (some) read_with("/nonexistent", &options);
    if (options.design == market) (void)unlink(market);
    for (int k = 0; k < parts; k++) fuzz_close(fd[k]);
    return 0;
}
