/** Runs made by hand, for the tests of the report: a sweep over cells, and a small network. All readings are
 * synthetic. */
#ifndef TESTS_UNIT_REPORT_SAMPLE_H
#define TESTS_UNIT_REPORT_SAMPLE_H

#include "run/run.h"

typedef struct sample {
    lw_run run;
    lw_problem problem;
    lw_system system;
    lw_check check;
    lw_estimate estimate;
    lw_curve curve;
    lw_certainty certainty;
    lw_outlier_log outliers;
    lw_log warnings;
    lw_engine engine;
    lw_input_file input;
    void *kept[64]; /**< blocks to free */
    int kept_count;
} sample;

/** across x up cells (x and z), m observations of `touch` cells each, `dampings` dampings with their models.
 */
sample *sample_sweep(int across, int up, int64_t m, int touch, int dampings);
/** Nine points on a plan with heights, levelled along the lines between neighbours; one reading without
 * redundancy, one suspect; ids that hold markup. */
sample *sample_network(void);
void sample_free(sample *s);

#endif
