/* SPDX-License-Identifier: GPL-3.0-or-later */
/** A pack that is being read: the mapped file and its sections. */
#ifndef LW_PROBLEM_PACK_SOURCE_H
#define LW_PROBLEM_PACK_SOURCE_H

#include "core/watch.h"
#include "problem/pack_file.h"

#include <stdbool.h>

typedef struct source {
    const char *path;
    const char *bytes; /* the mapped file */
    size_t length;
    const lw_pack_section *table;
    uint64_t sections;
    lw_pack_sizes sizes;
    lw_problem *problem;
    lw_error *error;
} lw_pack_source;

/** Maps s->path (the mapping belongs to s->problem) and checks header, table and the checksum of every
 * section. */
lw_status lw_pack_open(lw_pack_source *s, const lw_watch *watch);
/** The section NAME+PART, or NULL. */
const lw_pack_section *lw_pack_get(const lw_pack_source *s, const char *name, const char *part);
const void *lw_pack_data(const lw_pack_source *s, const lw_pack_section *section);
/** A copy of `count` elements of a section to the pointer at `out`; NULL and LW_OK when an optional one is
 * absent. */
lw_status lw_pack_copy(const lw_pack_source *s, const char *name, const char *part, int64_t count,
                       size_t size, bool optional, void *out);
/** A section of exactly `count` elements, in the mapping; NULL when there is none. */
const void *lw_pack_borrow(const lw_pack_source *s, const char *name, const char *part, uint64_t count,
                           size_t size);
/** LW_BAD_INPUT: "PATH: found FOUND, expected EXPECTED"; the second for a section that is absent or of
 * another length. */
lw_status lw_pack_refuse(const lw_pack_source *s, const char *found, const char *expected);
lw_status lw_pack_refuse_length(const lw_pack_source *s, const char *name, const char *part);

#endif
