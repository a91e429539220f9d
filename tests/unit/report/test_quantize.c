/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/quantize.h"

#include "core/decimal.h"
#include "core/memory.h"

#include <check.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

Suite *suite_quantize(void);

/* RFC 4648, section 10. */
START_TEST(base64_of_the_standard)
{
    static const char *const plain[] = {"", "f", "fo", "foo", "foob", "fooba", "foobar"};
    static const char *const coded[] = {"", "Zg==", "Zm8=", "Zm9v", "Zm9vYg==", "Zm9vYmE=", "Zm9vYmFy"};
    for (int i = 0; i < 7; i++) {
        char *text = lw_base64(plain[i], strlen(plain[i]));
        ck_assert_str_eq(text, coded[i]);
        lw_free(text);
    }
}
END_TEST

/* Writes one packed column and gives back its document; the caller frees. */
static char *packed(lw_status (*pack)(lw_json *, const char *, int64_t, const double *, lw_error *),
                    int64_t count, const double *values)
{
    lw_json *json = NULL;
    char *text = NULL;
    size_t length = 0;
    ck_assert_int_eq(lw_json_new(&json, NULL), LW_OK);
    ck_assert_int_eq(pack(json, "c", count, values, NULL), LW_OK);
    ck_assert_int_eq(lw_json_dump(json, true, &text, &length, NULL), LW_OK);
    lw_json_free(json);
    return text;
}

static size_t decode(const char *text, unsigned char *out)
{
    static const char digit[] = "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
    size_t count = 0;
    unsigned bits = 0;
    int have = 0;
    for (; *text && strchr(digit, *text); text++) {
        bits = bits << 6 | (unsigned)(strchr(digit, *text) - digit);
        have += 6;
        if (have >= 8) out[count++] = (unsigned char)(bits >> (have -= 8));
    }
    return count;
}

static double field(const char *document, const char *name)
{
    const char *at = strstr(document, name);
    ck_assert_ptr_nonnull(at);
    return strtod(at + strlen(name), NULL);
}

START_TEST(model_is_within_half_a_step)
{
    double values[500];
    uint16_t stored[500];
    for (int j = 0; j < 500; j++) values[j] = -3.0 + 1e3 * sin(j * 0.7);
    values[7] = LW_UNKNOWN;
    char *text = packed(lw_pack_model, 500, values);
    double low = field(text, "\"low\": "), step = field(text, "\"step\": ");
    ck_assert_uint_eq(decode(strstr(text, "\"data\": \"") + 9, (unsigned char *)stored), sizeof stored);
    for (int j = 0; j < 500; j++) {
        if (j == 7)
            ck_assert_uint_eq(stored[j], 0);
        else
            ck_assert(stored[j] > 0 && fabs(low + step * (stored[j] - 1) - values[j]) <= 0.5000001 * step);
    }
    lw_free(text);
}
END_TEST

START_TEST(level_and_empty_models)
{
    double level[] = {2.5, 2.5}, none[] = {LW_UNKNOWN, LW_UNKNOWN};
    uint16_t stored[2];
    char *text = packed(lw_pack_model, 2, level);
    ck_assert(field(text, "\"low\": ") == 2.5 && field(text, "\"step\": ") == 0.0);
    decode(strstr(text, "\"data\": \"") + 9, (unsigned char *)stored);
    ck_assert(stored[0] == 1 && stored[1] == 1);
    lw_free(text);
    text = packed(lw_pack_model, 2, none);
    decode(strstr(text, "\"data\": \"") + 9, (unsigned char *)stored);
    ck_assert(stored[0] == 0 && stored[1] == 0);
    lw_free(text);
}
END_TEST

START_TEST(long_columns_keep_small_differences)
{
    enum { COUNT = LW_PACK_EXACT + 1 };
    double *values = malloc(COUNT * sizeof(double));
    float *stored = malloc(COUNT * sizeof(float) + 8);
    for (int j = 0; j < COUNT; j++) values[j] = 5e6 + 0.25 * j;
    char *text = packed(lw_pack_numbers, COUNT, values);
    ck_assert(field(text, "\"offset\": ") == 5e6);
    ck_assert_uint_eq(decode(strstr(text, "\"data\": \"") + 9, (unsigned char *)stored),
                      COUNT * sizeof(float));
    for (int j = 0; j < COUNT; j++) ck_assert((double)stored[j] == 0.25 * j);
    lw_free(text);
    free(values);
    free(stored);
}
END_TEST

START_TEST(short_columns_are_exact)
{
    double values[] = {0.1, -1e300, LW_UNKNOWN}, stored[3];
    char *text = packed(lw_pack_numbers, 3, values);
    ck_assert_uint_eq(decode(strstr(text, "\"data\": \"") + 9, (unsigned char *)stored), sizeof stored);
    ck_assert(stored[0] == values[0] && stored[1] == values[1] && isnan(stored[2]));
    lw_free(text);
    text = packed(lw_pack_numbers, 3, NULL);
    ck_assert_ptr_nonnull(strstr(text, "\"c\": null"));
    lw_free(text);
}
END_TEST

Suite *suite_quantize(void)
{
    Suite *suite = suite_create("quantize");
    TCase *tests = tcase_create("quantize");
    tcase_add_test(tests, base64_of_the_standard);
    tcase_add_test(tests, model_is_within_half_a_step);
    tcase_add_test(tests, level_and_empty_models);
    tcase_add_test(tests, long_columns_keep_small_differences);
    tcase_add_test(tests, short_columns_are_exact);
    suite_add_tcase(suite, tests);
    return suite;
}
