/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The shortest decimal that reads back to the same double, and among those the nearest.
 *
 * W = v 10^k with k such that 10^16 <= W < 10^17 is formed in double-double; the decimals that read back lie
 * within h = ulp(v) 10^k / 2 of it. What comes too near that border is left to exact integers. */
#include "core/decimal.h"

#include "core/decimal_exact.h"

#include <stdint.h>
#include <string.h>

#define DIGITS 17
#define DOUBTFUL 1e-9 /* W is good to 2^-47 */

static const double power_of_ten[] = {1e0,  1e1,  1e2,  1e3,  1e4,  1e5,  1e6,  1e7,  1e8,  1e9,  1e10, 1e11,
                                      1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22};

/* v 10^k for -22 <= k <= 44 */
static lw_decimal scaled(double v, int k)
{
    if (k < 0) {
        double power = power_of_ten[-k], q = v / power;
        return (lw_decimal){q, fma(-q, power, v) / power};
    }
    if (k <= 22) return lw_two_product(v, power_of_ten[k]);
    lw_decimal p = lw_two_product(v, power_of_ten[22]);
    return lw_decimal_multiply(p, lw_decimal_of(power_of_ten[k - 22]));
}

/* digits 10^-k = v > 0, by double-double. False: out of its range or too near to call. */
static bool shortest_fast(double v, uint64_t *digits, int *k)
{
    int binary;
    double fraction = frexp(v, &binary);
    if (fraction == 0.5 || binary < -92 || binary > 126)
        return false; /* a power of two has unequal neighbours */
    *k = DIGITS - 1 - (int)floor((binary - 1) * 0.30102999566398120);
    if (*k < -21 || *k > 44) return false;
    lw_decimal w = scaled(v, *k);
    if (w.high >= 1e17) w = scaled(v, --*k);
    double half = ldexp(0.5, binary - 53), whole = floor(w.low);
    half = *k >= 0 ? half * power_of_ten[*k > 22 ? 22 : *k] * power_of_ten[*k > 22 ? *k - 22 : 0]
                   : half / power_of_ten[-*k];
    uint64_t integer = (uint64_t)w.high + (uint64_t)(int64_t)whole;
    double rest = w.low - whole;
    for (uint64_t unit = 100; unit >= 10; unit /= 10) {
        double below = (double)(integer % unit) + rest, above = (double)unit - below;
        double distance = below < above ? below : above;
        if (fabs(distance - half) < DOUBTFUL || fabs(below - above) < DOUBTFUL) return false;
        if (distance > half) continue;
        *digits = integer - integer % unit + (below < above ? 0 : unit);
        return true;
    }
    *digits = integer + (rest >= 0.5);
    return fabs(rest - 0.5) >= DOUBTFUL;
}

static bool reads_back(uint64_t digits, int k, double v)
{
    char text[24];
    size_t at = sizeof text;
    for (; digits > 0; digits /= 10) text[--at] = (char)('0' + digits % 10);
    lw_decimal read;
    lw_decimal_text parts = {text + at, sizeof text - at, -k, false};
    return lw_decimal_exact(&parts, &read) && read.high == v;
}

/* The same by exact integers, from few digits to many. */
static void shortest_exact(double v, uint64_t *digits, int *k)
{
    int binary;
    uint64_t mantissa = (uint64_t)ldexp(frexp(v, &binary), 53);
    int top = (int)floor((binary - 1) * 0.30102999566398120); /* v >= 10^top, and < 10^(top + 2) */
    if (lw_integer_scaled(mantissa, binary - 53, DIGITS - 1 - top) >= UINT64_C(100000000000000000)) top++;
    for (int count = v < 0x1p-1022 ? 1 : 15; count < DIGITS; count++) {
        *k = count - 1 - top;
        uint64_t nearest = lw_integer_scaled(mantissa, binary - 53, *k);
        for (int step = 0; step < 3; step++) {
            *digits = step == 0 ? nearest : step == 1 ? nearest + 1 : nearest - 1;
            if (reads_back(*digits, *k, v)) return;
        }
    }
    *k = DIGITS - 1 - top;
    *digits = lw_integer_scaled(mantissa, binary - 53, *k);
}

/* d.ddde+xx from 10^16 and below 10^-4, else with the point in its place. digits: count of them, value 0.ddd
 * 10^point. */
static size_t lay_out(const char *digit, int count, int point, char *text)
{
    char *at = text;
    if (point > 16 || point < -3) {
        int exponent = point - 1;
        *at++ = digit[0];
        if (count > 1) *at++ = '.';
        memcpy(at, digit + 1, (size_t)(count - 1));
        at += count - 1;
        *at++ = 'e';
        *at++ = exponent < 0 ? '-' : '+';
        if (exponent < 0) exponent = -exponent;
        if (exponent >= 100) *at++ = (char)('0' + exponent / 100);
        *at++ = (char)('0' + exponent / 10 % 10);
        *at++ = (char)('0' + exponent % 10);
    } else if (point <= 0) {
        *at++ = '0';
        *at++ = '.';
        for (int i = point; i < 0; i++) *at++ = '0';
        memcpy(at, digit, (size_t)count);
        at += count;
    } else {
        for (int i = 0; i < count || i < point; i++) {
            if (i == point) *at++ = '.';
            *at++ = i < count ? digit[i] : '0';
        }
    }
    *at = '\0';
    return (size_t)(at - text);
}

size_t lw_double_write(double value, char text[LW_DOUBLE_TEXT])
{
    size_t sign = 0;
    text[0] = '\0';
    if (isnan(value)) return 0;
    if (signbit(value)) text[sign++] = '-';
    value = fabs(value);
    if (value == 0.0 || isinf(value)) {
        strcpy(text + sign, value == 0.0 ? "0" : "inf");
        return strlen(text);
    }
    uint64_t digits;
    int k, count = 0;
    if (!shortest_fast(value, &digits, &k)) shortest_exact(value, &digits, &k);
    for (; digits % 10 == 0; digits /= 10) k--;
    char digit[24];
    size_t at = sizeof digit;
    for (; digits > 0; digits /= 10, count++) digit[--at] = (char)('0' + digits % 10);
    return sign + lay_out(digit + at, count, count - k, text + sign);
}
