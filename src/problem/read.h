/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The readers of the single files of a problem, in the order in which they are called. Each returns LW_OK
 * also when the file is faulty: faults are in reading->error and reading->faulty is set. */
#ifndef LW_PROBLEM_READ_H
#define LW_PROBLEM_READ_H

#include "problem/input.h"
#include "problem/triplets.h"

lw_status lw_read_observations(lw_reading *reading, const char *path);
lw_status lw_read_parameters(lw_reading *reading, const char *path);
lw_status lw_read_design(lw_reading *reading, const char *path);
lw_status lw_read_market(lw_reading *reading, const char *path);
lw_status lw_read_covariance(lw_reading *reading, const char *path);
lw_status lw_read_penalty(lw_reading *reading, const char *path);
lw_status lw_read_conditions(lw_reading *reading, const char *path);

/** Observations that no row of the design names (hit[i] false) are refused at their own place, when both
 * files are otherwise whole. */
void lw_refuse_without_equation(lw_reading *reading, const bool *hit);
/** The matrix of the triplets, with a fault at the later row of every repeated pair unless they are to be
 * added; c: column of the file where the fault is told; names: of the rows. Also *added, pairs summed. */
lw_status lw_read_matrix(lw_input *input, lw_triplets *triplets, const lw_ids *rows, int c, lw_sparse **out,
                         int64_t *added);

/** A row of a covariance file. */
typedef struct lw_covariance_entry {
    int32_t a, b;
    int64_t row; /**< of the file */
    lw_decimal value;
} lw_covariance_entry;

/** Makes blocks of the entries (each pair once): sigma from the diagonals, full matrices, checked to be
 * positive definite. */
lw_status lw_covariance_make(lw_input *input, const lw_covariance_entry *entries, int64_t count, int column);

/** FOLDER/NAME, freed by the caller; NULL without memory. */
char *lw_join_path(const char *folder, const char *name);

#endif
