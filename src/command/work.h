/** One run of a command from its arguments to its run folder: the steps that solve, sweep and probe share. */
#ifndef LW_COMMAND_WORK_H
#define LW_COMMAND_WORK_H

#include "command/arguments.h"
#include "command/progress.h"
#include "problem/check.h"
#include "run/run.h"

#include <time.h>

typedef struct lw_work {
    lw_arguments *arguments;
    lw_team *team;
    lw_log log;
    lw_watch watch;
    lw_progress progress;
    struct timespec mark;
    char *out; /**< the run folder */
    lw_problem *problem;
    lw_check check;
    lw_system *system;
    lw_engine_choice engine;
    lw_decomposition *decomposition;
    lw_estimate *estimate;
    lw_certainty *certainty;
    lw_outlier_log *outliers;
    lw_curve *curve;
    lw_probe *probe;
    double *models, *weight, *bound_multiplier;
    int8_t *at_bound;
    int64_t *covariance_of, *resolution_of;
    double *row_factor; /**< rows, robust weights and set-aside readings */
    lw_run run;
    lw_status qualified; /**< worst positive status so far */
} lw_work;

/** Threads, log, progress; reads and checks the problem. With read.tolerate a faulty problem is kept as far
 * as it was read. */
lw_status lw_work_read(lw_work *work, lw_arguments *arguments, lw_error *error);
/** The same, but first makes sure that the run folder can be made. */
lw_status lw_work_open(lw_work *work, lw_arguments *arguments, lw_error *error);
/** The run folder: --out, or PROBLEM-COMMAND without the slashes at the end of PROBLEM. Caller frees. */
char *lw_work_out(const lw_arguments *arguments);
/** Makes (or makes anew) the system with the row factors as they stand. */
lw_status lw_work_system(lw_work *work, lw_error *error);
/** Decomposes for a sweep or for one damping. lambda 0: undamped. */
lw_status lw_work_decompose(lw_work *work, double lambda, bool sweep, lw_error *error);
/** The damping asked for: as given, or chosen by a sweep, whose decomposition then also gives the estimate.
 * LW_UNSOLVABLE when the criterion picks none. */
lw_status lw_work_damping(lw_work *work, double *lambda, lw_error *error);
/** What the curve says of the criterion that --damping names; LW_UNSOLVABLE, with the reason, when it picks
 * none. */
lw_status lw_work_choice(lw_work *work, const lw_choice **out, lw_error *error);
/** Sweeps and fills curve; LW_OK, or a positive status that is also kept in `qualified`. */
lw_status lw_work_sweep(lw_work *work, lw_error *error);
/** The estimate at lambda with everything that goes with it: bounds, robust weights, outliers, certainty. */
lw_status lw_work_estimate(lw_work *work, double lambda, const char *chosen_by, lw_error *error);
/** Models of all dampings of the curve (n x count), in model units, where they fit. */
lw_status lw_work_models(lw_work *work, lw_error *error);
/** Writes the run folder with every file that the run has, and prints the verdict. */
lw_status lw_work_write(lw_work *work, lw_error *error);
void lw_work_close(lw_work *work);

/** Seconds since the last call (or open), and starts anew. */
double lw_work_lap(lw_work *work);
/** Exit status of a run that ended with `status` (see the contract); prints the message of a failure. */
int lw_work_exit(const lw_work *work, lw_status status, const lw_error *error);

#endif
