/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/selection.h"

#include "core/memory.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static lw_status add(int64_t **list, int64_t *count, int64_t *room, int64_t j, lw_error *error)
{
    if (*count == *room) {
        int64_t more = *room ? 2 * *room : 64;
        int64_t *grown = lw_resize(*list, (size_t)more, sizeof(int64_t));
        if (!grown) return lw_fail_memory(error, "a list of parameters", (size_t)more * sizeof(int64_t));
        *list = grown;
        *room = more;
    }
    for (int64_t k = 0; k < *count && *count < 1000; k++)
        if ((*list)[k] == j) return LW_OK;
    (*list)[(*count)++] = j;
    return LW_OK;
}

/* One id a line; blank lines and lines that begin with '#' are skipped. */
static lw_status read_list_file(const lw_work *work, const char *path, int64_t **list, int64_t *count,
                                lw_error *error)
{
    FILE *file = fopen(path, "r");
    if (!file && errno == ENOENT)
        return lw_fail(error, LW_BAD_INPUT,
                       "%s:1:1: found no such file, expected the parameters wanted, one a line", path);
    if (!file) return lw_fail(error, LW_SYSTEM, "%s: %s", path, strerror(errno));
    char *line = NULL;
    size_t room = 0;
    int64_t number = 0, list_room = 0;
    lw_status status = LW_OK;
    for (ssize_t length; status >= 0 && (length = getline(&line, &room, file)) >= 0;) {
        number++;
        while (length > 0 && strchr("\r\n \t", line[length - 1])) length--;
        if (length == 0 || line[0] == '#') continue;
        int64_t j = lw_ids_find(work->problem->parameters, line, (size_t)length);
        if (j < 0)
            status =
                lw_fail_also(error, LW_BAD_INPUT, "%s:%lld:1: found '%.*s', expected the id of a parameter",
                             path, (long long)number, (int)(length > 40 ? 40 : length), line);
        else
            status = add(list, count, &list_room, j, error);
    }
    free(line);
    fclose(file);
    return status;
}

static lw_status read_list_text(const lw_work *work, const char *text, int64_t **list, int64_t *count,
                                lw_error *error)
{
    int64_t room = 0;
    for (const char *part = text; part;) {
        const char *comma = strchr(part, ',');
        size_t length = comma ? (size_t)(comma - part) : strlen(part);
        int64_t j = lw_ids_find(work->problem->parameters, part, length);
        if (j < 0) {
            return lw_fail(error, LW_BAD_USAGE,
                           "--resolution-of: found '%.*s', expected the id of a parameter",
                           (int)(length > 40 ? 40 : length), part);
        }
        lw_status status = add(list, count, &room, j, error);
        if (status != LW_OK) return status;
        part = comma ? comma + 1 : NULL;
    }
    return LW_OK;
}

lw_status lw_select_parameters(lw_work *work, lw_error *error)
{
    lw_arguments *arguments = work->arguments;
    lw_certainty_options *options = &arguments->certainty;
    lw_status status = LW_OK;
    if (arguments->covariance_of && strcmp(arguments->covariance_of, "all") == 0) {
        int64_t n = work->problem->n;
        if (n > 5000)
            return lw_fail(
                error, LW_BAD_USAGE,
                "--covariance-of all: %lld parameters would make %.2g rows; list those wanted in a file",
                (long long)n, 0.5 * (double)n * (double)n);
        work->covariance_of = LW_NEW_ARRAY(int64_t, n);
        if (!work->covariance_of)
            return lw_fail_memory(error, "a list of parameters", (size_t)n * sizeof(int64_t));
        for (int64_t j = 0; j < n; j++) work->covariance_of[j] = j;
        options->covariance_count = n;
    } else if (arguments->covariance_of) {
        status = read_list_file(work, arguments->covariance_of, &work->covariance_of,
                                &options->covariance_count, error);
    }
    if (status == LW_OK && arguments->resolution_of)
        status = read_list_text(work, arguments->resolution_of, &work->resolution_of,
                                &options->resolution_count, error);
    options->covariance_of = work->covariance_of;
    options->resolution_of = work->resolution_of;
    return status;
}
