/** What a call says of its outcome: negative an error, 0 done, positive "usable but qualified".
 *
 *  A function that can fail returns lw_status and takes a caller-owned lw_error, last argument, which may be
 * NULL. Nothing below the command layer prints or exits. Why an iteration stopped is a result (lw_stop), not
 * an error. */
#ifndef LW_CORE_STATUS_H
#define LW_CORE_STATUS_H

#include <stddef.h>

typedef enum lw_status {
    LW_OK = 0,
    LW_NOT_CONVERGED = 1, /**< the result is the last iterate; its error bound says how far it is trusted */
    LW_INTERRUPTED = 2,   /**< cancelled from outside; what was known is returned, marked */
    LW_QUALIFIED = 3,     /**< usable, with a warning in the log that changes how it may be used */
    LW_BAD_USAGE = -2,    /**< options that do not go together (exit 2) */
    LW_BAD_INPUT = -3,    /**< a fault in the files, with file:line:column (exit 3) */
    LW_UNSOLVABLE = -4,   /**< rank defect, contradictory conditions, no corner (exit 4) */
    LW_NO_MEMORY = -5,    /**< allocation failed, or the memory budget forbids the work (exit 5) */
    LW_SYSTEM = -6,       /**< disk, permission, a library that failed (exit 5) */
    LW_BAD_SHAPE = -7     /**< a caller's mistake: sizes that do not match (exit 5) */
} lw_status;

/** Most faults of one file that are told at once. */
#define LW_MOST_FAULTS 20
#define LW_ERROR_TEXT 8192

/** The message of a failed call: lines separated by newlines, no final newline. Zero-initialise: lw_error e =
 * {0}; */
typedef struct lw_error {
    lw_status status;
    int faults; /**< messages added, also those that no longer fitted */
    char text[LW_ERROR_TEXT];
} lw_error;

/** Replaces the message and returns `status`, so that a failure is one statement:
 *      return lw_fail(error, LW_BAD_INPUT, "%s:%ld:%ld: found ..., expected ...", ...);
 *  error may be NULL. */
lw_status lw_fail(lw_error *error, lw_status status, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

/** Adds one more line (up to LW_MOST_FAULTS; later ones are counted only) and returns `status`. */
lw_status lw_fail_also(lw_error *error, lw_status status, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

/** Puts the lines FILE:line:column: ... of each file into the order of the lines (faults that are found late
 * come first where they stand first). Lines without a place keep theirs. */
void lw_error_order(lw_error *error);

/** LW_NO_MEMORY with "out of memory: WHAT needs N bytes". */
lw_status lw_fail_memory(lw_error *error, const char *what, size_t bytes);

/** The word for a status, "not converged". */
const char *lw_status_name(lw_status status);

#endif
