/* SPDX-License-Identifier: GPL-3.0-or-later */
/** A problem in binary, for fast rereading: FOLDER/problem.lwpack holds everything a problem folder says,
 * ids, decimals and carried columns included, with names and digests of the CSV files it was made of. The
 * design's arrays are mapped, not read. A solution from a pack has the same bytes as one from the CSV files.
 *
 *  Layout (all numbers in the machine's own order, told by a mark): a header of 64 bytes (magic, version,
 * byte-order mark, length of the file, number of sections, checksum of header and table), a table of sections
 * (name, place, length, xxHash64), the sections, each on a multiple of 64 bytes. */
#ifndef LW_PROBLEM_PACK_H
#define LW_PROBLEM_PACK_H

#include "problem/problem.h"

#include <stdbool.h>

#define LW_PACK_NAME "problem.lwpack"

/** Writes FOLDER/problem.lwpack (FOLDER is made when it is not there) under another name first, renamed when
 * complete. LW_BAD_USAGE when the problem was read without low parts. LW_SYSTEM: disk. */
lw_status lw_pack_write(const lw_problem *problem, const char *folder, const lw_watch *watch,
                        lw_error *error);

/** Reads a pack file. LW_BAD_INPUT, naming what was found and expected, for one that is foreign, cut or
 * damaged. */
lw_status lw_pack_read(const char *path, const lw_read_options *options, const lw_watch *watch,
                       lw_problem **out, lw_error *error);

/** When `folder` is a pack file or holds one, reads it; *taken false: there is none, or one older than the
 * CSV files beside it (said in the log), and the CSV files are to be read. */
lw_status lw_pack_find(const char *folder, const lw_read_options *options, const lw_watch *watch, bool *taken,
                       lw_problem **out, lw_error *error);

#endif
