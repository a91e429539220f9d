/** Writers of a run's files. Rows keep the order of the input; an unknown number is an empty field (null in
 * JSON). */
#ifndef LW_RUN_WRITE_H
#define LW_RUN_WRITE_H

#include "run/run.h"

/** Names of output columns, NULL-terminated: a carried input column must not have one of them. */
extern const char *const lw_reserved_columns[];

lw_status lw_write_parameters(const lw_run *run, const char *path, lw_error *error);
lw_status lw_write_residuals(const lw_run *run, const char *path, lw_error *error);
lw_status lw_write_tradeoff(const lw_run *run, const char *path, lw_error *error);
/** One row a parameter, one column a damping, headed by the damping. only: a damping to write alone (the
 * chosen), NaN all. */
lw_status lw_write_models(const lw_run *run, double only, const char *path, lw_error *error);
lw_status lw_write_parameter_covariance(const lw_run *run, const char *path, lw_error *error);
lw_status lw_write_resolution_rows(const lw_run *run, const int64_t *of, int64_t count, const char *path,
                                   lw_error *error);
lw_status lw_write_ellipses(const lw_run *run, const char *path, lw_error *error);
lw_status lw_write_outliers(const lw_run *run, const char *path, lw_error *error);
/** recovery.csv: a row a parameter and pattern: pattern,size,parameter,input,recovered,amplitude,correlation.
 */
lw_status lw_write_recovery(const lw_run *run, const char *path, lw_error *error);
/** spread.csv: parameter,spread,relative_error of the noise trials. */
lw_status lw_write_spread(const lw_run *run, const char *path, lw_error *error);
lw_status lw_write_summary(const lw_run *run, const char *path, lw_error *error);

/** "prior:PARAMETER" for a weighted prior's row, else the observation's id. text: room for LW_ROW_NAME bytes.
 */
#define LW_ROW_NAME 512
const char *lw_run_row_name(const lw_run *run, int64_t row, char *text);

#endif
