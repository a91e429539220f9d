/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the parts of lw_certainty_make share. Order of the work: all that needs columns of Q, then the
 *  inversion (which may overwrite the factor), then all that needs entries, then the global test, and last
 *  the variance factor. */
#ifndef LW_CERTAINTY_PART_H
#define LW_CERTAINTY_PART_H

#include "certainty/certainty.h"
#include "certainty/point_list.h"
#include "certainty/redundancy.h"
#include "certainty/shift.h"

typedef struct lw_certainty_work {
    const lw_system *system;
    const lw_estimate *estimate;
    const lw_certainty_options *options;
    const lw_watch *watch;
    lw_cofactor *cofactor;
    bool damped, noise; /**< noise: damped, and the penalty is no true prior */
    bool rows_wanted;   /**< reliability can and shall be made */
    lw_equations equations;
    double *variance;    /**< columns, z units, before the factor; NULL unknown */
    lw_decimal *refined; /**< columns, model units, or NULL: variances to twice the digits */
    lw_sigma_kind kind;
    double *known, *trials; /**< rows; see redundancy.h and separability.h */
    lw_shift shift;
    lw_redundancy *redundancy;
    lw_point_list *points; /**< points with axes, NULL none */
    double factor, s0;     /**< variance factor in use; s0 NaN unknown or zero */
    lw_certainty *out;
} lw_certainty_work;

/** sigma, kind, intervals, covariance: first what needs columns, later what needs entries, last the factor.
 *  */
lw_status lw_parameter_columns(lw_certainty_work *work, lw_error *error);
lw_status lw_parameter_entries(lw_certainty_work *work, lw_error *error);
void lw_parameter_finish(lw_certainty_work *work);
/** The joint covariance of options->covariance_of, before the factor. */
lw_status lw_parameter_covariance(lw_certainty_work *work, lw_error *error);
/** Statistics of the rows. */
lw_status lw_row_columns(lw_certainty_work *work, lw_error *error);
lw_status lw_row_entries(lw_certainty_work *work, lw_error *error);
lw_status lw_row_finish(lw_certainty_work *work, lw_error *error);
/** Groups of rows: the named ones in their order, then readings without one, then weighted priors. */
int64_t lw_group_slots(const lw_system *system);
int64_t lw_group_slot(const lw_system *system, int64_t i);
/** Variance factors by group. */
lw_status lw_group_factors_make(lw_certainty_work *work, lw_error *error);
/** Ellipses of points: entries outside the pattern are learned first, where they are few. */
lw_status lw_ellipse_columns(lw_certainty_work *work, lw_error *error);
lw_status lw_ellipses_make(lw_certainty_work *work, lw_error *error);

/** Semi-axes and azimuth (degrees clockwise from the second axis) of the standard ellipse of [xx xy; xy
 *  yy]. */
void lw_ellipse_axes(double xx, double xy, double yy, double *semi_major, double *semi_minor,
                     double *azimuth);

#endif
