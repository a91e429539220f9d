/* SPDX-License-Identifier: GPL-3.0-or-later */
#ifndef CHECK_TRADEOFF_H
#define CHECK_TRADEOFF_H

#include <check.h>

Suite *suite_choose(void);
Suite *suite_corner(void);
Suite *suite_discrepancy(void);
Suite *suite_gcv(void);
Suite *suite_reference(void);
Suite *suite_search(void);
Suite *suite_sweep(void);

#endif
