/** Recovery tests: what can these data resolve?
 *
 *  A pattern p (model units, about x0) is put through the equations of the real problem, b = W A p (+ noise),
 * and inverted with the same weights, penalty and damping. Recovered: r = z scaled to model units. amplitude
 * sum p r / sum p^2    over the cells within one pattern size (1: all of it came back) correlation  sum (p -
 * pm)(r - rm) / sqrt(sum (p - pm)^2 sum (r - rm)^2), the same cells Noise trials: N draws of W^-1 noise (or
 * residuals resampled within their groups), all right-hand sides solved as a block; spread_j = sqrt(sum_k
 * r_jk^2 / N), whose relative error is about 1 / sqrt(2 N). What such tests do not show: errors in the
 * equations themselves (ray paths), and recovery at other sizes: good recovery of small patterns does not
 * imply that of large ones (Leveque, Rivera & Wittlinger, Geophys. J. Int. 115:313-318, 1993). Bootstrap of
 * residuals: Efron & Tibshirani, An Introduction to the Bootstrap, 1993, ch. 9. */
#ifndef LW_CERTAINTY_PROBE_H
#define LW_CERTAINTY_PROBE_H

#include "core/watch.h"
#include "solve/decomposition.h"

#include <stdbool.h>

typedef enum lw_probe_kind { LW_PROBE_CHECKER = 0, LW_PROBE_SPIKES, LW_PROBE_GIVEN } lw_probe_kind;

typedef struct lw_probe_plan {
    lw_probe_kind kind;
    const double *size; /**< sizes of the checkers, or spacings of the spikes */
    int sizes;
    bool length;      /**< sizes are lengths in the unit of the coordinates, not cells */
    double amplitude; /**< model units; 0: 5 % of the median |x0|, or where no x0 stands the rms of the real
                         model */
    const double *given; /**< LW_PROBE_GIVEN: n parameters, the pattern */
    int trials;          /**< 0 none */
    bool bootstrap; /**< resample the residuals of the real data within their groups instead of drawing noise
                     */
} lw_probe_plan;

typedef struct lw_probe_pattern {
    char name[64];             /**< "checker of 2 cells" */
    double size;               /**< NaN for a given pattern */
    double *input, *recovered; /**< n, model units about x0 */
    double *amplitude,
        *correlation; /**< n, in the neighbourhood of each parameter; NaN where the pattern is zero there */
    double overall_amplitude, overall_correlation;
} lw_probe_pattern;

typedef struct lw_probe {
    int64_t parameters;
    lw_probe_pattern *pattern;
    int patterns;
    double amplitude; /**< used */
    bool noisy;       /**< noise at the stated sigma was added to the pattern's data */
    int trials;
    bool bootstrap;
    double *spread; /**< n, or NULL */
} lw_probe;
void lw_probe_free(lw_probe *probe);

/** Runs patterns and trials on a decomposition at lambda. Noise is drawn where sigma is stated. Errors:
 * LW_BAD_USAGE (no coordinates for a pattern that needs them, an engine that cannot solve for several
 * right-hand sides), LW_NO_MEMORY. */
lw_status lw_probe_make(lw_decomposition *decomposition, double lambda, const lw_probe_plan *options,
                        const lw_watch *watch, lw_probe **out, lw_error *error);

/** Cells of the patterns: an integer place of each parameter along each axis, from its coordinates (rank of
 * the distinct coordinate, or floor of length / step). */
typedef struct lw_probe_grid {
    int64_t n;
    int32_t *place;    /**< n x 3; -1 in the first: no coordinates */
    int64_t extent[3]; /**< places along each axis, 1 where the axis is absent */
    int axes;          /**< how many coordinates there are */
} lw_probe_grid;
lw_status lw_probe_grid_make(const lw_problem *problem, double step, lw_probe_grid *out, lw_error *error);
void lw_probe_grid_clear(lw_probe_grid *grid);
/** Local amplitude and correlation by summed-area tables over boxes of +-reach places: O(n). */
lw_status lw_probe_compare(const lw_probe_grid *grid, int64_t reach, lw_probe_pattern *pattern,
                           lw_error *error);

#endif
