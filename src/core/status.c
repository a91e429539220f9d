/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/status.h"

#include <stdarg.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

lw_status lw_fail(lw_error *error, lw_status status, const char *format, ...)
{
    if (error == NULL) return status;
    char text[LW_ERROR_TEXT]; /* the arguments may point into error->text */
    va_list list;
    va_start(list, format);
    int length = vsnprintf(text, sizeof text, format, list);
    va_end(list);
    if (length < 0) text[0] = '\0';
    memcpy(error->text, text, strlen(text) + 1);
    error->status = status;
    error->faults = 1;
    return status;
}

lw_status lw_fail_also(lw_error *error, lw_status status, const char *format, ...)
{
    if (error == NULL) return status;
    error->status = status;
    if (error->faults++ >= LW_MOST_FAULTS) return status;
    char text[LW_ERROR_TEXT];
    va_list list;
    va_start(list, format);
    int length = vsnprintf(text, sizeof text, format, list);
    va_end(list);
    if (length < 0) return status;
    size_t more = strlen(text), used = error->faults == 1 ? 0 : strlen(error->text);
    if (used > 0 && used + 1 + more >= sizeof error->text) return status;
    if (used > 0) error->text[used++] = '\n';
    memcpy(error->text + used, text, more + 1);
    return status;
}

lw_status lw_fail_memory(lw_error *error, const char *what, size_t bytes)
{
    return lw_fail(error, LW_NO_MEMORY, "out of memory: %s needs %zu bytes", what, bytes);
}

const char *lw_status_name(lw_status status)
{
    switch (status) {
    case LW_OK:
        return "done";
    case LW_NOT_CONVERGED:
        return "not converged";
    case LW_INTERRUPTED:
        return "interrupted";
    case LW_QUALIFIED:
        return "done with a warning";
    case LW_BAD_USAGE:
        return "wrong usage";
    case LW_BAD_INPUT:
        return "faulty input";
    case LW_UNSOLVABLE:
        return "not solvable as stated";
    case LW_NO_MEMORY:
        return "out of memory";
    case LW_SYSTEM:
        return "system failure";
    case LW_BAD_SHAPE:
        return "sizes that do not match";
    }
    return "unknown status";
}

/* Where a message line points: the length of FILE, then line and column; false when it names no place. */
static bool find_place(const char *text, size_t *file, long *line, long *column)
{
    for (const char *colon = strchr(text, ':'); colon && colon < strchrnul(text, '\n');
         colon = strchr(colon + 1, ':')) {
        char *end, *last;
        *line = strtol(colon + 1, &end, 10);
        if (end == colon + 1 || *end != ':') continue;
        *column = strtol(end + 1, &last, 10);
        if (last == end + 1 || *last != ':') continue;
        *file = (size_t)(colon - text);
        return true;
    }
    return false;
}

static bool stands_after(const char *a, const char *b)
{
    size_t file_a, file_b;
    long line_a, line_b, column_a, column_b;
    if (!find_place(a, &file_a, &line_a, &column_a) || !find_place(b, &file_b, &line_b, &column_b))
        return false;
    if (file_a != file_b || strncmp(a, b, file_a) != 0) return false;
    return line_a > line_b || (line_a == line_b && column_a > column_b);
}

void lw_error_order(lw_error *error)
{
    char *line[LW_MOST_FAULTS + 2];
    int count = 0;
    char copy[LW_ERROR_TEXT];
    if (error == NULL || error->faults < 2) return;
    memcpy(copy, error->text, sizeof copy);
    for (char *next = copy; next && count < LW_MOST_FAULTS + 2;) {
        line[count++] = next;
        next = strchr(next, '\n');
        if (next) *next++ = '\0';
    }
    for (int i = 1; i < count; i++) /* insertion: at most twenty, and stable */
        for (int k = i; k > 0 && stands_after(line[k - 1], line[k]); k--) {
            char *swap = line[k];
            line[k] = line[k - 1];
            line[k - 1] = swap;
        }
    size_t used = 0;
    for (int i = 0; i < count; i++)
        used +=
            (size_t)snprintf(error->text + used, sizeof error->text - used, "%s%s", i ? "\n" : "", line[i]);
}
