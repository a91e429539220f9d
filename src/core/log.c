/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/log.h"

#include "core/memory.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

static char *compose(const char *format, va_list list) __attribute__((format(printf, 1, 0)));
static char *compose(const char *format, va_list list)
{
    va_list again;
    va_copy(again, list);
    int length = vsnprintf(NULL, 0, format, list);
    char *text = length < 0 ? NULL : lw_alloc((size_t)length + 1, 1);
    if (text != NULL) (void)vsnprintf(text, (size_t)length + 1, format, again);
    va_end(again);
    return text;
}

lw_status lw_log_add(lw_log *log, const char *format, ...)
{
    if (log == NULL) return LW_OK;
    va_list list;
    va_start(list, format);
    char *text = compose(format, list);
    va_end(list);
    if (text == NULL) return LW_NO_MEMORY;
    for (size_t i = 0; i < log->count; i++) {
        if (strcmp(log->text[i], text) != 0) continue;
        lw_free(text);
        return LW_OK;
    }
    if (log->count == log->room) {
        size_t room = log->room > 0 ? 2 * log->room : 8;
        char **grown = lw_resize(log->text, room, sizeof *grown);
        if (grown == NULL) {
            lw_free(text);
            return LW_NO_MEMORY;
        }
        log->text = grown;
        log->room = room;
    }
    log->text[log->count++] = text;
    return LW_OK;
}

void lw_log_clear(lw_log *log)
{
    if (log == NULL) return;
    for (size_t i = 0; i < log->count; i++) lw_free(log->text[i]);
    lw_free(log->text);
    *log = (lw_log){0};
}
