/** Distributions, quantiles and random numbers (GSL, only here), and the critical values built from them.
 *
 *  Probabilities are in [0, 1]; quantiles return NaN outside their domain. Degrees of freedom are positive
 * doubles. */
#ifndef LW_CORE_CHANCE_H
#define LW_CORE_CHANCE_H

#include "core/status.h"

#include <stdint.h>

double lw_normal_cdf(double x);
double lw_normal_quantile(double p);
double lw_chi2_cdf(double x, double dof);   /**< P(chi-square <= x) */
double lw_chi2_upper(double x, double dof); /**< P(chi-square > x), accurate in the tail */
double lw_chi2_quantile(double p, double dof);
double lw_t_quantile(double p, double dof);
double lw_f_quantile(double p, double dof1, double dof2);
/** 2 min(F(x), 1 - F(x)) of chi-square: the two-sided probability of the global test. */
double lw_chi2_two_sided(double x, double dof);

/** Two-sided critical value of a standardized residual w ~ N(0,1): z(1 - alpha/2). Baarda (1968). */
double lw_w_critical(double alpha);
/** Two-sided critical value of tau with dof degrees of freedom: sqrt(dof) t / sqrt(dof - 1 + t^2),
 *  t = t(1 - alpha/2; dof - 1). NaN for dof < 2 (all |tau| = 1). Pope, NOAA TR NOS 65 NGS 1, 1976. */
double lw_tau_critical(double alpha, double dof);
/** delta0 = z(1 - alpha/2) + z(power): shift of w that is found with that power (4.1321... for 0.001, 0.80).
 */
double lw_noncentrality(double alpha, double power);
/** Per-test level for a family of `count`: 1 - (1 - alpha)^(1/count). Sidak, JASA 62:626-633, 1967. */
double lw_family_alpha(double alpha, double count);
/** Level of the global test on dof degrees of freedom that has the same noncentrality and power as the single
 * test (B-method of testing, Baarda 1968). */
double lw_b_method_alpha(double alpha, double power, double dof);
/** Multiplier of the standard ellipse of `dimension` (1, 2, 3) at `confidence`: sqrt(chi2(p; d)) for a stated
 * variance factor (dof = 0), sqrt(d F(p; d, dof)) for an estimated one. */
double lw_region_multiplier(double confidence, int dimension, double dof);

/** A stream of random numbers that only depends on (seed, stream). */
typedef struct lw_random lw_random;
lw_status lw_random_new(uint64_t seed, uint64_t stream, lw_random **out, lw_error *error);
void lw_random_free(lw_random *random);
double lw_random_normal(lw_random *random);                  /**< N(0, 1) */
double lw_random_uniform(lw_random *random);                 /**< [0, 1) */
double lw_random_sign(lw_random *random);                    /**< -1 or +1 */
uint64_t lw_random_below(lw_random *random, uint64_t count); /**< 0 .. count-1 */

#endif
