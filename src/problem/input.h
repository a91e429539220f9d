/* SPDX-License-Identifier: GPL-3.0-or-later */
/** One input file of a problem while it is read: its rows, its faults, its digest. Faults are collected and
 * reading goes on; only what is no fault of the file (memory, disk, a cancel) ends it at once. */
#ifndef LW_PROBLEM_INPUT_H
#define LW_PROBLEM_INPUT_H

#include "core/decimal.h"
#include "problem/problem.h"
#include "table/csv_read.h"

#include <stdbool.h>
#include <stdint.h>

/** Room for the text of lw_show. */
#define LW_SHOWN LW_CSV_FOUND

/** What the readers of the files share. */
typedef struct lw_reading {
    const lw_read_options *options;
    const lw_watch *watch;
    lw_error *error; /**< never NULL */
    lw_problem *problem;
    bool faulty;             /**< some file had a fault */
    bool covariance_given;   /**< there is a covariance file */
    bool observations_whole; /**< observations without a fault, so that an unknown id is a fault of the other
                                file */
    bool parameters_given, parameters_whole;
    lw_csv *observations; /**< kept for places in later messages; closed at the end */
    int sigma_column;     /**< of observations; -1 none */
} lw_reading;

typedef struct lw_input {
    lw_reading *reading;
    lw_csv *csv; /**< NULL when the header was faulty */
    int before;  /**< faults before this file */
    bool ended;  /**< all rows were read */
} lw_input;

/** LW_OK also when the file is faulty (csv is NULL then, and the reading is marked). */
lw_status lw_input_open(lw_reading *reading, const char *path, lw_input *out);
/** Column number; -1 and a fault when it is missing or csv is NULL. */
int lw_input_require(lw_input *input, const char *name, const char *header);
/** The next batch; batch->rows 0 at the end and after LW_MOST_FAULTS faults. */
lw_status lw_input_next(lw_input *input, lw_csv_batch *batch);
/** Whether this file had a fault so far. */
bool lw_input_faulty(const lw_input *input);
/** "PATH:line:column: found FOUND, expected EXPECTED". */
void lw_input_refuse(lw_input *input, int64_t row, int c, const char *expected, const char *found, ...)
    __attribute__((format(printf, 5, 6)));
/** The file has no row: "PATH:line:1: found no row under the header, expected EXPECTED". */
void lw_input_refuse_empty(lw_input *input, const char *expected);
/** Notes size and digest among the problem's inputs and closes; safe after a failure. */
lw_status lw_input_close(lw_input *input);
lw_status lw_input_note(lw_reading *reading, const char *path, int64_t bytes, const char *sha256);
/** Any fault that lw_error already got: marks the reading. */
void lw_reading_fault(lw_reading *reading, const char *format, ...) __attribute__((format(printf, 2, 3)));

/** The field, or an id, as it can stand in a message (lw_csv_quote). */
const char *lw_show(const lw_field *field, char text[LW_SHOWN]);
const char *lw_show_id(const lw_ids *ids, int64_t i, char text[LW_SHOWN]);

/** Beyond these sizes the quotient of a reading and its sigma, or its square, is no double any more. */
#define LW_LARGEST_NUMBER 1e75
#define LW_LEAST_SIGMA 1e-75

typedef enum lw_demand { LW_ANY_NUMBER, LW_POSITIVE, LW_NOT_NEGATIVE } lw_demand;
/** The number of field c of row `row`; false, *out = NaN and a fault when it is none or not what is demanded.
 */
bool lw_input_number(lw_input *input, int64_t row, int c, const lw_field *field, lw_demand demand,
                     lw_decimal *out);
/** Refuses an empty id; false then. */
bool lw_input_id(lw_input *input, int64_t row, int c, const lw_field *field);

/** Place of column c of the header (not of a row); line 0 when it is not found. */
lw_place lw_header_place(const char *path, int c);

#endif
