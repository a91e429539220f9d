/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/data.h"

#include "core/decimal.h"
#include "core/memory.h"
#include "sample.h"

#include <check.h>
#include <math.h>
#include <string.h>

Suite *suite_words(void);

START_TEST(command_of_a_damping)
{
    static const char *const pair[][2] = {
        {"leastwise sweep data/a --dampings 0.01:10:40 -o out", "leastwise solve data/a"},
        {"./leastwise sweep --dampings=1,2 data/a --prefer flattest --overwrite",
         "leastwise solve data/a --prefer flattest"},
        {"leastwise --quiet sweep 'my data' --design \"b c.csv\" --criteria gcv --models all",
         "leastwise --quiet solve 'my data' --design \"b c.csv\""},
        {"leastwise sweep a -oout --damping corner --noise-factor 2", "leastwise solve a"},
        {"leastwise sweep a\\ b --out 'x y' --threads 2", "leastwise solve a\\ b --threads 2"},
        {"leastwise sweep a -o", "leastwise solve a"},
    };
    for (size_t i = 0; i < sizeof pair / sizeof *pair; i++) {
        char *text = lw_report_solve_prefix(pair[i][0]);
        ck_assert_str_eq(text, pair[i][1]);
        lw_free(text);
    }
}
END_TEST

START_TEST(markup_is_escaped)
{
    char *text = lw_html_escape("a<b>&\"c\"'");
    ck_assert_str_eq(text, "a&lt;b&gt;&amp;&quot;c&quot;&#39;");
    lw_free(text);
    text = lw_html_escape(NULL);
    ck_assert_str_eq(text, "");
    lw_free(text);
}
END_TEST

static char *words_of(sample *s, void (*put)(lw_json *, const lw_run *))
{
    lw_json *json = NULL;
    char *text = NULL;
    size_t length;
    lw_json_new(&json, NULL);
    put(json, &s->run);
    ck_assert_int_eq(lw_json_dump(json, true, &text, &length, NULL), LW_OK);
    lw_json_free(json);
    return text;
}

static void expect(sample *s, void (*put)(lw_json *, const lw_run *), const char *words, bool there)
{
    char *text = words_of(s, put);
    ck_assert_msg((strstr(text, words) != NULL) == there, "\"%s\" in %s", words, text);
    lw_free(text);
}

START_TEST(too_high_and_too_low_advise_differently)
{
    sample *s = sample_network();
    expect(s, lw_report_test_words, "Too high", true);
    expect(s, lw_report_test_words, "drives it most is group 1", true);
    s->certainty.test.too_high = false;
    expect(s, lw_report_test_words, "Too low", true);
    expect(s, lw_report_test_words, "drives it most is group 0", true);
    s->certainty.test.rejected = false;
    expect(s, lw_report_test_words, "no proof", true);
    s->certainty.test.applies = false;
    expect(s, lw_report_test_words, "were not stated", true);
    s->certainty.test.degrees_of_freedom = 0.0;
    expect(s, lw_report_test_words, "no redundancy", true);
    sample_free(s);
}
END_TEST

START_TEST(what_may_mislead_is_said)
{
    sample *s = sample_network();
    expect(s, lw_report_cautions, "no redundancy", true);
    expect(s, lw_report_cautions, "Not converged", false);
    s->estimate.stop = LW_STOP_STEPS;
    expect(s, lw_report_cautions, "Not converged", true);
    s->run.interrupted = true;
    expect(s, lw_report_cautions, "interrupted", true);
    s->certainty.sigma_kind[1] = LW_SIGMA_UPPER_BOUND;
    expect(s, lw_report_cautions, "upper bounds", true);
    ck_assert_ptr_null(lw_report_sigma_meaning(&s->run));
    s->run.damping = 2.0;
    lw_certainty_options asked = {.meaning = LW_MEANS_POSTERIOR};
    s->run.asked = &asked;
    ck_assert_ptr_nonnull(strstr(lw_report_sigma_meaning(&s->run), "posterior"));
    asked.meaning = LW_MEANS_NOISE;
    ck_assert_ptr_nonnull(strstr(lw_report_sigma_meaning(&s->run), "bias"));
    sample_free(s);
    s = sample_sweep(6, 5, 40, 6, 10);
    expect(s, lw_report_cautions, "3 of 10 dampings are not converged", true);
    expect(s, lw_report_cautions, "criterion risk picks no damping", true);
    sample_free(s);
}
END_TEST

Suite *suite_words(void)
{
    Suite *suite = suite_create("words");
    TCase *tests = tcase_create("words");
    tcase_add_test(tests, command_of_a_damping);
    tcase_add_test(tests, markup_is_escaped);
    tcase_add_test(tests, too_high_and_too_low_advise_differently);
    tcase_add_test(tests, what_may_mislead_is_said);
    suite_add_tcase(suite, tests);
    return suite;
}
