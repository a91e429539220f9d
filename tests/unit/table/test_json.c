/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "table/json.h"

#include "core/decimal.h"
#include "core/memory.h"

#include "check_table.h"
#include "scratch.h"

#include <string.h>

static void fill(lw_json *json)
{
    lw_json_object(json, "fit");
    lw_json_number(json, "chi_square", 0.1);
    lw_json_number(json, "probability", LW_NAN);
    lw_json_bool(json, "rejected", false);
    lw_json_close(json);
    lw_json_array(json, "choices");
    lw_json_object(json, NULL);
    lw_json_text_value(json, "criterion", "a\"\\\n<b>&\xe2\x80\xa8\xc3\xa4\xff");
    lw_json_integer(json, "count", INT64_C(9007199254740993));
    lw_json_close(json);
    lw_json_number(json, NULL, 1e22);
    lw_json_text_value(json, NULL, NULL);
    lw_json_close(json);
    lw_json_array(json, "none");
    lw_json_close(json);
    lw_json_null(json, "null");
}

START_TEST(document_as_text)
{
    lw_json *json;
    char *text;
    size_t length;
    ck_assert_int_eq(lw_json_new(&json, NULL), LW_OK);
    fill(json);
    ck_assert_int_eq(lw_json_dump(json, false, &text, &length, NULL), LW_OK);
    ck_assert_uint_eq(length, strlen(text));
    ck_assert_str_eq(text, "{\n  \"fit\": {\n    \"chi_square\": 0.1,\n    \"probability\": null,\n    "
                           "\"rejected\": false\n  },\n"
                           "  \"choices\": [\n    {\n"
                           "      \"criterion\": \"a\\\"\\\\\\u000a<b>&\xe2\x80\xa8\xc3\xa4\xef\xbf\xbd\",\n"
                           "      \"count\": 9007199254740993\n    },\n    1e+22,\n    null\n  ],\n"
                           "  \"none\": [],\n  \"null\": null\n}\n");
    lw_free(text);
    ck_assert_int_eq(lw_json_dump(json, true, &text, &length, NULL), LW_OK);
    ck_assert_ptr_nonnull(strstr(text, "\\u003cb\\u003e\\u0026\\u2028\xc3\xa4"));
    ck_assert_ptr_null(strpbrk(text, "<>&"));
    lw_free(text);
    lw_json_free(json);
    lw_json_free(NULL);
}
END_TEST

START_TEST(document_is_saved_and_read)
{
    scratch file = scratch_text("summary.json", "");
    lw_json *json;
    lw_json_reader *reader;
    lw_error error = {0};
    ck_assert_int_eq(lw_json_new(&json, NULL), LW_OK);
    fill(json);
    ck_assert_int_eq(lw_json_save(json, file.path, &error), LW_OK);
    ck_assert_int_eq(lw_json_save(json, "/nonexistent/x.json", &error), LW_SYSTEM);
    ck_assert_str_eq(error.text, "/nonexistent/x.json: cannot write: No such file or directory");
    ck_assert_int_eq(lw_json_save(json, "/dev/full", &error), LW_SYSTEM);
    lw_json_free(json);
    ck_assert_msg(lw_json_read(file.path, &reader, &error) == LW_OK, "%s", error.text);
    ck_assert(lw_json_get_number(reader, "fit.chi_square") == 0.1);
    ck_assert(lw_json_get_number(reader, "choices.1") == 1e22);
    ck_assert(isnan(lw_json_get_number(reader, "fit.probability")));
    ck_assert(isnan(lw_json_get_number(reader, "fit.absent.more")));
    ck_assert(isnan(lw_json_get_number(reader, "choices.x")));
    ck_assert_str_eq(lw_json_get_text(reader, "choices.0.criterion"),
                     "a\"\\\n<b>&\xe2\x80\xa8\xc3\xa4\xef\xbf\xbd");
    ck_assert_ptr_null(lw_json_get_text(reader, "fit"));
    lw_json_reader_free(reader);
    lw_json_reader_free(NULL);
    scratch_remove(&file);
}
END_TEST

START_TEST(wrong_documents_are_refused)
{
    lw_json *json;
    char *text;
    size_t length;
    lw_error error = {0};
    ck_assert_int_eq(lw_json_new(&json, NULL), LW_OK);
    lw_json_number(json, NULL, 1.0);
    lw_json_number(json, "later", 1.0);
    ck_assert_int_eq(lw_json_dump(json, false, &text, &length, &error), LW_BAD_SHAPE);
    ck_assert_ptr_null(text);
    lw_json_free(json);
    ck_assert_int_eq(lw_json_new(&json, NULL), LW_OK);
    lw_json_close(json);
    lw_json_object(json, "a");
    ck_assert_int_eq(lw_json_dump(json, false, &text, &length, &error), LW_BAD_SHAPE);
    lw_json_free(json);
    ck_assert_int_eq(lw_json_new(&json, NULL), LW_OK);
    for (int i = 0; i < 100; i++) lw_json_object(json, "a");
    ck_assert_int_eq(lw_json_dump(json, false, &text, &length, &error), LW_BAD_SHAPE);
    lw_json_free(json);
    scratch file = scratch_text("a.json", "{\"a\": 1,\n}");
    lw_json_reader *reader;
    ck_assert_int_eq(lw_json_read(file.path, &reader, &error), LW_BAD_INPUT);
    ck_assert_ptr_nonnull(strstr(error.text, "a.json:2:1: "));
    ck_assert_int_eq(lw_json_read("/nonexistent", &reader, &error), LW_SYSTEM);
    scratch_remove(&file);
}
END_TEST

static bool refuse_at(void *state)
{
    return (*(int *)state)-- == 0;
}

START_TEST(failing_allocations_are_told)
{
    for (int fail = 0;; fail++) {
        int left = fail;
        lw_json *json = NULL;
        lw_error error = {0};
        char *text = NULL;
        size_t length;
        lw_memory_set_gate(refuse_at, &left);
        lw_status status = lw_json_new(&json, &error);
        if (status == LW_OK) {
            fill(json);
            status = lw_json_dump(json, true, &text, &length, &error);
        }
        lw_memory_set_gate(NULL, NULL);
        lw_free(text);
        lw_json_free(json);
        ck_assert_int_lt(fail, 500);
        if (left >= 0) {
            ck_assert_int_eq(status, LW_OK);
            break;
        }
        ck_assert_int_eq(status, LW_NO_MEMORY);
        ck_assert_str_ne(error.text, "");
    }
}
END_TEST

Suite *suite_json(void)
{
    Suite *suite = suite_create("json");
    TCase *cases = tcase_create("json");
    tcase_add_test(cases, document_as_text);
    tcase_add_test(cases, document_is_saved_and_read);
    tcase_add_test(cases, wrong_documents_are_refused);
    tcase_add_test(cases, failing_allocations_are_told);
    suite_add_tcase(suite, cases);
    return suite;
}
