/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The suites of this layer, and small things that its tests share. */
#ifndef LW_TESTS_CHECK_CERTAINTY_H
#define LW_TESTS_CHECK_CERTAINTY_H

#include "certainty/certainty.h"
#include "solve/engine.h"

#include <check.h>

Suite *suite_selected_inverse(void);
Suite *suite_levelling(void);
Suite *suite_networks(void);
Suite *suite_reliability(void);
Suite *suite_outlier(void);
Suite *suite_damped(void);
Suite *suite_variance_components(void);
Suite *suite_memory_faults(void);
Suite *suite_probe(void);
Suite *suite_sigma_kinds(void);

/** Decomposed, estimated and with its certainty; asserts success. Everything is owned by the struct. */
typedef struct adjusted {
    lw_problem *problem; /**< borrowed */
    lw_system *system;
    lw_decomposition *decomposition;
    lw_estimate *estimate;
    lw_certainty *certainty;
} adjusted;
/** What `solve` takes by default: 0.95, 0.001, 0.80, everything wanted. */
lw_certainty_options default_options(void);
/** row_factor: rows or NULL; datum_free: a free network; lambda 0: undamped. */
adjusted adjust(lw_problem *problem, const char *engine, const double *row_factor, int datum_free,
                double lambda, const lw_certainty_options *options);
void adjusted_clear(adjusted *a);

#define ck_close(a, b, relative)                                                                             \
    ck_assert_msg(fabs((a) - (b)) <= (relative)*fabs(b), "%s = %.17g, expected %.17g", #a, (double)(a),      \
                  (double)(b))

#endif
