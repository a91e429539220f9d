/** Warnings that travel with a result to wherever it is read: a growing list of sentences. */
#ifndef LW_CORE_LOG_H
#define LW_CORE_LOG_H

#include "core/status.h"

#include <stddef.h>

typedef struct lw_log {
    char **text; /**< count sentences, in the order they came; one that stands already is not added again */
    size_t count, room;
} lw_log;

/** Adds a sentence; NULL log is safe. LW_OK or LW_NO_MEMORY. */
lw_status lw_log_add(lw_log *log, const char *format, ...) __attribute__((format(printf, 2, 3)));
void lw_log_clear(lw_log *log);

#endif
