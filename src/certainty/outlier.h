/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Search for outliers: one reading at a time, the most significant first, until no statistic is above the
 *  critical value; then every reading that was set aside is tried again, and comes back when its statistic,
 *  alone, is below it.
 *
 *  The critical value is that of the whole family of readings: each is tested at 1 - confidence^(1/n), so
 *  that data without an error lose a reading in only 1 - confidence of all cases (5 % at 0.95), however
 *  many readings there are. The per-test level alpha of the flag `suspect` would do so in 6 % at 60
 *  readings and in nearly every case at 10 000. A reading whose error cannot be told from that of another
 *  is never set aside: it is logged as `kept`, with the name of its rival; while the search goes on it is
 *  left out so that it does not hide others. Readings without redundancy have no statistic and stay.
 *  Statistics are updated from one decomposition (deflation.h), not solved anew.
 *  Sources: Baarda 1968; Kok 1984; Teunissen, Testing Theory, 2000. */
#ifndef LW_CERTAINTY_OUTLIER_H
#define LW_CERTAINTY_OUTLIER_H

#include "certainty/certainty.h"
#include "solve/engine.h"

typedef struct lw_outlier_step {
    int step;
    int64_t row;
    const char *action; /**< "set_aside", "reinstated", "kept_aside", "kept" (not separable, no redundancy) */
    double statistic, critical;
    char reason[200];
} lw_outlier_step;

typedef struct lw_outlier_log {
    lw_outlier_step *steps;
    int64_t count;
    double *row_factor; /**< rows: 0 where set aside at the end, 1 elsewhere */
    int64_t set_aside;
} lw_outlier_log;
void lw_outlier_log_free(lw_outlier_log *log);

/** Undamped problems. most: upper limit of readings set aside (0 = a tenth of the rows); two degrees of
 *  freedom are always left. The system is that of the full problem; the log's row_factor makes the final
 *  one. Errors: LW_BAD_USAGE when the engine has no entries of the inverse; those of solving. */
lw_status lw_outlier_search(const lw_problem *problem, const lw_system_options *system_options,
                            const lw_solve_options *solve_options, const lw_certainty_options *options,
                            int64_t most, const lw_watch *watch, lw_outlier_log **out, lw_error *error);

#endif
