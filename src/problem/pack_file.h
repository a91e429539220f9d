/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What writer and reader of packs share: header, section table, and which arrays of a problem stand in which
 * section. */
#ifndef LW_PROBLEM_PACK_FILE_H
#define LW_PROBLEM_PACK_FILE_H

#include "problem/problem.h"

#include <stddef.h>
#include <stdint.h>
#include <string.h>

#define LW_PACK_MAGIC "\x89LWPACK\n"
#define LW_PACK_VERSION 1
#define LW_PACK_ORDER UINT32_C(0x01020304)
#define LW_PACK_ALIGNMENT 64
#define LW_PACK_MOST_SECTIONS 96

typedef struct lw_pack_header {
    char magic[8];
    uint32_t version, order;
    uint64_t bytes, sections; /**< of the whole file; in the table behind the header */
    uint64_t hash;            /**< of header (with 0 here) and table */
    uint64_t spare[3];        /**< 0 */
} lw_pack_header;

typedef struct lw_pack_section {
    char name[24]; /**< NUL-terminated */
    uint64_t offset, bytes, hash;
} lw_pack_section;

_Static_assert(sizeof(lw_pack_header) == LW_PACK_ALIGNMENT && sizeof(lw_pack_section) == 48,
               "no padding in a pack");

/** Section "sizes". */
typedef struct lw_pack_sizes {
    int64_t m, n, conditions, repeated_added;
} lw_pack_sizes;

/** What must hold for every element of an array. */
typedef enum lw_pack_rule {
    LW_PACK_FINITE,
    LW_PACK_POSITIVE,
    LW_PACK_POSITIVE_OR_NAN,
    LW_PACK_NOT_NEGATIVE,
    LW_PACK_FINITE_OR_NAN,
    LW_PACK_NOT_NAN,
    LW_PACK_FLAG,  /**< bytes, 0 or 1 */
    LW_PACK_AXIS,  /**< bytes, a lw_axis */
    LW_PACK_LABEL, /**< int32, a number of the ids at `names` */
    LW_PACK_LABEL_OR_BLANK
} lw_pack_rule;

typedef enum lw_pack_length { LW_PACK_M, LW_PACK_N, LW_PACK_C } lw_pack_length;

/** One array of lw_problem: offset is where its pointer stands. */
typedef struct lw_pack_array {
    const char *name;
    size_t offset;
    lw_pack_length length;
    lw_pack_rule rule;
    size_t names;   /**< LABEL: offset of the lw_ids pointer */
    size_t partner; /**< offset of another array that is there exactly when this is; 0 none */
} lw_pack_array;
extern const lw_pack_array lw_pack_arrays[];
extern const int lw_pack_array_count;
size_t lw_pack_element(lw_pack_rule rule); /**< bytes */
int64_t lw_pack_count(lw_pack_length length, const lw_pack_sizes *sizes);

/** Ids, sparse matrices and carried columns: name of the section (a prefix) and place in lw_problem. */
typedef struct lw_pack_member {
    const char *name;
    size_t offset;
} lw_pack_member;
extern const lw_pack_member lw_pack_ids[], lw_pack_matrices[], lw_pack_carried[];
#define LW_PACK_IDS 7
#define LW_PACK_MATRICES 3 /* the design first: it is mapped */
#define LW_PACK_CARRIED 2

/** A field of the problem by its offset. */
static inline const void *lw_pack_field(const lw_problem *problem, size_t offset)
{
    return (const char *)problem + offset;
}

/** The pointer that stands at this offset of the problem. */
static inline const void *lw_pack_pointer(const lw_problem *problem, size_t offset)
{
    const void *pointer;
    memcpy(&pointer, (const char *)problem + offset, sizeof pointer);
    return pointer;
}

/** Hash of header and table. */
uint64_t lw_pack_hash(const lw_pack_header *header, const lw_pack_section *table);

/** Whether a problem read from a pack is one that the readers of CSV files could have made: ranges, order,
 * signs. */
lw_status lw_pack_check(const lw_problem *problem, const lw_pack_sizes *sizes, const char *path,
                        lw_error *error);

#endif
