/** Parameters that options name: --covariance-of FILE|all and --resolution-of LIST. */
#ifndef LW_COMMAND_SELECTION_H
#define LW_COMMAND_SELECTION_H

#include "command/work.h"

/** Reads the two options into work->arguments->certainty; the lists are owned by work. LW_BAD_INPUT with
 * file:line:column for an id of the file that is no parameter, LW_BAD_USAGE for one of the list. */
lw_status lw_select_parameters(lw_work *work, lw_error *error);

#endif
