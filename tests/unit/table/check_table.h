/* SPDX-License-Identifier: GPL-3.0-or-later */
#ifndef CHECK_TABLE_H
#define CHECK_TABLE_H

#include <check.h>

Suite *suite_csv_fault(void);
Suite *suite_csv_read(void);
Suite *suite_csv_write(void);
Suite *suite_digest(void);
Suite *suite_json(void);
Suite *suite_market(void);

#endif
