/** Looking at a curve: its rows, and further dampings evaluated on the decomposition on demand. What the
 * criteria share: local optima among the rows, refinement between them, and the range within 5 % of an
 * optimum. */
#ifndef LW_TRADEOFF_LOOK_H
#define LW_TRADEOFF_LOOK_H

#include "tradeoff/sweep.h"

#define LW_NEAR_OPTIMUM 0.05 /**< `from` .. `to`, and how near in value a rival is */

typedef struct lw_look {
    lw_decomposition *decomposition;
    const lw_watch *watch;
    lw_error *error;
    lw_curve_row *row; /**< by increasing damping */
    int count;
    bool sigma_stated, direct, cheap; /**< cheap: a further damping costs little */
    bool traced;                      /**< effective parameters are wanted */
    bool refine;                      /**< false: stay on the rows (while the curve still grows) */
    double tolerance, noise_factor;
    int low; /**< first usable row: rows low .. count-1 are usable */
} lw_look;

/** The curve at `count` dampings, slopes by differences where the engine gives none. */
lw_status lw_look_rows(lw_look *look, int count, const double *lambda, lw_curve_row *out);

/** What is minimised, of a row; NaN where it is not known. */
typedef double lw_height(const lw_curve_row *row);

/** Interior local minima among the usable rows, deepest first; returns how many (up to `most`) indices were
 * put into `at`. */
int lw_look_valleys(const lw_look *look, lw_height *height, int most, int *at);
/** Minimum of height between the neighbours of row `at` (Brent), to *out. Without look->refine the row
 * itself. */
lw_status lw_look_lowest(lw_look *look, lw_height *height, int at, lw_curve_row *out);
/** Dampings around choice->at between which height is at most `limit`: log-linear between rows, never outside
 * the usable rows. */
void lw_look_range(const lw_look *look, lw_height *height, double limit, lw_choice *choice);
/** Takes a row as the choice. */
void lw_look_take(lw_choice *choice, const lw_curve_row *row, double value);

#endif
