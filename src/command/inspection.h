/** What inspect tells: facts of the files, then rank, datum, conditioning and the engine that `auto` would
 * take. */
#ifndef LW_COMMAND_INSPECTION_H
#define LW_COMMAND_INSPECTION_H

#include "command/work.h"

#include <stdio.h>

void lw_inspection_facts(const lw_work *work, FILE *to);
/** Rank and datum by a factorization of the undamped system where it fits the memory; a defect is LW_OK here
 * and is told in words with the parameters involved. */
lw_status lw_inspection_rank(lw_work *work, FILE *to, lw_error *error);

#endif
