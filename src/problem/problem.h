/* SPDX-License-Identifier: GPL-3.0-or-later */
/** A problem as its files state it: ids, decimals, blocks, conditions, bounds. Immutable once read.
 *
 *      minimise  (A x - b)' P (A x - b) + lambda^2 ||L (x - x0)||^2,  P = inverse covariance of the
 * observations subject to lower <= x <= upper and C x = d
 *
 *  m observations, n parameters. Arrays that a file did not give are NULL. Units are the user's. */
#ifndef LW_PROBLEM_PROBLEM_H
#define LW_PROBLEM_PROBLEM_H

#include "core/status.h"
#include "matrix/sparse.h"
#include "problem/ids.h"

#include <stdbool.h>
#include <stdint.h>

/** Columns that the program does not know and carries through to the output row of the same id. */
typedef struct lw_carried {
    int columns;
    char **name; /**< columns */
    int64_t rows;
    char *text;     /**< NUL-terminated fields one after another */
    int64_t *field; /**< rows x columns (row-major): offset into text, -1 = "" */
} lw_carried;
const char *lw_carried_text(const lw_carried *carried, int64_t row, int column);

/** One input file, for the report and summary.json. */
typedef struct lw_input_file {
    char *path;
    int64_t bytes;
    char sha256[65];
} lw_input_file;

/** Covariance of correlated observations, block by block. Members of block k: member[start[k] ..
 * start[k+1]-1]; its full symmetric matrix (size x size) from value[value_start[k]]. Unit: product of the
 * units of the two observations. */
typedef struct lw_covariance {
    int64_t blocks;
    int64_t *start, *value_start; /**< blocks + 1 */
    int32_t *member;
    double *value, *low;
    int32_t *block_of; /**< m: block of an observation, -1 uncorrelated */
} lw_covariance;

typedef struct lw_problem {
    lw_ids *observations; /**< m */
    lw_ids *parameters;   /**< n */
    int64_t m, n;
    lw_sparse *design; /**< m x n, low parts in design->low (NULL: none needed, or not kept) */
    bool low_kept;     /**< the low parts were asked for and kept */

    double *value, *value_low; /**< m */
    double *sigma, *sigma_low; /**< m, > 0; NULL: not given, unit weights, variance factor estimated.
                                  Correlated: sqrt of the diagonal */
    int32_t *group;            /**< m, number in group_names; NULL: no groups */
    lw_ids *group_names;
    lw_covariance *covariance; /**< NULL: uncorrelated */
    lw_carried observation_carried, parameter_carried;

    double *prior, *prior_low;             /**< n, x0; NULL: all 0 */
    double *prior_sigma, *prior_sigma_low; /**< n; NaN = none */
    bool *fixed;                           /**< n */
    double *fixed_value, *fixed_low;       /**< n; 0 where free */
    double *lower, *upper;                 /**< n; -inf, +inf where open */
    double *damp_weight;     /**< n, >= 0; 1 where blank, 0 where blank and prior_sigma is given */
    int8_t *datum;           /**< n, 1 yes, 0 no; NULL: all yes */
    int32_t *point, *region; /**< n, numbers in point_names, region_names; -1 blank */
    int8_t *axis;            /**< n, lw_axis */
    lw_ids *point_names, *region_names;
    double *coordinate[3]; /**< x, y, z: n each; NaN where blank; NULL: no such column */

    lw_sparse *penalty; /**< own L, rows x n; NULL */
    lw_ids *penalty_rows;
    lw_sparse *conditions;                   /**< C, c x n, with low; NULL */
    double *condition_value, *condition_low; /**< c, d */
    lw_ids *condition_names;

    lw_input_file *inputs;
    int input_count;
    char *value_unit, *parameter_unit; /**< "" where not given */
    char *folder;                      /**< as the user named it */
    int64_t repeated_added;            /**< pairs summed under --repeated add */
    void *mapping; /**< read from a pack: the mapped file that holds the design's arrays */
    size_t mapping_bytes;
} lw_problem;

typedef enum lw_axis {
    LW_AXIS_NONE = 0,
    LW_AXIS_EAST,
    LW_AXIS_NORTH,
    LW_AXIS_UP,
    LW_AXIS_X,
    LW_AXIS_Y,
    LW_AXIS_Z
} lw_axis;

void lw_problem_free(lw_problem *problem);

typedef struct lw_read_options {
    /** Other places of the files; NULL: FOLDER/design.csv (or design.mtx), FOLDER/observations.csv, ... */
    const char *design, *observations, *parameters, *covariance, *penalty, *conditions;
    const char *value_unit, *parameter_unit;
    bool add_repeated;
    bool keep_low; /**< keep the low parts of the design (dense, cholesky, qr); an iterative run does not want
                      them */
    bool tolerate; /**< inspect: return what could be read together with LW_BAD_INPUT */
    const char *const
        *reserved; /**< NULL-terminated output column names that a carried column must not have */
} lw_read_options;

/** Reads a problem folder (or a pack, see pack.h). LW_BAD_INPUT with all faults of the faulty files (up to
 * 20), *out NULL unless options->tolerate; then *out has what could be read (NaN where a number was faulty,
 * an empty design when there is none), and is NULL only when there is nothing to look at: no such folder, a
 * damaged pack. LW_SYSTEM when a file cannot be read. Result owned by the caller. */
lw_status lw_problem_read(const char *folder, const lw_read_options *options, const lw_watch *watch,
                          lw_problem **out, lw_error *error);

#endif
