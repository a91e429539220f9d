/** What a command found, as one struct: writers, report and verdict read it and nothing else. */
#ifndef LW_RUN_RUN_H
#define LW_RUN_RUN_H

#include "certainty/certainty.h"
#include "certainty/outlier.h"
#include "certainty/probe.h"
#include "problem/check.h"
#include "problem/problem.h"
#include "solve/engine.h"
#include "tradeoff/curve.h"

typedef struct lw_seconds {
    double read, solve, certainty, write;
} lw_seconds;

/** Everything is borrowed unless said; NULL or NaN where a command did not make it. */
typedef struct lw_run {
    const char *version;
    const char *command;      /**< "solve", "sweep", ... */
    const char *command_line; /**< the words as given */
    const char *folder;       /**< the run folder's final name */
    const lw_problem *problem;
    const lw_system *system;
    const lw_check *check; /**< hits and coverage */
    lw_engine_choice engine;
    const lw_estimate *estimate; /**< the answer (solve), or the chosen model (sweep) */
    const lw_curve *curve;       /**< sweep */
    const double *models;        /**< sweep: n x curve->count model values, or NULL */
    const lw_certainty *certainty;
    const lw_certainty_options *asked; /**< what was asked of it: meaning of sigma, lists of parameters */
    const lw_outlier_log *outliers;
    const lw_probe *probe;          /**< probe */
    const double *weight;           /**< rows: final robust weights, or NULL */
    const int8_t *at_bound;         /**< parameters: -1, 0, +1, or NULL */
    const double *bound_multiplier; /**< parameters */
    double damping;                 /**< lambda used; 0 none */
    const char *damping_chosen_by;  /**< "none", "value", "corner", "gcv", "discrepancy", "risk" */
    double effective_parameters;
    bool variance_estimated;
    double rms;                /**< root mean square of the residuals, unit of the readings */
    double variance_reduction; /**< 1 - misfit^2 / misfit^2 at x0 */
    double tolerance;
    uint64_t seed;
    bool interrupted;
    lw_log *warnings;
    lw_seconds seconds;
} lw_run;

/** The objective as one line, for report and summary. */
const char *lw_run_objective(void);
/** Fills rms and variance_reduction from estimate and system. */
lw_status lw_run_measure(lw_run *run, lw_error *error);

#endif
