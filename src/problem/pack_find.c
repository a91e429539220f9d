/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Whether a pack stands in place of the CSV files. Where both are there the CSV files are the truth: an old
 * pack is left aside, with a warning. */
#include "problem/pack.h"

#include "core/memory.h"
#include "core/watch.h"
#include "problem/read.h"

#include <string.h>
#include <sys/stat.h>

static const char *const names[] = {"observations.csv", "parameters.csv", "design.csv",    "design.mtx",
                                    "covariance.csv",   "penalty.csv",    "conditions.csv"};
#define NAMES ((int)(sizeof names / sizeof *names))

static bool later(const struct stat *a, const struct stat *b)
{
    if (a->st_mtim.tv_sec != b->st_mtim.tv_sec) return a->st_mtim.tv_sec > b->st_mtim.tv_sec;
    return a->st_mtim.tv_nsec > b->st_mtim.tv_nsec;
}

/* Size of the file of this name that the pack was made of; -1: of none. */
static int64_t packed_bytes(const lw_problem *problem, const char *name)
{
    for (int k = 0; k < problem->input_count; k++) {
        const char *path = problem->inputs[k].path, *slash = strrchr(path, '/');
        if (strcmp(slash != NULL ? slash + 1 : path, name) == 0) return problem->inputs[k].bytes;
    }
    return -1;
}

/* The first usual file beside the pack that is not the one the pack was made of, or is gone; NULL: the pack
 * stands. Without an observations.csv there is no other problem in the folder. *failed: no memory. */
static const char *newer_file(const char *folder, const struct stat *pack, const lw_problem *problem,
                              bool *failed)
{
    for (int k = 0; k < NAMES; k++) {
        struct stat about;
        char *path = lw_join_path(folder, names[k]);
        if (path == NULL) *failed = true;
        bool there = path != NULL && stat(path, &about) == 0;
        lw_free(path);
        if (!there && (k == 0 || *failed)) return NULL;
        int64_t bytes = there ? (int64_t)about.st_size : -1;
        if (packed_bytes(problem, names[k]) != bytes || (there && later(&about, pack))) return names[k];
    }
    return NULL;
}

static lw_status read_if_current(const char *folder, const char *path, const struct stat *about,
                                 const lw_read_options *options, const lw_watch *watch, bool *taken,
                                 lw_problem **out, lw_error *error)
{
    lw_status status = lw_pack_read(path, options, watch, out, error);
    if (status != LW_OK) return status;
    bool failed = false;
    const char *newer = newer_file(folder, about, *out, &failed);
    if (!failed && newer == NULL) {
        char *named = lw_copy_text(folder);
        if (named != NULL) {
            lw_free((*out)->folder);
            (*out)->folder = named;
            *taken = true;
            return LW_OK;
        }
        failed = true;
    }
    lw_problem_free(*out);
    *out = NULL;
    if (failed) return lw_fail_memory(error, "a path", strlen(folder));
    (void)lw_log_add(
        lw_watch_log(watch),
        "%s was not made of the %s that is there now and was left aside: the CSV files were read", path,
        newer);
    return LW_OK;
}

lw_status lw_pack_find(const char *folder, const lw_read_options *options, const lw_watch *watch, bool *taken,
                       lw_problem **out, lw_error *error)
{
    struct stat about;
    *taken = false;
    *out = NULL;
    if (stat(folder, &about) != 0) return LW_OK;
    if (S_ISREG(about.st_mode)) {
        lw_status status = lw_pack_read(folder, options, watch, out, error);
        *taken = status == LW_OK;
        return status;
    }
    char *path = lw_join_path(folder, LW_PACK_NAME);
    if (path == NULL) return lw_fail_memory(error, "a path", strlen(folder));
    lw_status status = LW_OK;
    if (stat(path, &about) == 0)
        status = read_if_current(folder, path, &about, options, watch, taken, out, error);
    lw_free(path);
    return status;
}
