/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/decimal.h"

#include "check_core.h"

#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static uint64_t shuffle = UINT64_C(88172645463325252);

static uint64_t next_bits(void)
{
    shuffle ^= shuffle << 13;
    shuffle ^= shuffle >> 7;
    return shuffle ^= shuffle << 17;
}

static double any_double(int i)
{
    for (;;) {
        uint64_t bits = next_bits();
        double value;
        if (i % 7 == 0) bits = (bits % 2047) << 52;            /* powers of two */
        if (i % 11 == 0) bits &= UINT64_C(0x800fffffffffffff); /* subnormal */
        memcpy(&value, &bits, sizeof value);
        if (i % 3 == 1) value = (double)(int64_t)bits / pow(10.0, (double)(bits % 20));
        if (isfinite(value)) return value;
    }
}

static lw_decimal parsed(const char *text)
{
    lw_decimal out;
    lw_number_fault fault = lw_decimal_parse(text, strlen(text), &out);
    ck_assert_msg(fault == LW_NUMBER_FINE, "'%s': %s", text, lw_number_fault_name(fault));
    return out;
}

/* The C library's strtod is correctly rounded. */
START_TEST(parse_is_correctly_rounded)
{
    for (int i = 0; i < 100000; i++) {
        char text[64];
        (void)snprintf(text, sizeof text, "%.*e", (int)(next_bits() % 25), any_double(i));
        double expected = strtod(text, NULL);
        if (!isfinite(expected)) continue;
        lw_decimal out = parsed(text);
        if (out.high != expected) ck_abort_msg("'%s' read as %a, not %a", text, out.high, expected);
        if (fabs(out.high) > 1e-280) ck_assert(out.high + out.low * (1.0 - 0x1p-50) == out.high);
    }
}
END_TEST

/* Exactly half way between neighbours, a little below, a little above. */
START_TEST(parse_rounds_halves_to_even)
{
    ck_assert(parsed("9007199254740993").high == 9007199254740992.0);
    ck_assert(parsed("9007199254740993").low == 1.0);
    ck_assert(parsed("9007199254740995").high == 9007199254740996.0);
    ck_assert(parsed("9007199254740993.0000000000000000000000000000000000000001").high == 9007199254740994.0);
    ck_assert(parsed("9007199254740992.9999999999999999999999999999999999999999").high == 9007199254740992.0);
    ck_assert(parsed("90071992547409930e-1").high == 9007199254740992.0);
    ck_assert(parsed("2.4703282292062327208e-324").high == 0.0);
    ck_assert(parsed("2.4703282292062328e-324").high == 0x1p-1074);
    ck_assert(parsed("1.7976931348623157e308").high == 0x1.fffffffffffffp1023);
    ck_assert(parsed("2.2250738585072014e-308").high == 0x1p-1022);
    ck_assert(parsed("2.2250738585072011e-308").high == 0x0.fffffffffffffp-1022);
    for (int i = 0; i < 2000; i++) {
        double a = 1.0 + (double)(next_bits() >> 12) * 0x1p-52;
        a = ldexp(a, (int)(next_bits() % 120) - 60);
        double b = nextafter(a, 1e300), even = fmod(ldexp(frexp(a, &(int){0}), 53), 2.0) == 0.0 ? a : b;
        lw_decimal middle = lw_two_sum(a, 0.5 * (b - a));
        char text[400];
        (void)snprintf(text, sizeof text, "%.300Lf", (long double)a + ((long double)b - (long double)a) / 2);
        ck_assert(middle.high == even);
        ck_assert_msg(parsed(text).high == even, "%s", text);
        strcat(text, "1");
        ck_assert_msg(parsed(text).high == b, "%s", text);
    }
}
END_TEST

/* high + low against integers of 128 bits: m / 10^k times 10^k is m again, to 2^-100. */
START_TEST(parse_keeps_a_hundred_bits)
{
    for (int i = 0; i < 20000; i++) {
        uint64_t m = next_bits() >> (next_bits() % 60);
        int k = (int)(next_bits() % 40) - 20;
        char text[64];
        (void)snprintf(text, sizeof text, "%llue%d", (unsigned long long)m, k);
        lw_decimal out = parsed(text), power = lw_decimal_of(1.0);
        for (int j = 0; j < abs(k); j++) power = lw_decimal_multiply(power, lw_decimal_of(10.0));
        lw_decimal exact = lw_quick_two_sum((double)m, (double)(int64_t)(m - (uint64_t)(double)m));
        if (m > UINT64_MAX - 1024) continue;
        lw_decimal back = k < 0 ? lw_decimal_multiply(out, power) : lw_decimal_divide(out, power);
        lw_decimal error = lw_decimal_subtract(back, exact);
        ck_assert_msg(fabs(error.high) <= 0x1p-99 * exact.high, "%s off by %g", text, error.high);
    }

    lw_decimal tiny = parsed("1e-30"), great = parsed("1e30");
    ck_assert(tiny.high == 1e-30 && great.high == 1e30);
    lw_decimal product = lw_decimal_multiply(tiny, great);
    lw_decimal error = lw_decimal_subtract(product, lw_decimal_of(1.0));
    ck_assert(fabs(error.high) < 0x1p-100);
    ck_assert(great.low == -19884624838656.0);
    /* more digits than a double-double holds */
    lw_decimal pi =
        parsed("3.14159265358979323846264338327950288419716939937510582097494459230781640628620899");
    ck_assert(pi.high == 0x1.921fb54442d18p+1 && pi.low == 0x1.1a62633145c07p-53);
}
END_TEST

START_TEST(very_long_numbers)
{
    size_t length = 100000;
    char *text = malloc(length + 16);
    memset(text, '0', length);
    text[0] = '1';
    text[1] = '.';
    text[length - 1] = '1';
    lw_decimal out;
    ck_assert_int_eq(lw_decimal_parse(text, length, &out), LW_NUMBER_FINE);
    ck_assert(out.high == 1.0);
    memset(text, '9', length);
    ck_assert_int_eq(lw_decimal_parse(text, length, &out), LW_NUMBER_RANGE);
    memset(text, '0', length);
    memcpy(text + length, "1e0", 3);
    text[1] = '.';
    ck_assert_int_eq(lw_decimal_parse(text, length + 3, &out), LW_NUMBER_FINE);
    ck_assert(out.high == 0.0);
    memcpy(text + length, "7e100000", 8);
    ck_assert_int_eq(lw_decimal_parse(text, length + 8, &out), LW_NUMBER_FINE);
    ck_assert(out.high == 70.0);
    free(text);
    ck_assert(parsed("0e999999999999999999999").high == 0.0);
    ck_assert(parsed("1e-999999999999999999999").high == 0.0);
}
END_TEST

START_TEST(what_is_no_number)
{
    static const struct {
        const char *text;
        lw_number_fault fault;
    } wrong[] = {
        {"", LW_NUMBER_EMPTY},
        {" \t ", LW_NUMBER_EMPTY},
        {"one", LW_NUMBER_SYNTAX},
        {"0x2", LW_NUMBER_SYNTAX},
        {"2m", LW_NUMBER_SYNTAX},
        {"1,5", LW_NUMBER_SYNTAX},
        {".", LW_NUMBER_SYNTAX},
        {"-", LW_NUMBER_SYNTAX},
        {"1e", LW_NUMBER_SYNTAX},
        {"1e+", LW_NUMBER_SYNTAX},
        {"1.2.3", LW_NUMBER_SYNTAX},
        {"1 2", LW_NUMBER_SYNTAX},
        {"--1", LW_NUMBER_SYNTAX},
        {"e5", LW_NUMBER_SYNTAX},
        {"1d5", LW_NUMBER_SYNTAX},
        {"nan", LW_NUMBER_NOT_FINITE},
        {"-NaN", LW_NUMBER_NOT_FINITE},
        {"inf", LW_NUMBER_NOT_FINITE},
        {"+Infinity", LW_NUMBER_NOT_FINITE},
        {"infinit", LW_NUMBER_SYNTAX},
        {"nan(1)", LW_NUMBER_SYNTAX},
        {"1e999", LW_NUMBER_RANGE},
        {"-1e309", LW_NUMBER_RANGE},
        {"1.7976931348623159e308", LW_NUMBER_RANGE},
    };
    lw_decimal out;
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++)
        ck_assert_msg(lw_decimal_parse(wrong[i].text, strlen(wrong[i].text), &out) == wrong[i].fault, "'%s'",
                      wrong[i].text);
    ck_assert(parsed(" +1.5\t").high == 1.5);
    ck_assert(parsed("5.").high == 5.0);
    ck_assert(parsed(".5").high == 0.5);
    ck_assert(parsed("-.5E+1").high == -5.0);
    ck_assert(signbit(parsed("-0").high));
    ck_assert_int_eq(lw_decimal_parse("123", 2, &out), LW_NUMBER_FINE);
    ck_assert(out.high == 12.0);
    ck_assert_str_eq(lw_number_fault_name(LW_NUMBER_EMPTY), "an empty field");
}
END_TEST

/* The digits of printf, which are correctly rounded: none shorter reads back, and those written are nearest.
 */
START_TEST(written_numbers_are_shortest_and_read_back)
{
    for (int i = 0; i < 60000; i++) {
        double value = any_double(i);
        char text[LW_DOUBLE_TEXT], check[64];
        size_t length = lw_double_write(value, text);
        ck_assert_uint_eq(length, strlen(text));
        if (strtod(text, NULL) != value) ck_abort_msg("%a written as %s", value, text);
        int precision = 0, count = 0, zeros = 0;
        do (void)snprintf(check, sizeof check, "%.*e", precision, value);
        while (strtod(check, NULL) != value && ++precision < 17);
        for (const char *c = text; *c != '\0' && *c != 'e'; c++) {
            if (*c >= '1' && *c <= '9') {
                count += zeros + 1;
                zeros = 0;
            } else if (*c == '0' && count > 0) {
                zeros++;
            }
        }
        if (value != 0.0) ck_assert_msg(count <= precision + 1, "%s is longer than %s", text, check);
    }
}
END_TEST

START_TEST(layout_of_written_numbers)
{
    static const struct {
        double value;
        const char *text;
    } one[] = {
        {0.1, "0.1"},
        {1e-7, "1e-07"},
        {0.0001, "0.0001"},
        {0.00001234, "1.234e-05"},
        {0.0, "0"},
        {-0.0, "-0"},
        {5.0, "5"},
        {-1.25, "-1.25"},
        {100000, "100000"},
        {1e15, "1000000000000000"},
        {1e16, "1e+16"},
        {1e22, "1e+22"},
        {1e100, "1e+100"},
        {0x1p-1074, "5e-324"},
        {0x1.fffffffffffffp1023, "1.7976931348623157e+308"},
        {0.1 + 0.2, "0.30000000000000004"},
        {2.0 / 3.0, "0.6666666666666666"},
        {9007199254740993.0, "9007199254740992"},
        {0x1p-44, "5.684341886080802e-14"},
        {-1.2345678901234567e-150, "-1.2345678901234568e-150"},
        {0.99999999999999989, "0.9999999999999999"},
        {1234.5678, "1234.5678"},
    };
    char text[LW_DOUBLE_TEXT];
    for (size_t i = 0; i < sizeof one / sizeof one[0]; i++) {
        ck_assert_uint_eq(lw_double_write(one[i].value, text), strlen(one[i].text));
        ck_assert_str_eq(text, one[i].text);
    }
    ck_assert_uint_eq(lw_double_write(LW_NAN, text), 0);
    ck_assert_str_eq(text, "");
}
END_TEST

START_TEST(arithmetic_to_a_hundred_bits)
{
    lw_decimal third = lw_decimal_divide(lw_decimal_of(1.0), lw_decimal_of(3.0));
    lw_decimal one = lw_decimal_add(third, lw_decimal_add(third, third));
    ck_assert(fabs(lw_decimal_subtract(one, lw_decimal_of(1.0)).high) <= 0x1p-100);
    lw_decimal root = lw_decimal_sqrt(parsed("2"));
    /* sqrt(2) to 34 digits: OEIS A002193 */
    lw_decimal error = lw_decimal_subtract(root, parsed("1.414213562373095048801688724209698079"));
    ck_assert(fabs(error.high) <= 0x1p-100);
}
END_TEST

Suite *suite_decimal(void)
{
    Suite *suite = suite_create("decimal");
    TCase *cases = tcase_create("decimal");
    tcase_set_timeout(cases, 60.0);
    tcase_add_test(cases, parse_is_correctly_rounded);
    tcase_add_test(cases, parse_rounds_halves_to_even);
    tcase_add_test(cases, parse_keeps_a_hundred_bits);
    tcase_add_test(cases, very_long_numbers);
    tcase_add_test(cases, what_is_no_number);
    tcase_add_test(cases, written_numbers_are_shortest_and_read_back);
    tcase_add_test(cases, layout_of_written_numbers);
    tcase_add_test(cases, arithmetic_to_a_hundred_bits);
    suite_add_tcase(suite, cases);
    return suite;
}
