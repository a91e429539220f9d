/** What long work is given from outside: a progress tick, a cancel flag, the memory budget, seed and threads,
 * and the log for warnings. Borrowed by every engine; a NULL watch means: silent, one thread, default budget.
 */
#ifndef LW_CORE_WATCH_H
#define LW_CORE_WATCH_H

#include "core/log.h"
#include "core/status.h"
#include "core/team.h"

#include <signal.h>
#include <stdbool.h>
#include <stdint.h>

/** Default of --memory, bytes: constant, never a share of what happens to be free. */
#define LW_DEFAULT_MEMORY (INT64_C(4) << 30)
#define LW_DEFAULT_SEED UINT64_C(20260401)

/** what: a few words ("factorizing"); done of total in any unit, total 0 unknown; note: "", or a norm to
 * show. */
typedef void lw_tick(void *state, const char *what, double done, double total, const char *note);

typedef struct lw_watch {
    lw_tick *tick; /**< may be NULL */
    void *tick_state;
    const volatile sig_atomic_t *cancel; /**< may be NULL; nonzero asks to stop */
    int64_t memory;                      /**< bytes that the work may take; 0 = LW_DEFAULT_MEMORY */
    uint64_t seed;
    lw_team *team; /**< threads; NULL = the calling thread only */
    lw_log *log;   /**< warnings; may be NULL */
} lw_watch;

void lw_watch_tick(const lw_watch *watch, const char *what, double done, double total, const char *note);
bool lw_watch_cancelled(const lw_watch *watch);
int64_t lw_watch_memory(const lw_watch *watch);
uint64_t lw_watch_seed(const lw_watch *watch);
lw_team *lw_watch_team(const lw_watch *watch);
lw_log *lw_watch_log(const lw_watch *watch);

/** LW_OK when `bytes` fit the budget (and what the system has available), else LW_NO_MEMORY with
 *  "WHAT needs X, --memory allows Y; ADVICE". */
lw_status lw_watch_budget(const lw_watch *watch, int64_t bytes, const char *what, const char *advice,
                          lw_error *error);

#endif
