/* SPDX-License-Identifier: GPL-3.0-or-later */
/** How far each number may be trusted: per parameter, per observation, global. By the contract of the
 *  objective
 *
 *      minimise (A x - b)' P (A x - b) + lambda^2 ||L (x - x0)||^2
 *
 *  e = A x - b (predicted - observed), Q = (A'PA + lambda^2 L'L)^-1, Q_vv = P^-1 - A Q A' (lambda = 0),
 *  s0^2 = chi_square / degrees of freedom, factor = 1 (stated) or s0^2 (estimated).
 *
 *  Parameters (n, in the order of the problem; NaN = unknown):
 *      sigma       sqrt(factor Q_jj), unit of the parameter
 *      resolution  diagonal of the resolution matrix R = Q A'PA (1 where undamped and determined)
 *  With damping and `noise` Q is replaced by Q A'PA Q, the data noise carried through; rows are then unknown.
 *  Rows (observations, then weighted priors):
 *      predicted_sigma  sqrt(factor (A Q A')_ii), unit of the reading
 *      redundancy       r_i = (Q_vv P)_ii, 0 .. 1 when uncorrelated; NaN for a reading set aside
 *      standardized     w_i = (P e)_i / sqrt((P Q_vv P)_ii), with the sign of e; divided by s0 (tau) when
 *                       estimated
 *      detectable       delta0 sqrt(factor) / sqrt((P Q_vv P)_ii), unit of the reading
 *      bias_ratio       delta0 sqrt((1 - s_i) / s_i), s_i = (P Q_vv P)_ii / P_ii; s_i = r_i when uncorrelated
 *      error_estimate   -(P e)_i / (P Q_vv P)_ii: size of a single error in the reading, sign of the
 *                       reading's error
 *      largest_shift    the entry of Q A' P e_i detectable_i of largest size, signed; shifted_parameter
 *                       says whose (in large systems searched among the parameters of the reading's own
 *                       equations, see shift.h)
 *  A reading that is set aside has the statistics of its prediction error e_i with variance sigma_i^2 + (A
 *  Q A')_ii: standardized = e_i / sqrt(..), error_estimate = -e_i. The flags no_redundancy and weak, and
 *  all statistics, go by s_i: below 1e-6 there are none. Robust weights (row factors) count as part of P:
 *  what is reported after them takes the weights as given and is an approximation (see solve/robust.h).
 *  Sources: Baarda, A testing procedure for use in geodetic networks, Delft 1968; Pope, NOAA TR NOS 65 NGS
 *  1, 1976; Teunissen, Testing Theory, 2000; JCGM 100:2008. */
#ifndef LW_CERTAINTY_CERTAINTY_H
#define LW_CERTAINTY_CERTAINTY_H

#include "core/watch.h"
#include "solve/decomposition.h"

#include <stdbool.h>
#include <stdint.h>

typedef enum lw_sigma_kind {
    LW_SIGMA_NONE = 0,
    LW_SIGMA_EXACT,
    LW_SIGMA_SAMPLED,
    LW_SIGMA_UPPER_BOUND,
    LW_SIGMA_FIXED
} lw_sigma_kind;
const char *lw_sigma_kind_name(lw_sigma_kind kind); /**< "exact", "sampled", "upper_bound", "fixed", "none" */

/** Bits of a row's flag; written as words joined by ';'. */
enum {
    LW_FLAG_NO_REDUNDANCY = 1, /**< s < 1e-6: an error here cannot be seen */
    LW_FLAG_WEAK = 2,          /**< s < 0.1 */
    LW_FLAG_SUSPECT = 4,       /**< |standardized| above the per-test critical value */
    LW_FLAG_SET_ASIDE = 8,     /**< taken out by the outlier search */
    LW_FLAG_INSEPARABLE = 16   /**< its error cannot be told from that of another reading */
};

/** What the sigma of a damped model means. */
typedef enum lw_sigma_meaning {
    LW_MEANS_NOISE = 0, /**< data noise carried through, bias of the damping not included (default) */
    LW_MEANS_POSTERIOR  /**< the penalty is a true prior */
} lw_sigma_meaning;

typedef struct lw_certainty_options {
    bool variance_estimated; /**< multiply by s0^2 and test by tau; else the variance factor is 1 */
    double confidence;       /**< 0.95: intervals, ellipses, global test */
    double alpha, power;     /**< 0.001, 0.80 */
    lw_sigma_meaning meaning;
    bool sigma, reliability;      /**< what is wanted (both true for solve) */
    int samples;                  /**< for sampled sigma; 0 = default */
    const int64_t *covariance_of; /**< parameters whose joint covariance is wanted, or NULL */
    int64_t covariance_count;     /**< -1: all */
    const int64_t *resolution_of; /**< parameters whose row of the resolution matrix is wanted */
    int64_t resolution_count;
} lw_certainty_options;

typedef struct lw_global_test {
    double chi_square;
    /** observations used + weighted priors + conditions - rank; m - effective parameters when damped */
    double degrees_of_freedom;
    double variance_factor; /**< s0^2, NaN without redundancy */
    double probability;     /**< two-sided; NaN where it does not hold (damped, unit weights) */
    double lower, upper;    /**< acceptance range of chi_square at `confidence` */
    bool applies;           /**< sigma stated, undamped, redundancy > 0 */
    bool rejected, too_high;
    double alpha;
} lw_global_test;

typedef struct lw_group_factor {
    int32_t group; /**< number in problem->group_names; -1 weighted priors, -2 observations without a group */
    int64_t observations;
    double redundancy; /**< sum of r over the group; NaN unknown */
    double chi_square; /**< e'Pe of the group */
    double factor;     /**< chi_square / redundancy; NaN when redundancy is 0 */
    double component;  /**< estimated variance component (--variance-components), NaN not asked */
    double component_sigma;
} lw_group_factor;

typedef struct lw_covariance_entry {
    int64_t a, b; /**< parameters */
    double covariance;
} lw_covariance_entry;

/** Error ellipse of a point, or relative between two points that an observation joins, from parameters with
 *  `point` and `axis` (east or x, north or y, up or z). In three dimensions semi_major, semi_minor and
 *  azimuth are the shadow of the ellipsoid on the horizontal plane and vertical its half height, all with
 *  the multiplier of three dimensions. */
typedef struct lw_ellipse {
    int32_t point, to_point;       /**< numbers in problem->point_names; to_point -1: absolute */
    int dimension;                 /**< 2 or 3 */
    double semi_major, semi_minor; /**< at `confidence`, unit of the coordinates */
    double vertical;               /**< half height of the ellipsoid; NaN in 2-D */
    double azimuth; /**< degrees clockwise from north of the semi-major axis, 0 .. 180; NaN for a circle */
    double principal[3]; /**< semi-axes of the ellipsoid, decreasing; NaN in 2-D */
    double confidence;   /**< NaN: standard (multiplier 1) */
    double multiplier;
} lw_ellipse;

typedef struct lw_certainty {
    int64_t parameters, rows;
    double *sigma;
    int8_t *sigma_kind;
    double *interval_low, *interval_high;
    double *resolution; /**< NULL unknown */
    double *predicted_sigma, *redundancy, *standardized, *detectable, *bias_ratio, *error_estimate,
        *largest_shift;         /**< NULL unknown */
    int64_t *shifted_parameter; /**< -1 none */
    uint8_t *flag;              /**< rows */
    int64_t *inseparable;       /**< pairs of rows that cannot be told apart */
    int64_t inseparable_count;
    lw_global_test test;
    lw_group_factor *groups;
    int group_count;
    double critical, family_critical; /**< of |standardized| per test and for the whole family */
    double delta0;
    double interval_multiplier; /**< k of the intervals: normal or t quantile */
    double sigma_error; /**< relative error to be expected of the sigmas; 0 exactly rounded; NaN unknown */
    int samples;        /**< used for sampled sigmas */
    bool multiplied;    /**< sigmas carry s0 */
    bool shift_of_own;  /**< largest_shift was searched in the reading's own equations only */
    double effective_parameters; /**< damped: trace of the exact resolution, of the estimate, or of the probed
                                    one; NaN unknown */
    lw_covariance_entry *covariance;
    int64_t covariance_count;
    lw_ellipse *ellipses;
    int64_t ellipse_count;
    double *resolution_rows; /**< resolution_count x n */
    double resolution_error; /**< standard error of a probed diagonal; 0 exact */
} lw_certainty;
void lw_certainty_free(lw_certainty *certainty);

/** All of the above from a decomposition and its estimate; decomposition may be consumed by the selected
 *  inverse (hand_over) when `last` is true. Errors: LW_NO_MEMORY, LW_SYSTEM. */
lw_status lw_certainty_make(lw_decomposition *decomposition, const lw_estimate *estimate,
                            const lw_certainty_options *options, bool last, const lw_watch *watch,
                            lw_certainty **out, lw_error *error);

#endif
