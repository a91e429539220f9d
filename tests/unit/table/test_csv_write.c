/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "table/csv_write.h"

#include "core/decimal.h"
#include "table/csv_read.h"

#include "check_table.h"
#include "scratch.h"

#include <stdlib.h>
#include <string.h>

START_TEST(fields_are_quoted_where_needed)
{
    scratch file =
        scratch_text("out.csv", "old content that is longer than what is written now, by a line or two\n");
    lw_csv_writer *writer;
    ck_assert_int_eq(lw_csv_create(file.path, &writer, NULL), LW_OK);
    lw_csv_text(writer, "a");
    lw_csv_text(writer, "b,c");
    lw_csv_text(writer, "say \"x\"");
    lw_csv_text(writer, "two\nlines");
    lw_csv_text(writer, " blank");
    lw_csv_text(writer, "#id");
    lw_csv_bytes_of(writer, "cut here", 3);
    lw_csv_end_row(writer);
    lw_csv_number(writer, 0.1);
    lw_csv_number(writer, LW_NAN);
    lw_csv_integer(writer, INT64_MIN);
    lw_csv_empty(writer);
    lw_csv_text(writer, "");
    lw_csv_end_row(writer);
    lw_csv_empty(writer);
    lw_csv_end_row(writer);
    ck_assert_int_eq(lw_csv_finish(writer, NULL), LW_OK);
    size_t length;
    char *text = scratch_read(&file, &length);
    ck_assert_str_eq(text, "a,\"b,c\",\"say \"\"x\"\"\",\"two\nlines\",\" blank\",\"#id\",cut\n"
                           "0.1,,-9223372036854775808,,\n\"\"\n");
    free(text);
    scratch_remove(&file);
    ck_assert_int_eq(lw_csv_finish(NULL, NULL), LW_OK);
}
END_TEST

/* What is written is read back, whatever the bytes. */
START_TEST(written_fields_read_back)
{
    static const char alphabet[] = "ab ,\"\n\r\t#1.\xc3\xa4\xef\xbb\xbf";
    char field[3000][12];
    scratch file = scratch_text("out.csv", "");
    lw_csv_writer *writer;
    unsigned seed = 7;
    ck_assert_int_eq(lw_csv_create(file.path, &writer, NULL), LW_OK);
    for (int c = 0; c < 3; c++) lw_csv_text(writer, c == 0 ? "#x" : c == 1 ? "y,\"" : " z");
    lw_csv_end_row(writer);
    for (int i = 0; i < 3000; i++) {
        size_t length = (seed >> 16) % 11;
        for (size_t k = 0; k < length; k++) {
            seed = seed * 1103515245u + 12345u;
            field[i][k] = alphabet[(seed >> 16) % (sizeof alphabet - 1)];
        }
        seed = seed * 1103515245u + 12345u;
        field[i][length] = '\0';
        lw_csv_text(writer, field[i]);
        if (i % 3 == 2) lw_csv_end_row(writer);
    }
    ck_assert_int_eq(lw_csv_finish(writer, NULL), LW_OK);
    lw_csv *csv;
    lw_csv_batch batch;
    lw_error error = {0};
    ck_assert_msg(lw_csv_open(file.path, &csv, &error) == LW_OK, "%s", error.text);
    ck_assert_str_eq(lw_csv_name(csv, 1), "y,\"");
    int i = 0;
    while (lw_csv_next(csv, &batch, NULL, &error) == LW_OK && batch.rows > 0)
        for (int f = 0; f < 3 * batch.rows; f++, i++) {
            ck_assert_uint_eq(batch.fields[f].length, strlen(field[i]));
            ck_assert_int_eq(memcmp(batch.fields[f].text, field[i], strlen(field[i])), 0);
        }
    ck_assert_msg(error.faults == 0, "%s", error.text);
    ck_assert_int_eq(i, 3000);
    lw_csv_close(csv);
    scratch_remove(&file);
}
END_TEST

START_TEST(failures_are_told_at_the_end)
{
    lw_csv_writer *writer;
    lw_error error = {0};
    ck_assert_int_eq(lw_csv_create("/nonexistent/out.csv", &writer, &error), LW_SYSTEM);
    ck_assert_ptr_null(writer);
    ck_assert_str_eq(error.text, "/nonexistent/out.csv: cannot create: No such file or directory");
    if (lw_csv_create("/dev/full", &writer, &error) != LW_OK) return;
    for (int i = 0; i < 100000; i++) {
        lw_csv_integer(writer, i);
        lw_csv_end_row(writer);
    }
    ck_assert_int_eq(lw_csv_finish(writer, &error), LW_SYSTEM);
    ck_assert_str_eq(error.text, "/dev/full: cannot write: No space left on device");
}
END_TEST

Suite *suite_csv_write(void)
{
    Suite *suite = suite_create("csv_write");
    TCase *cases = tcase_create("csv_write");
    tcase_add_test(cases, fields_are_quoted_where_needed);
    tcase_add_test(cases, written_fields_read_back);
    tcase_add_test(cases, failures_are_told_at_the_end);
    suite_add_tcase(suite, cases);
    return suite;
}
