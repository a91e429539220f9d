/* SPDX-License-Identifier: GPL-3.0-or-later */
#ifndef CHECK_CORE_H
#define CHECK_CORE_H

#include <check.h>

Suite *suite_chance(void);
Suite *suite_decimal(void);
Suite *suite_log(void);
Suite *suite_memory(void);
Suite *suite_status(void);
Suite *suite_team(void);
Suite *suite_watch(void);

#endif
