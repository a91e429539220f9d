/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/data.h"

#include "core/memory.h"
#include "sample.h"

#include <check.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

Suite *suite_data(void);

/* The document of a run, read again. */
static lw_json_reader *data_of(const lw_run *run)
{
    char *text = NULL, path[] = "/tmp/leastwise-data-XXXXXX";
    size_t length = 0;
    lw_error error = {0};
    ck_assert_msg(lw_report_data(run, &text, &length, &error) == LW_OK, "%s", error.text);
    ck_assert_uint_eq(strlen(text), length);
    int file = mkstemp(path);
    ck_assert(file >= 0 && write(file, text, length) == (ssize_t)length);
    close(file);
    lw_free(text);
    lw_json_reader *reader = NULL;
    ck_assert_msg(lw_json_read(path, &reader, &error) == LW_OK, "%s", error.text);
    unlink(path);
    return reader;
}

START_TEST(stops_of_the_slider)
{
    sample *s = sample_sweep(6, 5, 40, 6, 10);
    lw_json_reader *data = data_of(&s->run);
    ck_assert_double_eq(lw_json_get_number(data, "curve.chosen"), 5.0);
    ck_assert_double_eq_tol(lw_json_get_number(data, "curve.points.rms.5"), s->run.rms, 1e-12);
    ck_assert(isnan(lw_json_get_number(data, "curve.points.misfit.10")));
    ck_assert_double_eq(lw_json_get_number(data, "curve.choices.0.index"), 5.0);
    ck_assert_double_eq(lw_json_get_number(data, "curve.choices.3.index"), -1.0);
    lw_json_reader_free(data);
    /* an answer between two dampings of the grid gets its own stop */
    s->run.damping = s->estimate.point.lambda = 1.01 * s->curve.row[5].point.lambda;
    data = data_of(&s->run);
    ck_assert_double_eq(lw_json_get_number(data, "curve.chosen"), 6.0);
    ck_assert_double_eq(lw_json_get_number(data, "curve.points.damping.6"), s->run.damping);
    ck_assert_double_eq(lw_json_get_number(data, "curve.points.damping.10"), s->curve.row[9].point.lambda);
    lw_json_reader_free(data);
    /* and one beyond the end */
    s->run.damping = s->estimate.point.lambda = 10.0 * s->curve.row[9].point.lambda;
    data = data_of(&s->run);
    ck_assert_double_eq(lw_json_get_number(data, "curve.chosen"), 10.0);
    lw_json_reader_free(data);
    sample_free(s);
}
END_TEST

START_TEST(histogram_counts_every_reading)
{
    sample *s = sample_sweep(6, 5, 40, 6, 10);
    int64_t counts[LW_BINS + 2], sum = 0;
    lw_report_histogram(&s->run, s->estimate.residual, 1.0, counts);
    for (int b = 0; b < LW_BINS + 2; b++) sum += counts[b];
    ck_assert_int_eq(sum, 40);
    double far[40];
    for (int i = 0; i < 40; i++) far[i] = i < 10 ? -7.0 * 0.2 : i < 20 ? 6.0 * 0.2 : 0.1 * 0.2;
    lw_report_histogram(&s->run, far, 1.0, counts);
    ck_assert(counts[0] == 10 && counts[LW_BINS + 1] == 10 && counts[1 + LW_BINS / 2] == 20);
    sample_free(s);
}
END_TEST

START_TEST(without_an_answer)
{
    sample *s = sample_sweep(6, 5, 40, 6, 10);
    s->run.estimate = NULL;
    s->run.damping = 0.0;
    lw_json_reader *data = data_of(&s->run);
    ck_assert_double_eq(lw_json_get_number(data, "curve.chosen"), -1.0);
    ck_assert_ptr_nonnull(lw_json_get_text(data, "parameters.id.29"));
    lw_json_reader_free(data);
    sample_free(s);
}
END_TEST

static lw_picture picture_of(const sample *s)
{
    lw_picture picture;
    ck_assert_int_eq(lw_report_picture(&s->problem, &picture, NULL), LW_OK);
    return picture;
}

START_TEST(pictures)
{
    sample *s = sample_sweep(6, 5, 40, 6, 10);
    ck_assert_int_eq(picture_of(s), LW_PICTURE_CELLS);
    s->problem.coordinate[0] = s->problem.coordinate[2] = NULL;
    ck_assert_int_eq(picture_of(s), LW_PICTURE_CHART);
    sample_free(s);
    s = sample_network();
    ck_assert_int_eq(picture_of(s), LW_PICTURE_NETWORK);
    lw_json_reader *data = data_of(&s->run);
    ck_assert_str_eq(lw_json_get_text(data, "plan.name.0"), "</script><script>window.broken=1</script>");
    ck_assert_str_eq(lw_json_get_text(data, "largest.0.id"), "line \"<b>\" 9");
    ck_assert_str_eq(lw_json_get_text(data, "groups.1.name"), "group 1");
    ck_assert_double_eq(lw_json_get_number(data, "groups.1.factor"), 7.75);
    lw_json_reader_free(data);
    sample_free(s);
}
END_TEST

/* Many rows are binned: no row is lost, and the largest are still listed. */
START_TEST(many_rows_are_binned)
{
    sample *s = sample_sweep(6, 5, LW_REPORT_MOST_ROWS + 1, 3, 4);
    lw_json_reader *data = data_of(&s->run);
    double sum = 0.0, largest = 0.0;
    char name[64];
    for (int b = 0; b < 120; b++) {
        snprintf(name, sizeof name, "binned.value.count.%d", b);
        sum += lw_json_get_number(data, name);
    }
    ck_assert_double_eq(sum, LW_REPORT_MOST_ROWS + 1.0);
    for (int64_t i = 0; i < s->problem.m; i++) largest = fmax(largest, fabs(s->estimate.residual[i]));
    ck_assert_double_eq(fabs(lw_json_get_number(data, "largest.0.residual")), largest);
    ck_assert_ptr_null(lw_json_get_text(data, "observations.id.0"));
    lw_json_reader_free(data);
    sample_free(s);
}
END_TEST

START_TEST(recovery_tests)
{
    sample *s = sample_sweep(6, 5, 40, 6, 4);
    lw_probe_pattern pattern = {.name = "checker of 2 cells",
                                .size = 2.0,
                                .input = s->estimate.x,
                                .recovered = s->estimate.x,
                                .overall_amplitude = 0.75,
                                .overall_correlation = 0.5};
    lw_probe probe = {.parameters = 30,
                      .pattern = &pattern,
                      .patterns = 1,
                      .noisy = true,
                      .trials = 8,
                      .spread = s->estimate.x};
    s->run.probe = &probe;
    lw_json_reader *data = data_of(&s->run);
    ck_assert_str_eq(lw_json_get_text(data, "probe.patterns.0.name"), "checker of 2 cells");
    ck_assert_double_eq(lw_json_get_number(data, "probe.patterns.0.overall_amplitude"), 0.75);
    ck_assert_str_eq(lw_json_get_text(data, "probe.spread.kind"), "f64");
    lw_json_reader_free(data);
    sample_free(s);
}
END_TEST

Suite *suite_data(void)
{
    Suite *suite = suite_create("data");
    TCase *tests = tcase_create("data");
    tcase_add_test(tests, stops_of_the_slider);
    tcase_add_test(tests, histogram_counts_every_reading);
    tcase_add_test(tests, without_an_answer);
    tcase_add_test(tests, pictures);
    tcase_add_test(tests, many_rows_are_binned);
    tcase_add_test(tests, recovery_tests);
    suite_add_tcase(suite, tests);
    return suite;
}
