/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/status.h"

#include <stdarg.h>
#include <stdio.h>
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
