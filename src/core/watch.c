/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/watch.h"

#include "core/memory.h"

#include <stdio.h>

void lw_watch_tick(const lw_watch *watch, const char *what, double done, double total, const char *note)
{
    if (watch != NULL && watch->tick != NULL)
        watch->tick(watch->tick_state, what, done, total, note ? note : "");
}

bool lw_watch_cancelled(const lw_watch *watch)
{
    return watch != NULL && watch->cancel != NULL && *watch->cancel != 0;
}

int64_t lw_watch_memory(const lw_watch *watch)
{
    return watch != NULL && watch->memory > 0 ? watch->memory : LW_DEFAULT_MEMORY;
}

uint64_t lw_watch_seed(const lw_watch *watch)
{
    return watch != NULL ? watch->seed : LW_DEFAULT_SEED;
}

lw_team *lw_watch_team(const lw_watch *watch)
{
    return watch != NULL ? watch->team : NULL;
}

lw_log *lw_watch_log(const lw_watch *watch)
{
    return watch != NULL ? watch->log : NULL;
}

static void write_size(int64_t bytes, char text[32])
{
    static const char *const unit[] = {"bytes", "KiB", "MiB", "GiB", "TiB", "PiB", "EiB"};
    double size = (double)bytes;
    int u = 0;
    while (size >= 1023.95 && u < 6) {
        size /= 1024.0;
        u++;
    }
    (void)snprintf(text, 32, u == 0 ? "%.0f %s" : "%.1f %s", size, unit[u]);
}

lw_status lw_watch_budget(const lw_watch *watch, int64_t bytes, const char *what, const char *advice,
                          lw_error *error)
{
    char need[32], have[32];
    const char *semicolon = advice != NULL && advice[0] != '\0' ? "; " : "";
    if (advice == NULL) advice = "";
    write_size(bytes, need);
    if (bytes > lw_watch_memory(watch)) {
        write_size(lw_watch_memory(watch), have);
        return lw_fail(error, LW_NO_MEMORY, "%s needs %s, --memory allows %s%s%s", what, need, have,
                       semicolon, advice);
    }
    int64_t available = lw_memory_available();
    if (available > 0 && bytes > available) {
        write_size(available, have);
        return lw_fail(error, LW_NO_MEMORY, "%s needs %s, the system has %s available%s%s", what, need, have,
                       semicolon, advice);
    }
    return LW_OK;
}
