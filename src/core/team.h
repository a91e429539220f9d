/** A team of threads that wait passively (active waiting is ruinous on shared cores).
 *
 *  Work is cut into parts by the problem, never by the threads; which thread takes a part is left to chance,
 * so a part must write only what is its own, and sums over parts are taken by the caller in the order of the
 * parts. Then the bytes of every result are the same for any number of threads. */
#ifndef LW_CORE_TEAM_H
#define LW_CORE_TEAM_H

#include "core/status.h"

typedef struct lw_team lw_team;
typedef void lw_part(void *state, int part);

/** threads >= 1, the caller included; 0 = as many as there are processors. */
lw_status lw_team_new(int threads, lw_team **out, lw_error *error);
void lw_team_free(lw_team *team);
int lw_team_threads(const lw_team *team);

/** Calls work(state, 0 .. parts-1), each once, on any thread; returns when all are done. NULL team or one
 * part: inline. Not reentrant: a part must not call lw_team_run on the same team. */
void lw_team_run(lw_team *team, int parts, lw_part *work, void *state);

#endif
