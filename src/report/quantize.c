/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/quantize.h"

#include "core/memory.h"

#include <math.h>
#include <string.h>

char *lw_base64(const void *bytes, size_t length)
{
    static const char digit[] = "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
    const unsigned char *in = bytes;
    char *text = lw_alloc(length / 3 + 2, 4);
    if (text == NULL) return NULL;
    char *out = text;
    size_t i = 0;
    for (; i + 3 <= length; i += 3) {
        unsigned v = (unsigned)in[i] << 16 | (unsigned)in[i + 1] << 8 | in[i + 2];
        *out++ = digit[v >> 18];
        *out++ = digit[v >> 12 & 63];
        *out++ = digit[v >> 6 & 63];
        *out++ = digit[v & 63];
    }
    if (i < length) {
        unsigned v = (unsigned)in[i] << 16 | (i + 1 < length ? (unsigned)in[i + 1] << 8 : 0u);
        *out++ = digit[v >> 18];
        *out++ = digit[v >> 12 & 63];
        *out++ = i + 1 < length ? digit[v >> 6 & 63] : '=';
        *out++ = '=';
    }
    *out = '\0';
    return text;
}

/* {kind, name of first, first, ...}: opens, adds data, closes. */
static lw_status put(lw_json *json, const char *key, const char *kind, const char *const *name,
                     const double *number, const void *bytes, size_t length, lw_error *error)
{
    char *text = lw_base64(bytes, length);
    if (text == NULL) return lw_fail_memory(error, "report", length);
    lw_json_object(json, key);
    lw_json_text_value(json, "kind", kind);
    for (; name && *name; name++) lw_json_number(json, *name, *number++);
    lw_json_text_value(json, "data", text);
    lw_json_close(json);
    lw_free(text);
    return LW_OK;
}

/* Smallest and largest finite value; 0, 0 when there is none. */
static void find_range(int64_t count, const double *values, double *low, double *high)
{
    *low = HUGE_VAL;
    *high = -HUGE_VAL;
    for (int64_t i = 0; i < count; i++) {
        if (!isfinite(values[i])) continue;
        if (values[i] < *low) *low = values[i];
        if (values[i] > *high) *high = values[i];
    }
    if (*low > *high) *low = *high = 0.0;
}

lw_status lw_pack_numbers(lw_json *json, const char *key, int64_t count, const double *values,
                          lw_error *error)
{
    static const char *const name[] = {"offset", NULL};
    if (values == NULL) {
        lw_json_null(json, key);
        return LW_OK;
    }
    if (count <= LW_PACK_EXACT)
        return put(json, key, "f64", NULL, NULL, values, (size_t)count * sizeof(double), error);
    double low, high;
    find_range(count, values, &low, &high);
    float *small = LW_NEW_ARRAY(float, count);
    if (small == NULL) return lw_fail_memory(error, "report", (size_t)count * sizeof(float));
    for (int64_t i = 0; i < count; i++) small[i] = (float)(values[i] - low);
    lw_status status = put(json, key, "f32", name, &low, small, (size_t)count * sizeof(float), error);
    lw_free(small);
    return status;
}

lw_status lw_pack_integers(lw_json *json, const char *key, int64_t count, const int32_t *values,
                           lw_error *error)
{
    if (values) return put(json, key, "i32", NULL, NULL, values, (size_t)count * sizeof(int32_t), error);
    lw_json_null(json, key);
    return LW_OK;
}

lw_status lw_pack_bytes(lw_json *json, const char *key, int64_t count, const uint8_t *values, lw_error *error)
{
    if (values) return put(json, key, "u8", NULL, NULL, values, (size_t)count, error);
    lw_json_null(json, key);
    return LW_OK;
}

/* stored = 1 + round((value - low) / step), step = (high - low) / 65534. */
lw_status lw_pack_model(lw_json *json, const char *key, int64_t count, const double *values, lw_error *error)
{
    static const char *const name[] = {"low", "step", NULL};
    double low, high;
    find_range(count, values, &low, &high);
    double number[2] = {low, high / 65534.0 - low / 65534.0};
    uint16_t *stored = LW_NEW_ARRAY(uint16_t, count);
    if (stored == NULL) return lw_fail_memory(error, "report", (size_t)count * sizeof(uint16_t));
    for (int64_t j = 0; j < count; j++) {
        double place = number[1] > 0.0 ? nearbyint((values[j] - low) / number[1]) : 0.0;
        stored[j] = isfinite(values[j]) ? (uint16_t)(1.0 + fmin(fmax(place, 0.0), 65534.0)) : 0;
    }
    lw_status status = put(json, key, "u16", name, number, stored, (size_t)count * sizeof(uint16_t), error);
    lw_free(stored);
    return status;
}
