/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/report.h"

#include "core/memory.h"
#include "sample.h"

#include <check.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

Suite *suite_report(void);

/* The page of a run as text; the caller frees. */
static char *page_of(const lw_run *run)
{
    char path[] = "/tmp/leastwise-report-XXXXXX";
    lw_error error = {0};
    close(mkstemp(path));
    ck_assert_msg(lw_report_write(run, path, &error) == LW_OK, "%s", error.text);
    FILE *file = fopen(path, "rb");
    fseek(file, 0, SEEK_END);
    long length = ftell(file);
    rewind(file);
    char *text = calloc((size_t)length + 1, 1);
    ck_assert_uint_eq(fread(text, 1, (size_t)length, file), (size_t)length);
    fclose(file);
    unlink(path);
    return text;
}

START_TEST(page_is_whole)
{
    sample *s = sample_network();
    char *page = page_of(&s->run);
    ck_assert_ptr_nonnull(strstr(page, "<title>Solution of a&lt;b&gt;&amp;&quot;c&quot;</title>"));
    ck_assert_ptr_nonnull(strstr(page, "9 parameters")); /* the verdict stands in the page itself */
    ck_assert_ptr_nonnull(strstr(page, "Redistribution and use in source and binary forms"));
    ck_assert_ptr_nonnull(strstr(page, "Content-Security-Policy"));
    ck_assert_ptr_null(strstr(page, "window.broken=1</script>")); /* ids are escaped */
    ck_assert_ptr_null(strstr(page, "<img src=x"));
    ck_assert_ptr_nonnull(strstr(page, "</html>"));
    static const char *const marks[] = {"@STYLE@", "@D3@",      "@SCRIPT@", "@DATA@",
                                        "@TITLE@", "@VERDICT@", "@KIND@",   "@VERSION@"};
    for (size_t k = 0; k < sizeof marks / sizeof *marks; k++) ck_assert_ptr_null(strstr(page, marks[k]));
    free(page);
    sample_free(s);
}
END_TEST

START_TEST(same_run_same_bytes)
{
    sample *s = sample_sweep(6, 5, 40, 6, 10);
    char *first = page_of(&s->run), *second = page_of(&s->run);
    ck_assert_str_eq(first, second);
    free(first);
    free(second);
    sample_free(s);
}
END_TEST

START_TEST(no_address_to_fetch_from)
{
    sample *s = sample_sweep(6, 5, 40, 6, 10);
    char *page = page_of(&s->run);
    ck_assert_ptr_null(strstr(page, "src=\"http"));
    ck_assert_ptr_null(strstr(page, "href=\"http"));
    ck_assert_ptr_null(strstr(page, "@import"));
    ck_assert_ptr_null(strstr(page, "url(http"));
    free(page);
    sample_free(s);
}
END_TEST

START_TEST(a_place_that_cannot_be_written)
{
    sample *s = sample_network();
    lw_error error = {0};
    ck_assert_int_eq(lw_report_write(&s->run, "/nonexistent/folder/report.html", &error), LW_SYSTEM);
    ck_assert_ptr_nonnull(strstr(error.text, "/nonexistent/folder/report.html"));
    if (access("/dev/full", W_OK) == 0)
        ck_assert_int_eq(lw_report_write(&s->run, "/dev/full", &error), LW_SYSTEM);
    sample_free(s);
}
END_TEST

typedef struct gate {
    long seen, fail_at;
} gate;

static bool fail_at(void *state)
{
    gate *g = state;
    return g->seen++ == g->fail_at;
}

static void fail_each(sample *s)
{
    gate g = {0, -1};
    lw_memory_set_gate(fail_at, &g);
    ck_assert_int_eq(lw_report_write(&s->run, "/dev/null", NULL), LW_OK);
    long all = g.seen, step = all > 300 ? all / 300 : 1;
    for (long k = 0; k < all; k += step) {
        g = (gate){0, k};
        lw_error error = {0};
        ck_assert_msg(lw_report_write(&s->run, "/dev/null", &error) == LW_NO_MEMORY, "allocation %ld of %ld",
                      k, all);
    }
    lw_memory_set_gate(NULL, NULL);
}

START_TEST(every_allocation_may_fail)
{
    sample *s = sample_network();
    fail_each(s);
    sample_free(s);
    s = sample_sweep(4, 3, 20, 4, 5);
    fail_each(s);
    sample_free(s);
}
END_TEST

Suite *suite_report(void)
{
    Suite *suite = suite_create("report");
    TCase *tests = tcase_create("report");
    tcase_set_timeout(tests, 60);
    tcase_add_test(tests, page_is_whole);
    tcase_add_test(tests, same_run_same_bytes);
    tcase_add_test(tests, no_address_to_fetch_from);
    tcase_add_test(tests, a_place_that_cannot_be_written);
    tcase_add_test(tests, every_allocation_may_fail);
    suite_add_tcase(suite, tests);
    return suite;
}
