/** Decimal to binary and back by integers of any length: the slow, always right path behind core/decimal.
 *
 *  Source: Clinger, "How to read floating point numbers accurately", PLDI 1990 (the exact path). */
#ifndef LW_CORE_DECIMAL_EXACT_H
#define LW_CORE_DECIMAL_EXACT_H

#include "core/decimal.h"

#include <stdint.h>

/** A scanned number: digits with at most one point among them, and the exponent behind the e. */
typedef struct lw_decimal_text {
    const char *digits;
    size_t length;
    int64_t exponent;
    bool negative;
} lw_decimal_text;

/** high = nearest double (ties to even), low = nearest double to the rest. False when the value overflows. */
bool lw_decimal_exact(const lw_decimal_text *text, lw_decimal *out);

/** mantissa * 2^binary * 10^decimal rounded to the nearest integer (half up); it must stay below 2^64. */
uint64_t lw_integer_scaled(uint64_t mantissa, int binary, int decimal);

#endif
