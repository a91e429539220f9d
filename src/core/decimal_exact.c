/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/decimal_exact.h"

#include <string.h>

/* Digits beyond these cannot change the rounding except by not being zero (767 are enough for a double). */
#define MOST_DIGITS 800
/* Bits of a quotient: 53 for high, at least 53 for low even when the bits between are zeros, and some more.
 */
#define QUOTIENT_BITS 256
/* Values below 10^-LEAST_EXPONENT are zero, from 10^MOST_EXPONENT on they overflow. */
#define MOST_EXPONENT 309
#define LEAST_EXPONENT 344
#define LIMBS 128
#define FIVE_13 UINT32_C(1220703125)

/* A natural number, 32 bits a limb, lowest first; limb[count - 1] != 0. The longest has 800 digits and
 * 5^1144: 2658 + 256 bits and 1144 * 2.33 bits never together exceed LIMBS * 32. */
typedef struct natural {
    uint32_t limb[LIMBS];
    int count;
} natural;

static void multiply_add(natural *x, uint32_t factor, uint32_t add)
{
    uint64_t carry = add;
    for (int i = 0; i < x->count; i++) {
        carry += (uint64_t)x->limb[i] * factor;
        x->limb[i] = (uint32_t)carry;
        carry >>= 32;
    }
    if (carry != 0) x->limb[x->count++] = (uint32_t)carry;
}

/* x = floor(x / divisor), returns the remainder. */
static uint32_t divide(natural *x, uint32_t divisor)
{
    uint64_t rest = 0;
    for (int i = x->count - 1; i >= 0; i--) {
        rest = rest << 32 | x->limb[i];
        x->limb[i] = (uint32_t)(rest / divisor);
        rest %= divisor;
    }
    while (x->count > 0 && x->limb[x->count - 1] == 0) x->count--;
    return (uint32_t)rest;
}

static void shift_left(natural *x, int bits)
{
    int limbs = bits / 32, rest = bits % 32;
    memmove(x->limb + limbs, x->limb, (size_t)x->count * sizeof x->limb[0]);
    memset(x->limb, 0, (size_t)limbs * sizeof x->limb[0]);
    x->count += x->count > 0 ? limbs : 0;
    if (rest > 0) multiply_add(x, UINT32_C(1) << rest, 0);
}

static void multiply_power_of_five(natural *x, int power)
{
    for (; power >= 13; power -= 13) multiply_add(x, FIVE_13, 0);
    for (; power > 0; power--) multiply_add(x, 5, 0);
}

/* floor(floor(x / a) / b) = floor(x / (a b)); true when anything was cut off. */
static bool divide_power_of_five(natural *x, int power)
{
    bool rest = false;
    for (; power >= 13; power -= 13) rest |= divide(x, FIVE_13) != 0;
    for (; power > 0; power--) rest |= divide(x, 5) != 0;
    return rest;
}

static int bit_length(const natural *x)
{
    return x->count == 0 ? 0 : 32 * x->count - __builtin_clz(x->limb[x->count - 1]);
}

static bool bit(const natural *x, int at)
{
    return at >= 0 && at / 32 < x->count && (x->limb[at / 32] >> (at % 32) & 1) != 0;
}

static bool any_bit_below(const natural *x, int at)
{
    int whole = at / 32 < x->count ? at / 32 : x->count;
    for (int i = 0; i < whole; i++)
        if (x->limb[i] != 0) return true;
    return at > 0 && at / 32 < x->count && at % 32 > 0 &&
           (x->limb[at / 32] & ((UINT32_C(1) << at % 32) - 1)) != 0;
}

/* Bits from .. from + 63 as an integer; from may be negative or beyond the top. */
static uint64_t bits_from(const natural *x, int from)
{
    if (from < 0) return from <= -64 ? 0 : bits_from(x, 0) << -from;
    uint64_t result = 0;
    for (int i = 2; i >= 0; i--) {
        uint64_t limb = from / 32 + i < x->count ? x->limb[from / 32 + i] : 0;
        if (i == 2)
            result = from % 32 > 0 ? limb << (64 - from % 32) : 0;
        else
            result |= i == 1 ? limb << 32 >> (from % 32) : limb >> (from % 32);
    }
    return result;
}

static int64_t clamp(int64_t a, int64_t least, int64_t most)
{
    return a < least ? least : a > most ? most : a;
}

/* x = the digits as an integer, *exponent = the power of ten that it is to be multiplied by; true when digits
 * were cut. *top = the power of ten just above the value. */
static bool take_digits(const lw_decimal_text *text, natural *x, int64_t *exponent, int64_t *top)
{
    int64_t after_point = 0, cut = 0;
    int kept = 0;
    bool point = false, rest = false;
    x->count = 0;
    for (size_t i = 0; i < text->length; i++) {
        if (text->digits[i] == '.') {
            point = true;
            continue;
        }
        uint32_t digit = (uint32_t)(text->digits[i] - '0');
        after_point += point;
        if (kept == 0 && digit == 0) continue;
        if (kept < MOST_DIGITS) {
            multiply_add(x, 10, digit);
            kept++;
        } else {
            cut++;
            rest |= digit != 0;
        }
    }
    *exponent = text->exponent - after_point + cut;
    *top = *exponent + kept;
    return rest;
}

/* The lowest `bits` bits of x, or 2^bits minus them, as a double times 2^binary. */
static double low_part(natural *x, int bits, bool complement, bool sticky, int binary)
{
    if (bits <= 0) return 0.0;
    x->count = x->count < bits / 32 + 1 ? x->count : bits / 32 + 1;
    if (bits / 32 < x->count) x->limb[bits / 32] &= (UINT32_C(1) << bits % 32) - 1;
    if (complement) { /* 2^bits - x = ~x + 1; with a rest beyond x, ~x and a rest */
        while (x->count <= bits / 32) x->limb[x->count++] = 0;
        for (int i = 0; i < x->count; i++) x->limb[i] = ~x->limb[i];
        x->limb[bits / 32] &= (UINT32_C(1) << bits % 32) - 1;
        if (!sticky) multiply_add(x, 1, 1);
    }
    while (x->count > 0 && x->limb[x->count - 1] == 0) x->count--;
    int length = bit_length(x), from = length - 64;
    if (from <= 0) return ldexp((double)bits_from(x, 0), binary);
    uint64_t head = bits_from(x, from);
    if (sticky || any_bit_below(x, from)) head |= 1;
    return ldexp((double)head, binary + from);
}

/* x * 2^binary (plus a rest below x's last bit when sticky) to high and low. */
static bool round_natural(natural *x, int binary, bool sticky, lw_decimal *out)
{
    int length = bit_length(x), top = length + binary; /* value < 2^top */
    int precision = top > -1021 ? 53 : 53 - (-1021 - top);
    if (precision < 0) return true;
    int cut = length - precision;
    uint64_t mantissa = precision == 0 ? 0 : cut >= 0 ? bits_from(x, cut) : bits_from(x, 0);
    if (precision < 64 && cut >= 0) mantissa &= (UINT64_C(1) << precision) - 1;
    bool up = bit(x, cut - 1) && (sticky || any_bit_below(x, cut - 1) || (mantissa & 1) != 0);
    mantissa += up;
    double high = ldexp((double)mantissa, cut > 0 ? binary + cut : binary);
    if (isinf(high)) return false;
    double low = low_part(x, cut, up, sticky, binary);
    *out = (lw_decimal){high, up ? -low : low};
    return true;
}

bool lw_decimal_exact(const lw_decimal_text *text, lw_decimal *out)
{
    natural x;
    int64_t exponent, top;
    *out = (lw_decimal){0.0, 0.0};
    bool sticky = take_digits(text, &x, &exponent, &top), fits = true;
    if (x.count > 0 && top > MOST_EXPONENT) return false;
    if (x.count > 0 && top >= -LEAST_EXPONENT) {
        int power = (int)clamp(exponent, -LEAST_EXPONENT - MOST_DIGITS, MOST_EXPONENT), binary = power;
        if (power >= 0) {
            multiply_power_of_five(&x, power);
        } else {
            int more = QUOTIENT_BITS + (int)(2.3219281 * -power) + 1 - bit_length(&x);
            if (more > 0) {
                shift_left(&x, more);
                binary -= more;
            }
            sticky |= divide_power_of_five(&x, -power);
        }
        fits = round_natural(&x, binary, sticky, out);
    }
    if (text->negative) *out = lw_decimal_negate(*out);
    return fits;
}

uint64_t lw_integer_scaled(uint64_t mantissa, int binary, int decimal)
{
    natural x = {{(uint32_t)mantissa, (uint32_t)(mantissa >> 32)}, 2};
    while (x.count > 0 && x.limb[x.count - 1] == 0) x.count--;
    int shift = binary + decimal;
    if (decimal >= 0) {
        multiply_power_of_five(&x, decimal);
        if (shift > 0) shift_left(&x, shift);
    } else {
        /* two more bits than wanted, so that the cut-off rest cannot hide a half */
        int more = shift > -2 ? shift + 2 : 0;
        shift_left(&x, more);
        shift -= more;
        if (divide_power_of_five(&x, -decimal) && x.count > 0) x.limb[0] |= 1;
    }
    if (shift >= 0) return bits_from(&x, 0);
    return bits_from(&x, -shift) + bit(&x, -shift - 1);
}
