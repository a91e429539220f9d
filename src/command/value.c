/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/arguments.h"

#include "core/decimal.h"

#include <stdio.h>
#include <string.h>

lw_status lw_value_double(const char *option, const char *text, double low, double high, const char *expected,
                          double *out, lw_error *error)
{
    lw_decimal value;
    if (lw_decimal_parse(text, strlen(text), &value) != LW_NUMBER_FINE ||
        !(value.high >= low && value.high <= high))
        return lw_fail(error, LW_BAD_USAGE, "--%s: found '%.40s', expected %s", option, text, expected);
    *out = value.high;
    return LW_OK;
}

lw_status lw_value_integer(const char *option, const char *text, int64_t low, int64_t high, int64_t *out,
                           lw_error *error)
{
    lw_decimal value;
    if (lw_decimal_parse(text, strlen(text), &value) != LW_NUMBER_FINE || value.low != 0.0 ||
        !(value.high >= (double)low && value.high <= (double)high) ||
        value.high != (double)(int64_t)value.high)
        return lw_fail(error, LW_BAD_USAGE, "--%s: found '%.40s', expected a whole number from %lld to %lld",
                       option, text, (long long)low, (long long)high);
    *out = (int64_t)value.high;
    return LW_OK;
}

lw_status lw_value_word(const char *option, const char *text, const char *const *words, int *out,
                        lw_error *error)
{
    char list[300] = "";
    for (int i = 0; words[i]; i++) {
        if (strcmp(text, words[i]) == 0) {
            *out = i;
            return LW_OK;
        }
        size_t used = strlen(list);
        snprintf(list + used, sizeof list - used, "%s%s",
                 i == 0         ? ""
                 : words[i + 1] ? ", "
                                : " or ",
                 words[i]);
    }
    return lw_fail(error, LW_BAD_USAGE, "--%s: found '%.40s', expected %s", option, text, list);
}

lw_status lw_value_memory(const char *option, const char *text, int64_t *out, lw_error *error)
{
    static const char units[] = "KMGT";
    size_t length = strlen(text);
    int64_t factor = 1;
    const char *unit = length > 1 ? strchr(units, text[length - 1] & ~0x20) : NULL;
    if (unit && *unit) {
        factor = INT64_C(1) << (10 * (unit - units + 1));
        length--;
    }
    lw_decimal value;
    if (lw_decimal_parse(text, length, &value) != LW_NUMBER_FINE || value.high * (double)factor < 1048576.0 ||
        value.high * (double)factor > 9e18)
        return lw_fail(error, LW_BAD_USAGE,
                       "--%s: found '%.40s', expected a size like 512M or 8G, at least 1M", option, text);
    *out = (int64_t)(value.high * (double)factor);
    return LW_OK;
}
