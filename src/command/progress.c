/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/progress.h"

#include <stdio.h>
#include <string.h>
#include <unistd.h>

volatile sig_atomic_t lw_interrupt_asked;

static void on_interrupt(int number)
{
    (void)number;
    if (lw_interrupt_asked) _exit(130);
    lw_interrupt_asked = 1;
}

void lw_interrupt_install(void)
{
    struct sigaction action = {.sa_handler = on_interrupt};
    sigemptyset(&action.sa_mask);
    sigaction(SIGINT, &action, NULL);
    sigaction(SIGTERM, &action, NULL);
    signal(SIGPIPE, SIG_IGN);
}

static double since(struct timespec from)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    return (double)(now.tv_sec - from.tv_sec) + 1e-9 * (double)(now.tv_nsec - from.tv_nsec);
}

void lw_progress_begin(lw_progress *progress, bool quiet)
{
    memset(progress, 0, sizeof *progress);
    progress->shown = !quiet && isatty(STDERR_FILENO);
}

static void write_remaining(double seconds, char *text, size_t room)
{
    if (seconds < 90.0)
        snprintf(text, room, ", about %.0f s left", seconds);
    else if (seconds < 5400.0)
        snprintf(text, room, ", about %.0f min left", seconds / 60.0);
    else
        snprintf(text, room, ", about %.1f h left", seconds / 3600.0);
}

void lw_progress_tick(void *state, const char *what, double done, double total, const char *note)
{
    lw_progress *progress = state;
    if (!progress->shown) return;
    if (strncmp(progress->what, what, sizeof progress->what - 1) != 0) {
        snprintf(progress->what, sizeof progress->what, "%s", what);
        clock_gettime(CLOCK_MONOTONIC, &progress->phase);
        progress->last = progress->phase;
        return;
    }
    double elapsed = since(progress->phase);
    if (elapsed < 1.0 || since(progress->last) < 0.2) return;
    clock_gettime(CLOCK_MONOTONIC, &progress->last);
    char remaining[48] = "";
    if (total > 0.0 && done > 0.0 && done < total)
        write_remaining(elapsed * (total - done) / done, remaining, sizeof remaining);
    if (total > 0.0)
        fprintf(stderr, "\r\033[K%s: %.0f %%%s%s%s", what, 100.0 * done / total, remaining, *note ? "  " : "",
                note);
    else
        fprintf(stderr, "\r\033[K%s: %.0f s%s%s", what, elapsed, *note ? "  " : "", note);
    fflush(stderr);
    progress->line = true;
}

void lw_progress_end(lw_progress *progress)
{
    if (progress->line) fputs("\r\033[K", stderr);
    progress->line = false;
}
