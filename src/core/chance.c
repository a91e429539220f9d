/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/chance.h"

#include "core/memory.h"

#include "core/decimal.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <math.h>
#include <pthread.h>
#include <stdbool.h>

/* GSL's default handler ends the process on an underflow. */
static void quieten(void)
{
    (void)gsl_set_error_handler_off();
}

static void quiet(void)
{
    static pthread_once_t once = PTHREAD_ONCE_INIT;
    (void)pthread_once(&once, quieten);
}

/* A distribution on the positive numbers with up to two shape numbers, and both tails so that neither loses
 * digits. GSL's own quantiles fail for many and for broken degrees of freedom: only its tails are used. */
typedef struct family {
    double (*lower)(double x, double a, double b);
    double (*upper)(double x, double a, double b);
    double (*density)(double x, double a, double b);
} family;

/* x of the tail p <= 1/2: Newton steps on the logarithm of the tail, T log(T / p) / f, kept between bounds
 * that the signs give, and halving these where a step leaves them. */
static double invert(const family *of, double p, bool is_upper, double a, double b, double x)
{
    double low = 0.0, high = LW_INFINITY, last = LW_INFINITY;
    if (!(x > 0.0 && x < 1e300)) x = 1.0;
    for (int step = 0; step < 2000 && x > 0.0 && x < 1e300; step++) {
        double tail = is_upper ? of->upper(x, a, b) : of->lower(x, a, b);
        if (isnan(tail)) return LW_NAN;
        if (tail == p) return x;
        if ((tail < p) == is_upper)
            high = x;
        else
            low = x;
        double change = tail * log1p((tail - p) / p) / of->density(x, a, b);
        double next = is_upper ? x + change : x - change;
        if (!(next > low && next < high) || !isfinite(change))
            next = isinf(high) ? 4.0 * x : low == 0.0 ? 0.25 * x : sqrt(low) * sqrt(high);
        double moved = fabs(next - x);
        if (moved <= 2e-16 * x || (moved <= 1e-9 * x && moved >= last)) return next;
        last = moved;
        x = next;
    }
    return x;
}

static double quantile(const family *of, double p, double a, double b, double guess)
{
    quiet();
    if (!(p >= 0.0 && p <= 1.0)) return LW_NAN;
    if (p == 0.0) return 0.0;
    if (p == 1.0) return LW_INFINITY;
    return p <= 0.5 ? invert(of, p, false, a, b, guess) : invert(of, 1.0 - p, true, a, b, guess);
}

double lw_normal_cdf(double x)
{
    return 0.5 * erfc(-x / sqrt(2.0));
}

/* x of the tail p <= 1/2 above it: Newton on erfc, f = exp(-x^2 / 2) / sqrt(2 pi). */
static double normal_upper_quantile(double p)
{
    if (p == 0.0) return LW_INFINITY;
    double x = gsl_cdf_ugaussian_Qinv(p);
    for (int step = 0; step < 2; step++) {
        double density = exp(-0.5 * x * x) / sqrt(2.0 * M_PI);
        double change = (0.5 * erfc(x / sqrt(2.0)) - p) / density;
        if (isfinite(change) && fabs(change) < 1e-6) x += change;
    }
    return x;
}

double lw_normal_quantile(double p)
{
    quiet();
    if (!(p >= 0.0 && p <= 1.0)) return LW_NAN;
    return p <= 0.5 ? -normal_upper_quantile(p) : normal_upper_quantile(1.0 - p);
}

static double chi2_lower(double x, double dof, double unused)
{
    (void)unused;
    return gsl_cdf_chisq_P(x, dof);
}

static double chi2_above(double x, double dof, double unused)
{
    (void)unused;
    return gsl_cdf_chisq_Q(x, dof);
}

static double chi2_density(double x, double dof, double unused)
{
    (void)unused;
    return gsl_ran_chisq_pdf(x, dof);
}

static const family chi2 = {chi2_lower, chi2_above, chi2_density};

double lw_chi2_cdf(double x, double dof)
{
    quiet();
    if (!(dof > 0.0) || isnan(x)) return LW_NAN;
    return x <= 0.0 ? 0.0 : isinf(x) ? 1.0 : gsl_cdf_chisq_P(x, dof);
}

double lw_chi2_upper(double x, double dof)
{
    quiet();
    if (!(dof > 0.0) || isnan(x)) return LW_NAN;
    return x <= 0.0 ? 1.0 : isinf(x) ? 0.0 : gsl_cdf_chisq_Q(x, dof);
}

double lw_chi2_quantile(double p, double dof)
{
    if (!(dof > 0.0) || isinf(dof)) return LW_NAN;
    /* Wilson & Hilferty, PNAS 17:684-688, 1931 */
    double root = 1.0 - 2.0 / (9.0 * dof) + lw_normal_quantile(p) * sqrt(2.0 / (9.0 * dof));
    return quantile(&chi2, p, dof, 0.0, dof * root * root * root);
}

double lw_chi2_two_sided(double x, double dof)
{
    double lower = lw_chi2_cdf(x, dof), upper = lw_chi2_upper(x, dof);
    if (isnan(lower) || isnan(upper)) return LW_NAN;
    return fmin(1.0, 2.0 * fmin(lower, upper));
}

/* P(T > t) = I(dof / (dof + t^2); dof / 2, 1 / 2) / 2, and for small t by the other end of the beta function.
 */
static double t_upper(double t, double dof, double unused)
{
    (void)unused;
    double square = t * t;
    if (square < 3.0) return 0.5 * gsl_cdf_beta_Q(square / (dof + square), 0.5, 0.5 * dof);
    return 0.5 * gsl_cdf_beta_P(dof / (dof + square), 0.5 * dof, 0.5);
}

static double t_lower(double t, double dof, double unused)
{
    return 1.0 - t_upper(t, dof, unused);
}

static double t_density(double t, double dof, double unused)
{
    (void)unused;
    return gsl_ran_tdist_pdf(t, dof);
}

static const family student = {t_lower, t_upper, t_density};

/* t of the tail p <= 1/2 above it. */
static double t_upper_quantile(double p, double dof)
{
    if (p == 0.0) return LW_INFINITY;
    if (p == 0.5) return 0.0;
    if (dof == 1.0) return 1.0 / tan(M_PI * p);
    if (dof > 1e6) { /* Abramowitz & Stegun 26.7.5 */
        double z = normal_upper_quantile(p), square = z * z;
        return z + z * (square + 1.0) / (4.0 * dof) +
               z * ((5.0 * square + 16.0) * square + 3.0) / (96.0 * dof * dof);
    }
    return invert(&student, p, true, dof, 0.0, normal_upper_quantile(p));
}

double lw_t_quantile(double p, double dof)
{
    quiet();
    if (!(p >= 0.0 && p <= 1.0) || !(dof > 0.0)) return LW_NAN;
    return p <= 0.5 ? -t_upper_quantile(p, dof) : t_upper_quantile(1.0 - p, dof);
}

static const family fisher = {gsl_cdf_fdist_P, gsl_cdf_fdist_Q, gsl_ran_fdist_pdf};

/* Closed form for two numerator degrees of freedom: F = (nu / 2) ((1 - p)^(-2 / nu) - 1). */
double lw_f_quantile(double p, double dof1, double dof2)
{
    if (!(p >= 0.0 && p <= 1.0) || !(dof1 > 0.0) || !(dof2 > 0.0)) return LW_NAN;
    if (isinf(dof2)) return lw_chi2_quantile(p, dof1) / dof1;
    if (dof1 == 2.0) return 0.5 * dof2 * expm1(-2.0 / dof2 * log1p(-p));
    return quantile(&fisher, p, dof1, dof2, 1.0);
}

double lw_w_critical(double alpha)
{
    quiet();
    if (!(alpha > 0.0 && alpha <= 1.0)) return LW_NAN;
    return normal_upper_quantile(0.5 * alpha);
}

double lw_tau_critical(double alpha, double dof)
{
    quiet();
    if (!(alpha > 0.0 && alpha <= 1.0) || !(dof >= 2.0)) return LW_NAN;
    double t = t_upper_quantile(0.5 * alpha, dof - 1.0);
    if (isinf(t)) return sqrt(dof);
    return sqrt(dof) * t / sqrt(dof - 1.0 + t * t);
}

double lw_noncentrality(double alpha, double power)
{
    return lw_w_critical(alpha) + lw_normal_quantile(power);
}

double lw_family_alpha(double alpha, double count)
{
    if (!(alpha >= 0.0 && alpha <= 1.0) || !(count > 0.0)) return LW_NAN;
    return -expm1(log1p(-alpha) / count);
}

/* P(noncentral chi-square > x) = sum_j Poisson(j; lambda / 2) P(chi-square with dof + 2 j > x). */
static double noncentral_upper(double x, double dof, double lambda)
{
    double mean = 0.5 * lambda, width = 12.0 * sqrt(mean) + 40.0, sum = 0.0;
    unsigned from = mean > width ? (unsigned)(mean - width) : 0, to = (unsigned)(mean + width);
    for (unsigned j = from; j <= to; j++)
        sum += gsl_ran_poisson_pdf(j, mean) * gsl_cdf_chisq_Q(x, dof + 2.0 * j);
    return sum;
}

double lw_b_method_alpha(double alpha, double power, double dof)
{
    quiet();
    double shift = lw_noncentrality(alpha, power), lambda = shift * shift;
    if (!(shift > 0.0) || !(power > 0.0 && power < 1.0) || !(dof > 0.0)) return LW_NAN;
    double low = 0.0, high = dof + lambda;
    while (noncentral_upper(high, dof, lambda) > power) high *= 2.0;
    for (int step = 0; step < 200 && high - low > 4e-16 * high; step++) {
        double middle = 0.5 * (low + high);
        if (noncentral_upper(middle, dof, lambda) > power)
            low = middle;
        else
            high = middle;
    }
    return lw_chi2_upper(0.5 * (low + high), dof);
}

double lw_region_multiplier(double confidence, int dimension, double dof)
{
    if (dimension < 1 || dimension > 3 || !(confidence >= 0.0 && confidence < 1.0) || !(dof >= 0.0))
        return LW_NAN;
    if (dof > 0.0) return sqrt(dimension * lw_f_quantile(confidence, dimension, dof));
    if (dimension == 2) return sqrt(-2.0 * log1p(-confidence));
    return sqrt(lw_chi2_quantile(confidence, dimension));
}

struct lw_random {
    gsl_rng *generator;
};

/* 32 bits, which is what the generator takes, that depend on every bit of both numbers (splitmix64: Steele,
 * Lea & Flood, OOPSLA 2014). */
static unsigned long seed_of(uint64_t seed, uint64_t stream)
{
    uint64_t z = seed + UINT64_C(0x9e3779b97f4a7c15) * (stream + 1);
    z = (z ^ z >> 30) * UINT64_C(0xbf58476d1ce4e5b9);
    z = (z ^ z >> 27) * UINT64_C(0x94d049bb133111eb);
    return (unsigned long)((z ^ z >> 31) & UINT64_C(0xffffffff));
}

lw_status lw_random_new(uint64_t seed, uint64_t stream, lw_random **out, lw_error *error)
{
    *out = NULL;
    gsl_error_handler_t *before = gsl_set_error_handler_off();
    lw_random *random = LW_NEW(lw_random);
    if (random != NULL) random->generator = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_set_error_handler(before);
    if (random == NULL || random->generator == NULL) {
        lw_free(random);
        return lw_fail_memory(error, "a random stream", 8192);
    }
    gsl_rng_set(random->generator, seed_of(seed, stream));
    *out = random;
    return LW_OK;
}

void lw_random_free(lw_random *random)
{
    if (random == NULL) return;
    gsl_rng_free(random->generator);
    lw_free(random);
}

double lw_random_normal(lw_random *random)
{
    return gsl_ran_gaussian_ziggurat(random->generator, 1.0);
}

double lw_random_uniform(lw_random *random)
{
    return gsl_rng_uniform(random->generator);
}

double lw_random_sign(lw_random *random)
{
    return gsl_rng_get(random->generator) & 1 ? 1.0 : -1.0;
}

uint64_t lw_random_below(lw_random *random, uint64_t count)
{
    return (uint64_t)(gsl_rng_uniform(random->generator) * (double)count);
}
