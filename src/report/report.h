/** report.html: one self-contained page of a run, readable without a network and on paper. */
#ifndef LW_REPORT_REPORT_H
#define LW_REPORT_REPORT_H

#include "run/run.h"

/** Writes the report of a run to `path`. The page carries its data as JSON, models quantised to 16 bits a
 * value for display (the CSV files keep every digit), its scripts and D3 with its licence. Ids are escaped
 * everywhere. Cost: one pass over the design a damping for the residual histograms where all of them take
 * less than 2.5e9 multiply-adds, else only the answer's. Errors: LW_SYSTEM with path and reason,
 * LW_NO_MEMORY. */
lw_status lw_report_write(const lw_run *run, const char *path, lw_error *error);

#endif
