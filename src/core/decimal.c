/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/decimal.h"

#include "core/decimal_exact.h"

#include <strings.h>

/* Powers of ten that a double holds exactly. */
static const double power_of_ten[] = {1e0,  1e1,  1e2,  1e3,  1e4,  1e5,  1e6,  1e7,  1e8,  1e9,  1e10, 1e11,
                                      1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22};
#define EXACT_POWERS 22
#define MOST_FAST_DIGITS 19
#define MANTISSA_LIMIT (UINT64_C(1) << 53)

const char *lw_number_fault_name(lw_number_fault fault)
{
    switch (fault) {
    case LW_NUMBER_FINE:
        return "a number";
    case LW_NUMBER_EMPTY:
        return "an empty field";
    case LW_NUMBER_SYNTAX:
        return "no number";
    case LW_NUMBER_NOT_FINITE:
        return "a number that is not finite";
    case LW_NUMBER_RANGE:
        return "a number too large for a double";
    }
    return "an unknown fault";
}

/* high is the nearest double to high + low (1 + e), |e| <= 2^-45, so the rounding error of low cannot matter.
 */
static inline bool settled(double high, double low)
{
    return high + low * (1.0 + 0x1p-45) == high;
}

/* mantissa * 10^exponent, mantissa < 10^19, |exponent| <= 22. False: too near a halfway case to be sure. */
static bool scale_fast(uint64_t mantissa, int exponent, lw_decimal *out)
{
    double high = (double)mantissa;
    if (mantissa < MANTISSA_LIMIT) {
        if (exponent == 0) {
            *out = (lw_decimal){high, 0.0};
        } else if (exponent > 0) {
            *out = lw_two_product(high, power_of_ten[exponent]);
        } else {
            double power = power_of_ten[-exponent], q = high / power;
            *out = (lw_decimal){q, fma(-q, power, high) / power};
        }
        return true;
    }
    double low = (double)(int64_t)(mantissa - (uint64_t)high);
    if (exponent == 0) {
        *out = (lw_decimal){high, low};
        return true;
    }
    if (exponent > 0) {
        lw_decimal p = lw_two_product(high, power_of_ten[exponent]);
        lw_decimal r = lw_two_product(low, power_of_ten[exponent]);
        lw_decimal s = lw_two_sum(p.low, r.high);
        *out = lw_quick_two_sum(p.high, s.high);
        out->low += s.low + r.low;
    } else {
        double power = power_of_ten[-exponent], q = high / power;
        lw_decimal r = lw_two_sum(fma(-q, power, high), low);
        double q2 = r.high / power, q3 = (fma(-q2, power, r.high) + r.low) / power;
        *out = lw_quick_two_sum(q, q2);
        out->low += q3;
    }
    return settled(out->high, out->low);
}

static inline bool is_digit(char c)
{
    return (unsigned)(c - '0') < 10;
}

/* The digits behind an e, clamped; NULL when there are none. */
static const char *scan_exponent(const char *at, const char *end, int64_t *exponent)
{
    bool negative = at < end && *at == '-';
    if (at < end && (*at == '-' || *at == '+')) at++;
    if (at == end || !is_digit(*at)) return NULL;
    int64_t value = 0;
    for (; at < end && is_digit(*at); at++)
        if (value < INT64_C(100000000000000000)) value = 10 * value + (*at - '0');
    *exponent = negative ? -value : value;
    return at;
}

static lw_number_fault judge_word(const char *text, const char *end)
{
    size_t length = (size_t)(end - text);
    if (length == 3 && (strncasecmp(text, "nan", 3) == 0 || strncasecmp(text, "inf", 3) == 0))
        return LW_NUMBER_NOT_FINITE;
    if (length == 8 && strncasecmp(text, "infinity", 8) == 0) return LW_NUMBER_NOT_FINITE;
    return LW_NUMBER_SYNTAX;
}

lw_number_fault lw_decimal_parse(const char *text, size_t length, lw_decimal *out)
{
    const char *at = text, *end = text + length;
    *out = (lw_decimal){0.0, 0.0};
    while (at < end && (*at == ' ' || *at == '\t')) at++;
    while (end > at && (end[-1] == ' ' || end[-1] == '\t')) end--;
    if (at == end) return LW_NUMBER_EMPTY;
    bool negative = *at == '-';
    if (*at == '-' || *at == '+') at++;
    const char *digits = at;
    uint64_t mantissa = 0; /* may wrap around: used only when there were few enough digits */
    while (at < end && is_digit(*at)) mantissa = 10 * mantissa + (uint64_t)(*at++ - '0');
    int64_t count = at - digits, after_point = 0;
    if (at < end && *at == '.') {
        const char *point = at++;
        while (at < end && is_digit(*at)) mantissa = 10 * mantissa + (uint64_t)(*at++ - '0');
        after_point = at - point - 1;
        count += after_point;
    }
    if (count == 0) return judge_word(digits, end);
    lw_decimal_text parts = {digits, (size_t)(at - digits), 0, negative};
    if (at < end && (*at == 'e' || *at == 'E')) at = scan_exponent(at + 1, end, &parts.exponent);
    if (at != end) return LW_NUMBER_SYNTAX;
    int64_t exponent = parts.exponent - after_point;
    if (count <= MOST_FAST_DIGITS && exponent >= -EXACT_POWERS && exponent <= EXACT_POWERS &&
        scale_fast(mantissa, (int)exponent, out)) {
        if (negative) *out = lw_decimal_negate(*out);
        return LW_NUMBER_FINE;
    }
    return lw_decimal_exact(&parts, out) ? LW_NUMBER_FINE : LW_NUMBER_RANGE;
}
