/* SPDX-License-Identifier: GPL-3.0-or-later */
#ifndef CHECK_PROBLEM_H
#define CHECK_PROBLEM_H

#include <check.h>

Suite *suite_ids(void);
Suite *suite_triplets(void);
Suite *suite_read(void);
Suite *suite_faults(void);
Suite *suite_parameters(void);
Suite *suite_covariance(void);
Suite *suite_conditions(void);
Suite *suite_range(void);
Suite *suite_check(void);
Suite *suite_pack(void);
Suite *suite_penalty(void);
Suite *suite_system(void);

#endif
