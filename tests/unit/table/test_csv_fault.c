/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "table/csv_read.h"

#include "check_table.h"
#include "scratch.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* Reads all rows, column 2 as numbers. */
static lw_status read_numbers(const char *path, lw_error *error)
{
    lw_csv *csv;
    lw_csv_batch batch;
    lw_decimal number;
    lw_status status = lw_csv_open(path, &csv, error), worst = LW_OK;
    if (status != LW_OK) return status;
    while ((status = lw_csv_next(csv, &batch, NULL, error)) == LW_OK && batch.rows > 0)
        for (int r = 0; r < batch.rows; r++)
            if (lw_csv_decimal(csv, &batch, r, batch.columns - 1, &number, error) != LW_OK)
                worst = LW_BAD_INPUT;
    lw_csv_close(csv);
    return status != LW_OK ? status : worst;
}

static void expect_bytes(const char *bytes, size_t length, const char *message)
{
    scratch file = scratch_file("design.csv", bytes, length);
    lw_error error = {0};
    ck_assert_int_eq(read_numbers(file.path, &error), LW_BAD_INPUT);
    ck_assert_str_eq(scratch_strip(&file, error.text), message);
    scratch_remove(&file);
}

static void expect(const char *content, const char *message)
{
    expect_bytes(content, strlen(content), message);
}

#define HEADER "observation,parameter,coefficient\n"
#define TOP HEADER "a,x,1\nb,x,1\nb,y,1\n"

START_TEST(fields_that_are_no_numbers)
{
    expect(HEADER "a,x,one\n", "design.csv:2:5: found 'one', expected a decimal number");
    expect(TOP "c,y,1\nd,x,inf\n", "design.csv:6:5: found 'inf', expected a finite decimal number");
    expect(HEADER "b,y,nan\n", "design.csv:2:5: found 'nan', expected a finite decimal number");
    expect(TOP "c,y,1\nd,x,0x2\n", "design.csv:6:5: found '0x2', expected a decimal number");
    expect(TOP "c,y,1\nd,x,2m\n", "design.csv:6:5: found '2m', expected a decimal number");
    expect(TOP "c,y,1\nd,x,1e999\n", "design.csv:6:5: found '1e999', expected a number below 1.8e308");
    expect(TOP "c,y,\nd,x,1\n", "design.csv:5:5: found an empty field, expected a decimal number");
    expect(TOP "c,y,  \nd,x,1\n", "design.csv:5:5: found an empty field, expected a decimal number");
    expect(HEADER "a,x, \"o\nn\x01\"\n", "design.csv:2:6: found 'o\\nn\\x01', expected a decimal number");
    expect(HEADER "a,x,1234567890123456789012345678901234567890x\n",
           "design.csv:2:5: found '1234567890123456789012345678901234567890...', expected a decimal number");
}
END_TEST

START_TEST(rows_of_the_wrong_length)
{
    expect(TOP "c,y\nd,x,2\n", "design.csv:5:4: found 2 fields, expected 3 as in the header");
    expect(TOP "c,y,1,9\nd,x,2\n", "design.csv:5:7: found 4 fields, expected 3 as in the header");
    expect(TOP "c,y,1\nd,x", "design.csv:6:4: found 2 fields, expected 3 as in the header");
    expect("observation,value,sigma\na,1,0.1\nc,2,1,0.1\n",
           "design.csv:3:7: found 4 fields, expected 3 as in the header");
    expect(TOP "c\r\n\r\nd,x\r\n", "design.csv:5:2: found 1 field, expected 3 as in the header\n"
                                   "design.csv:7:4: found 2 fields, expected 3 as in the header");
}
END_TEST

START_TEST(bytes_that_do_not_belong)
{
    const char nul[] = TOP "c\0,y,1\nd,x,2\n";
    expect_bytes(nul, sizeof nul - 1, "design.csv:5:1: found a field with a NUL byte, expected text");
    const char header[] = "obs\0,y,1\nd,x,2\n";
    expect_bytes(header, sizeof header - 1,
                 "design.csv:1:1: found a field with a NUL byte, expected text in UTF-8");
    expect(TOP "\"c,y,1\nd,x,2\n", "design.csv:5:1: found an open quote, expected a closing quote");
    expect(TOP "c,\"y,1\nd,x,2\n", "design.csv:5:3: found an open quote, expected a closing quote");
    expect(TOP "c,y\"z,1\nd,\"x\"w,2\ne,x,3\nf,x\n",
           "design.csv:5:3: found a quote inside a field, expected quotes around the whole field, and "
           "doubled inside\n"
           "design.csv:6:3: found a quote inside a field, expected quotes around the whole field, and "
           "doubled inside\n"
           "design.csv:8:4: found 2 fields, expected 3 as in the header");
}
END_TEST

START_TEST(files_without_a_header)
{
    expect("", "design.csv:1:1: found an empty file, expected a header");
    expect("# only\n\n", "design.csv:3:1: found no header, expected column names");
    expect("a,b,a\n1,2,3\n", "design.csv:1:5: found a second column 'a', expected each column once");
    expect("a,,\n1,2,3\n", "design.csv:1:4: found a second column without a name, expected each column once");
    expect("a,\"b\n1,2,3\n", "design.csv:1:3: found an open quote, expected a closing quote");
    lw_error error = {0};
    lw_csv *csv;
    ck_assert_int_eq(lw_csv_open("/nonexistent/design.csv", &csv, &error), LW_SYSTEM);
    ck_assert_str_eq(error.text, "/nonexistent/design.csv: cannot open: No such file or directory");
    ck_assert_ptr_null(csv);
    ck_assert_int_eq(lw_csv_open("/", &csv, &error), LW_SYSTEM);
    ck_assert_str_eq(error.text, "/: cannot read: Is a directory");
}
END_TEST

/* Faults come in the order of the file, at most twenty of them, all counted; places hold over many chunks. */
START_TEST(many_faults_in_order)
{
    size_t room = 1 << 20, at = (size_t)0;
    char *text = malloc(room), expected[8192] = "";
    at += (size_t)sprintf(text, HEADER);
    int line = 2, faults = 0;
    for (; at < 400000; line++) {
        const char *row = line % 1500 == 0 ? "a,x\n" : line % 1500 == 750 ? "a,x,one\n" : "a123,x456,1.5\n";
        at += (size_t)sprintf(text + at, "%s", row);
        if (line % 750 == 0 && faults++ < LW_MOST_FAULTS)
            (void)sprintf(expected + strlen(expected), "%sdesign.csv:%d:%s", expected[0] == '\0' ? "" : "\n",
                          line,
                          line % 1500 == 0 ? "4: found 2 fields, expected 3 as in the header"
                                           : "5: found 'one', expected a decimal number");
    }
    scratch file = scratch_file("design.csv", text, at);
    lw_error error = {0};
    ck_assert_int_eq(read_numbers(file.path, &error), LW_BAD_INPUT);
    ck_assert_int_gt(faults, LW_MOST_FAULTS);
    ck_assert_int_eq(error.faults, faults);
    ck_assert_str_eq(scratch_strip(&file, error.text), expected);
    scratch_remove(&file);
    free(text);
}
END_TEST

START_TEST(faults_of_the_caller)
{
    scratch file = scratch_text("design.csv", TOP "c,y,1\n");
    lw_csv *csv;
    lw_csv_batch batch;
    lw_error error = {0};
    ck_assert_int_eq(lw_csv_open(file.path, &csv, &error), LW_OK);
    while (lw_csv_next(csv, &batch, NULL, &error) == LW_OK && batch.rows > 0) continue;
    ck_assert_int_eq(lw_csv_fault(csv, 3, 1, "'y\n'", "a parameter", &error), LW_BAD_INPUT);
    ck_assert_str_eq(scratch_strip(&file, error.text), "design.csv:5:3: found 'y\\n', expected a parameter");
    ck_assert_int_eq(lw_csv_fault(csv, 3, 1, "x", "y", NULL), LW_BAD_INPUT);
    char found[LW_CSV_FOUND];
    ck_assert_str_eq(lw_csv_quote("", 0, found), "an empty field");
    ck_assert_str_eq(lw_csv_quote("\xc3\xa4\tb", 4, found), "'\xc3\xa4\\tb'");
    ck_assert_str_eq(lw_csv_quote("123456789012345678901234567890123456789\xc3\xa4", 41, found),
                     "'123456789012345678901234567890123456789...'");
    lw_csv_close(csv);
    scratch_remove(&file);
}
END_TEST

Suite *suite_csv_fault(void)
{
    Suite *suite = suite_create("csv_fault");
    TCase *cases = tcase_create("csv_fault");
    tcase_add_test(cases, fields_that_are_no_numbers);
    tcase_add_test(cases, rows_of_the_wrong_length);
    tcase_add_test(cases, bytes_that_do_not_belong);
    tcase_add_test(cases, files_without_a_header);
    tcase_add_test(cases, many_faults_in_order);
    tcase_add_test(cases, faults_of_the_caller);
    suite_add_tcase(suite, cases);
    return suite;
}
