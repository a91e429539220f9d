/** From a run to the JSON that the page reads (data.js says how columns are packed). Parts of one document,
 * one file each. */
#ifndef LW_REPORT_DATA_H
#define LW_REPORT_DATA_H

#include "report/quantize.h"
#include "run/run.h"

/** Above this many rows residuals are binned for the charts, and only the largest are listed. */
#define LW_REPORT_MOST_ROWS 20000
/** A plan with more points or lines than this is no help to the eye. */
#define LW_REPORT_MOST_POINTS 3000
#define LW_REPORT_MOST_JOINS 20000
/** Most multiply-adds for the residual histograms of all dampings. */
#define LW_REPORT_MOST_WORK 2.5e9

/** What kind of picture the parameters make. */
typedef enum lw_picture { LW_PICTURE_CHART = 0, LW_PICTURE_CELLS, LW_PICTURE_NETWORK } lw_picture;
lw_status lw_report_picture(const lw_problem *problem, lw_picture *out, lw_error *error);

/** A cell counts as thinly covered with fewer hits than `hits`, or a coverage below `share` of the median of
 * the cells that are touched at all (= `coverage`). */
typedef struct lw_cover_rule {
    int64_t hits;
    double share, coverage;
} lw_cover_rule;
lw_status lw_report_cover_rule(const lw_run *run, lw_cover_rule *out, lw_error *error);

/** The whole document; *text is owned by the caller (lw_free). */
lw_status lw_report_data(const lw_run *run, char **text, size_t *length, lw_error *error);

lw_status lw_report_parameters(lw_json *json, const lw_run *run, lw_picture picture, lw_error *error);
lw_status lw_report_observations(lw_json *json, const lw_run *run, lw_error *error);
lw_status lw_report_groups(lw_json *json, const lw_run *run, lw_error *error);
lw_status lw_report_curve(lw_json *json, const lw_run *run, lw_error *error);
lw_status lw_report_plan(lw_json *json, const lw_run *run, lw_picture picture, lw_error *error);
lw_status lw_report_probe(lw_json *json, const lw_run *run, lw_error *error);
void lw_report_certainty(lw_json *json, const lw_run *run);
/** place: number on the plan of every point, -1 not on it; NULL: no plan. */
void lw_report_ellipses(lw_json *json, const lw_run *run, const int32_t *place);

/** Residual of row i over what it is measured by: sigma, times s0 where the variance factor is estimated. NaN
 * where the row is set aside. The histogram of `residual` (observations only): counts[0] and counts[LW_BINS +
 * 1] lie outside. */
#define LW_BINS 48
#define LW_BIN_LOW (-6.0)
#define LW_BIN_WIDTH 0.25
double lw_report_row_sigma(const lw_run *run, int64_t row);
bool lw_report_row_used(const lw_run *run, int64_t row);
void lw_report_histogram(const lw_run *run, const double *residual, double s0, int64_t counts[LW_BINS + 2]);
/** s0 by which standardised residuals are divided: 1 for a stated variance factor. */
double lw_report_scale(const lw_run *run, double chi_square, double effective_parameters);

/** "leastwise solve FOLDER ..." from the words of a command line: the words that a solve does not know are
 * left out, quoted words stay quoted; the page adds --damping. NULL without memory; caller frees. */
char *lw_report_solve_prefix(const char *command_line);

/** True when the damping stands for a true prior: standardised residuals are known though damped. */
bool lw_report_posterior(const lw_run *run);
/** Sentences on the global test, on sigma with damping, and cautions with the section in which each is read.
 */
void lw_report_test_words(lw_json *json, const lw_run *run);
const char *lw_report_sigma_meaning(const lw_run *run);
void lw_report_cautions(lw_json *json, const lw_run *run);

/** Text with the five characters of markup escaped; NULL without memory; caller frees. */
char *lw_html_escape(const char *text);

#endif
