/** One progress line on a terminal's standard error for work over a second, and Ctrl-C. */
#ifndef LW_COMMAND_PROGRESS_H
#define LW_COMMAND_PROGRESS_H

#include "core/watch.h"

#include <stdbool.h>
#include <time.h>

typedef struct lw_progress {
    bool shown; /**< a terminal, and not --quiet */
    bool line;  /**< a line stands on the terminal */
    char what[64];
    struct timespec phase, last;
} lw_progress;

void lw_progress_begin(lw_progress *progress, bool quiet);
/** An lw_tick: state is the lw_progress. */
void lw_progress_tick(void *state, const char *what, double done, double total, const char *note);
/** Clears the line. */
void lw_progress_end(lw_progress *progress);

/** Installs the handler of SIGINT and SIGTERM: the first asks the work to stop, a second ends the program at
 * once (130). */
void lw_interrupt_install(void);
extern volatile sig_atomic_t lw_interrupt_asked;

#endif
