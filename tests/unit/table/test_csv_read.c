/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "table/csv_read.h"

#include "core/memory.h"

#include "check_table.h"
#include "scratch.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

/* All fields as "[a|b][c|d]", quoted ones marked with q. */
static char *read_all(const char *path, lw_error *error, lw_status *status)
{
    size_t room = 1 << 16, at = 0;
    char *text = calloc(room, 1);
    lw_csv *csv;
    *status = lw_csv_open(path, &csv, error);
    if (*status != LW_OK) return text;
    lw_csv_batch batch;
    while ((*status = lw_csv_next(csv, &batch, NULL, error)) == LW_OK && batch.rows > 0)
        for (int r = 0; r < batch.rows; r++)
            for (int c = 0; c < batch.columns; c++) {
                const lw_field *field = &batch.fields[r * batch.columns + c];
                ck_assert_uint_lt(at + field->length + 8, room);
                at += (size_t)snprintf(text + at, room - at, "%s%s%.*s%s", c == 0 ? "[" : "|",
                                       field->quoted ? "q" : "", (int)field->length, field->text,
                                       c + 1 == batch.columns ? "]" : "");
            }
    lw_csv_close(csv);
    return text;
}

static void expect_rows(const char *content, const char *rows)
{
    scratch file = scratch_text("t.csv", content);
    lw_error error = {0};
    lw_status status;
    char *text = read_all(file.path, &error, &status);
    ck_assert_msg(status == LW_OK, "%s", error.text);
    ck_assert_str_eq(text, rows);
    free(text);
    scratch_remove(&file);
}

START_TEST(odd_but_legal_files)
{
    expect_rows("a,b\n1,2\n3,4\n", "[1|2][3|4]");
    expect_rows("a,b\r\n1,2\r\n3,4\r\n", "[1|2][3|4]");
    expect_rows("a,b\r1,2\r3,4\r", "[1|2][3|4]");
    expect_rows("\xef\xbb\xbf"
                "a,b\n1,2\n3,4",
                "[1|2][3|4]");
    expect_rows("# one\n# two\n\na,b\n1,2\n", "[1|2]");
    expect_rows("\xef\xbb\xbf# one\r\n\r\na,b\r\n1,2\r\n", "[1|2]");
    expect_rows("a,b\n#1,2\n", "[#1|2]");
    expect_rows("a,b\n\"1\",2\n3,\"4\"\n", "[q1|2][3|q4]");
    expect_rows("a,b\n\"1,\"\"x\"\"\n2\",\"\"\n,\n", "[q1,\"x\"\n2|q][|]");
    expect_rows("a,b\n  1 ,\t2 \n \"3\" , 4\n", "[1|2][q3|4]");
    expect_rows("a,b\n\n1,2\n  \n\n3,4\n\n", "[1|2][3|4]");
    expect_rows("a,b", "");
    expect_rows("a\n1\n2", "[1][2]");
    expect_rows("a,b\n\"12345678901234567890\",1234567890123456789012\n",
                "[q12345678901234567890|1234567890123456789012]");
}
END_TEST

START_TEST(columns_are_found_by_name)
{
    scratch file = scratch_text("t.csv", "# c\nb,a,\"x y\"\n1,2,3\n");
    lw_csv *csv;
    lw_error error = {0};
    ck_assert_int_eq(lw_csv_open(file.path, &csv, &error), LW_OK);
    ck_assert_int_eq(lw_csv_columns(csv), 3);
    ck_assert_str_eq(lw_csv_name(csv, 2), "x y");
    ck_assert_int_eq(lw_csv_find(csv, "a"), 1);
    ck_assert_int_eq(lw_csv_find(csv, "c"), -1);
    ck_assert_str_eq(lw_csv_path(csv), file.path);
    ck_assert_int_eq(lw_csv_require(csv, "b", "a,b", &error), 0);
    ck_assert_int_eq(error.faults, 0);
    ck_assert_int_eq(lw_csv_require(csv, "c", "a,b,c", &error), -1);
    ck_assert_str_eq(scratch_strip(&file, error.text), "t.csv:2:1: no column 'c', expected the header a,b,c");
    lw_csv_close(csv);
    lw_csv_close(NULL);
    scratch_remove(&file);
}
END_TEST

/* Rows of all lengths over many chunks: every field and its place, also of quoted fields over lines. */
START_TEST(places_of_all_fields)
{
    size_t room = 1 << 20, at = 0;
    char *text = malloc(room);
    int rows = 0, line = 2;
    static int line_of[20000], column_of[20000], length_of[20000];
    static bool two_lines[20000];
    at += (size_t)sprintf(text, "id,n,value\n");
    for (unsigned seed = 1; at < 300000; rows++, line++) {
        seed = seed * 1103515245u + 12345u;
        int width = seed >> 16 & 31, kind = seed >> 24 & 7;
        line_of[rows] = line;
        length_of[rows] = width + 1;
        column_of[rows] = 3 + (width + 1);
        if (kind == 0) { /* quoted, with a line end */
            at += (size_t)sprintf(text + at, "\"%0*d\n,\"\"\",b,%d\n", width + 1, 0, rows);
            line++;
            length_of[rows] += 3;
            two_lines[rows] = true;
        } else {
            at += (size_t)sprintf(text + at, "%0*d,b,%d%s", width + 1, 0, rows, kind == 1 ? "\r\n\n" : "\n");
            line += kind == 1;
        }
    }
    scratch file = scratch_file("t.csv", text, at);
    lw_csv *csv;
    lw_csv_batch batch;
    lw_error error = {0};
    ck_assert_int_eq(lw_csv_open(file.path, &csv, &error), LW_OK);
    int next = 0;
    while (lw_csv_next(csv, &batch, NULL, &error) == LW_OK && batch.rows > 0) {
        ck_assert_int_eq(batch.first_row, next);
        ck_assert_int_le(batch.rows, LW_CSV_BATCH);
        for (int r = 0; r < batch.rows; r++, next++) {
            lw_decimal number;
            ck_assert_int_eq(lw_csv_decimal(csv, &batch, r, 2, &number, &error), LW_OK);
            ck_assert(number.high == next);
            ck_assert_uint_eq(batch.fields[3 * r].length, (unsigned)length_of[next]);
        }
    }
    ck_assert_int_eq(next, rows);
    ck_assert_int_eq(lw_csv_bytes(csv), (int64_t)at);
    for (int r = 0; r < rows; r += 97) {
        lw_place place;
        ck_assert_int_eq(lw_csv_locate(csv, r, 0, &place), LW_OK);
        ck_assert_int_eq(place.line, line_of[r]);
        ck_assert_int_eq(place.column, 1);
        ck_assert_int_eq(lw_csv_locate(csv, r, 2, &place), LW_OK);
        if (two_lines[r])
            ck_assert(place.line == line_of[r] + 1 && place.column == 8);
        else
            ck_assert(place.line == line_of[r] && place.column == column_of[r] + 1);
    }
    lw_place place;
    ck_assert_int_ne(lw_csv_locate(csv, rows, 0, &place), LW_OK);
    lw_csv_close(csv);
    scratch_remove(&file);
    free(text);
}
END_TEST

/* sha256sum of the same bytes */
START_TEST(digest_is_of_the_whole_file)
{
    scratch file = scratch_text("t.csv", "# comment\na,b\n1,2\n");
    lw_csv *csv;
    lw_csv_batch batch;
    char hex[65];
    ck_assert_int_eq(lw_csv_open(file.path, &csv, NULL), LW_OK);
    while (lw_csv_next(csv, &batch, NULL, NULL) == LW_OK && batch.rows > 0) continue;
    ck_assert_int_eq(lw_csv_digest(csv, hex, NULL), LW_OK);
    ck_assert_str_eq(hex, "672fec51731547dea738fcb1e182bf17c02afa6bcd43475d34014dae20103ac2");
    lw_csv_close(csv);
    scratch_remove(&file);
}
END_TEST

START_TEST(pipes_are_read_and_located)
{
    scratch file = scratch_text("t.csv", "");
    (void)unlink(file.path);
    ck_assert_int_eq(mkfifo(file.path, 0600), 0);
    if (fork() == 0) {
        FILE *stream = fopen(file.path, "w");
        if (stream == NULL) _exit(1);
        (void)fputs("a,b\n1,2\n3,x\n", stream);
        (void)fclose(stream);
        _exit(0);
    }
    lw_csv *csv;
    lw_csv_batch batch;
    lw_error error = {0};
    ck_assert_int_eq(lw_csv_open(file.path, &csv, &error), LW_OK);
    ck_assert_int_eq(lw_csv_next(csv, &batch, NULL, &error), LW_OK);
    ck_assert_int_eq(batch.rows, 2);
    lw_decimal number;
    ck_assert_int_eq(lw_csv_decimal(csv, &batch, 1, 1, &number, &error), LW_BAD_INPUT);
    ck_assert_str_eq(scratch_strip(&file, error.text), "t.csv:3:3: found 'x', expected a decimal number");
    lw_csv_close(csv);
    scratch_remove(&file);
}
END_TEST

static bool refuse_at(void *state)
{
    return (*(int *)state)-- == 0;
}

START_TEST(failing_allocations_are_told)
{
    scratch file = scratch_text("t.csv", "a,b\n1,\"2\"\n3,4\n5\n");
    for (int fail = 0;; fail++) {
        int left = fail;
        lw_error error = {0};
        lw_csv *csv = NULL;
        lw_csv_batch batch = {.rows = 0};
        lw_memory_set_gate(refuse_at, &left);
        lw_status status = lw_csv_open(file.path, &csv, &error);
        while (status == LW_OK && (status = lw_csv_next(csv, &batch, NULL, &error)) == LW_OK &&
               batch.rows > 0)
            continue;
        lw_memory_set_gate(NULL, NULL);
        lw_csv_close(csv);
        ck_assert_int_lt(fail, 60);
        if (left >= 0) {
            ck_assert_int_eq(status, LW_BAD_INPUT);
            break;
        }
        /* only the place of a fault may be lost without a failure */
        ck_assert(status == LW_NO_MEMORY || status == LW_BAD_INPUT);
        ck_assert_str_ne(error.text, "");
    }
    scratch_remove(&file);
}
END_TEST

static void count_tick(void *state, const char *what, double done, double total, const char *note)
{
    (void)note;
    ck_assert_str_eq(what, "reading");
    ck_assert(done <= total);
    ++*(int *)state;
}

START_TEST(watch_is_told_and_can_cancel)
{
    char *text = malloc(400000);
    size_t at = (size_t)sprintf(text, "a,b\n");
    while (at < 390000) at += (size_t)sprintf(text + at, "1,2\n");
    scratch file = scratch_file("t.csv", text, at);
    int ticks = 0;
    volatile sig_atomic_t cancel = 0;
    lw_watch watch = {.tick = count_tick, .tick_state = &ticks, .cancel = &cancel};
    lw_csv *csv;
    lw_csv_batch batch;
    lw_error error = {0};
    ck_assert_int_eq(lw_csv_open(file.path, &csv, &error), LW_OK);
    lw_status status;
    int64_t rows = 0;
    while ((status = lw_csv_next(csv, &batch, &watch, &error)) == LW_OK && batch.rows > 0) {
        rows += batch.rows;
        cancel = rows > 50000;
    }
    ck_assert_int_eq(status, LW_INTERRUPTED);
    ck_assert_int_ge(ticks, 2);
    lw_csv_close(csv);
    scratch_remove(&file);
    free(text);
}
END_TEST

Suite *suite_csv_read(void)
{
    Suite *suite = suite_create("csv_read");
    TCase *cases = tcase_create("csv_read");
    tcase_add_test(cases, odd_but_legal_files);
    tcase_add_test(cases, columns_are_found_by_name);
    tcase_add_test(cases, places_of_all_fields);
    tcase_add_test(cases, digest_is_of_the_whole_file);
    tcase_add_test(cases, pipes_are_read_and_located);
    tcase_add_test(cases, failing_allocations_are_told);
    tcase_add_test(cases, watch_is_told_and_can_cancel);
    suite_add_tcase(suite, cases);
    return suite;
}
