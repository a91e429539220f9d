/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A job is open while parts may still be taken. The caller takes parts itself, closes the job when none is
 * left, and waits only for those threads that had joined it: one that wakes up late finds the job closed and
 * sleeps again. */
#define _GNU_SOURCE 1 /* CPU_COUNT */
#include "core/team.h"

#include "core/memory.h"

#include <pthread.h>
#include <sched.h>
#include <signal.h>
#include <stdatomic.h>
#include <stdbool.h>
#include <string.h>

#define MOST_THREADS 1024

struct lw_team {
    pthread_mutex_t lock;
    pthread_cond_t start, done;
    lw_part *work; /* NULL: no job is open */
    void *state;
    int parts;
    atomic_int next; /* the next part to take */
    int joined;      /* threads, the caller aside, that are in the job */
    unsigned job;    /* counts jobs, so that nobody joins one twice */
    bool ending;
    int threads, started;
    pthread_t thread[];
};

static void take_parts(lw_team *team, lw_part *work, void *state, int parts)
{
    for (;;) {
        int part = atomic_fetch_add_explicit(&team->next, 1, memory_order_relaxed);
        if (part >= parts) return;
        work(state, part);
    }
}

static void *serve(void *pointer)
{
    lw_team *team = pointer;
    unsigned seen = 0;
    pthread_mutex_lock(&team->lock);
    for (;;) {
        while (!team->ending && (team->work == NULL || team->job == seen))
            pthread_cond_wait(&team->start, &team->lock);
        if (team->ending) break;
        seen = team->job;
        lw_part *work = team->work;
        void *state = team->state;
        int parts = team->parts;
        team->joined++;
        pthread_mutex_unlock(&team->lock);
        take_parts(team, work, state, parts);
        pthread_mutex_lock(&team->lock);
        if (--team->joined == 0) pthread_cond_signal(&team->done);
    }
    pthread_mutex_unlock(&team->lock);
    return NULL;
}

static int processors(void)
{
    cpu_set_t set;
    if (sched_getaffinity(0, sizeof set, &set) != 0) return 1;
    int count = CPU_COUNT(&set);
    return count > 0 ? count : 1;
}

/* Signals are for the caller's thread: the others are started with all of them blocked. */
static int start_threads(lw_team *team)
{
    sigset_t all, before;
    sigfillset(&all);
    pthread_sigmask(SIG_SETMASK, &all, &before);
    int reason = 0;
    while (reason == 0 && team->started < team->threads - 1) {
        reason = pthread_create(&team->thread[team->started], NULL, serve, team);
        if (reason == 0) team->started++;
    }
    pthread_sigmask(SIG_SETMASK, &before, NULL);
    return reason;
}

lw_status lw_team_new(int threads, lw_team **out, lw_error *error)
{
    *out = NULL;
    if (threads < 0 || threads > MOST_THREADS)
        return lw_fail(error, LW_BAD_SHAPE, "a team has 1 to %d threads, not %d", MOST_THREADS, threads);
    if (threads == 0) threads = processors();
    if (threads > MOST_THREADS) threads = MOST_THREADS;
    size_t bytes = sizeof(lw_team) + (size_t)(threads - 1) * sizeof(pthread_t);
    lw_team *team = lw_alloc_zero(1, bytes);
    if (team == NULL) return lw_fail_memory(error, "the team of threads", bytes);
    pthread_mutex_init(&team->lock, NULL);
    pthread_cond_init(&team->start, NULL);
    pthread_cond_init(&team->done, NULL);
    atomic_init(&team->next, 0);
    team->threads = threads;
    int reason = start_threads(team);
    if (reason != 0) {
        int started = team->started + 1;
        lw_team_free(team);
        return lw_fail(error, LW_SYSTEM, "cannot start thread %d of %d: %s", started + 1, threads,
                       strerror(reason));
    }
    *out = team;
    return LW_OK;
}

void lw_team_free(lw_team *team)
{
    if (team == NULL) return;
    pthread_mutex_lock(&team->lock);
    team->ending = true;
    pthread_cond_broadcast(&team->start);
    pthread_mutex_unlock(&team->lock);
    for (int i = 0; i < team->started; i++) pthread_join(team->thread[i], NULL);
    pthread_cond_destroy(&team->done);
    pthread_cond_destroy(&team->start);
    pthread_mutex_destroy(&team->lock);
    lw_free(team);
}

int lw_team_threads(const lw_team *team)
{
    return team != NULL ? team->threads : 1;
}

/* False when a job is open already: its parts then run inline. */
static bool open_job(lw_team *team, int parts, lw_part *work, void *state)
{
    pthread_mutex_lock(&team->lock);
    bool idle = team->work == NULL && team->joined == 0;
    if (idle) {
        team->work = work;
        team->state = state;
        team->parts = parts;
        team->job++;
        atomic_store_explicit(&team->next, 0, memory_order_relaxed);
        if (parts - 1 >= team->started)
            pthread_cond_broadcast(&team->start);
        else
            for (int i = 0; i < parts - 1; i++) pthread_cond_signal(&team->start);
    }
    pthread_mutex_unlock(&team->lock);
    return idle;
}

void lw_team_run(lw_team *team, int parts, lw_part *work, void *state)
{
    if (team == NULL || team->started == 0 || parts <= 1 || !open_job(team, parts, work, state)) {
        for (int part = 0; part < parts; part++) work(state, part);
        return;
    }
    take_parts(team, work, state, parts);
    pthread_mutex_lock(&team->lock);
    team->work = NULL;
    while (team->joined > 0) pthread_cond_wait(&team->done, &team->lock);
    pthread_mutex_unlock(&team->lock);
}
