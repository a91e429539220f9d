/** The trade-off between misfit and size over a range of dampings, and what each criterion says of it.
 *
 *  Everything is read from one decomposition (solve/decomposition.h); lambda is the damping of the objective
 *      ||A z - b||^2 + lambda^2 ||L z||^2,
 *  never its square. Definitions, with rho = misfit^2 and m the observations used (no priors, none set
 * aside): gcv  = misfit^2 / (m - effective_parameters)^2 risk = misfit^2 - m + 2 effective_parameters
 *      curvature of (ln misfit, ln size), positive at a convex corner. */
#ifndef LW_TRADEOFF_CURVE_H
#define LW_TRADEOFF_CURVE_H

#include "solve/decomposition.h"

#include <stdbool.h>

typedef enum lw_criterion {
    LW_BY_CORNER = 0,
    LW_BY_GCV,
    LW_BY_DISCREPANCY,
    LW_BY_RISK,
    LW_CRITERIA /**< how many there are */
} lw_criterion;

/** "corner", "gcv", "discrepancy", "risk". */
const char *lw_criterion_name(lw_criterion criterion);
/** true and *out when `name` is a criterion. */
bool lw_criterion_find(const char *name, lw_criterion *out);

/** One damping of the curve. Unknown numbers are NaN. */
typedef struct lw_curve_row {
    lw_point point;
    double gcv, risk, curvature;
    bool converged; /**< error bound within the tolerance asked for (always with a direct engine) */
    bool usable;    /**< error bound within 1e-3: good enough for the curve; others are never picked */
} lw_curve_row;

#define LW_CHOICE_TEXT 512

/** What one criterion says. */
typedef struct lw_choice {
    lw_criterion criterion;
    double damping;  /**< NaN: the criterion picks none (the warning says why) */
    double from, to; /**< dampings between which the criterion is within 5 % of its optimum; NaN none */
    double value;    /**< curvature, gcv, chi_square or risk at the damping */
    lw_curve_row at; /**< the curve there */
    char warning[LW_CHOICE_TEXT]; /**< "" none */
} lw_choice;

typedef struct lw_curve {
    int count;
    lw_curve_row *row; /**< count, by increasing damping */
    int choices;
    lw_choice choice[LW_CRITERIA]; /**< those asked for, in the order of lw_criterion */
    double
        sigma_one; /**< largest singular value in standard form, as estimated; NaN where the grid was given */
    int64_t steps; /**< of an iterative engine; 0 direct */
    bool iterative;
    lw_status status; /**< LW_OK, LW_NOT_CONVERGED (a choice is not within the tolerance), LW_INTERRUPTED */
    double decades;   /**< lg of the largest over the smallest choice; NaN with fewer than two */
    char comparison[LW_CHOICE_TEXT]; /**< a sentence on how the choices compare; "" with fewer than two */
} lw_curve;

void lw_curve_free(lw_curve *curve);
/** The choice of a criterion, or NULL when it was not asked for. */
const lw_choice *lw_curve_choice(const lw_curve *curve, lw_criterion criterion);

/** gcv, risk and curvature of a point; sigma_stated 0: risk is NaN. */
void lw_curve_row_fill(const lw_system *system, bool sigma_stated, const lw_point *point, lw_curve_row *out);

#endif
