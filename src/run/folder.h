/** A run folder that appears whole or not at all: files are written to a sibling folder, which is renamed
 * when all is done. */
#ifndef LW_RUN_FOLDER_H
#define LW_RUN_FOLDER_H

#include "core/status.h"

#include <stdbool.h>

typedef struct lw_folder lw_folder;

/** Says before any work whether DIR can be made: LW_BAD_USAGE when it exists without `overwrite`, or is no
 * run folder (it has neither summary.json nor is it empty), LW_SYSTEM when its parent cannot be written. */
lw_status lw_folder_check(const char *path, bool overwrite, lw_error *error);
/** Makes the sibling folder. */
lw_status lw_folder_begin(const char *path, bool overwrite, lw_folder **out, lw_error *error);
/** Path of a file in the sibling folder; valid until the next call. NULL when out of memory. */
const char *lw_folder_file(lw_folder *folder, const char *name);
/** Renames (exchanges, where DIR exists), removes what was replaced, frees. On failure nothing is left
 * behind. */
lw_status lw_folder_commit(lw_folder *folder, lw_error *error);
/** Removes the sibling folder and frees. NULL safe. */
void lw_folder_abandon(lw_folder *folder);

#endif
