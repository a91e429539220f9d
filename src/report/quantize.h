/** Columns of numbers packed for the browser: base64 of little-endian values, models quantised to 16 bits.
 *
 *      f64, i32, u8   value = stored
 *      f32            value = offset + stored
 *      u16            value = low + step (stored - 1), stored 1 .. 65535; 0 = unknown; |error| <= step / 2 */
#ifndef LW_REPORT_QUANTIZE_H
#define LW_REPORT_QUANTIZE_H

#include "table/json.h"

/** Longer columns are packed in single precision, from an offset. */
#define LW_PACK_EXACT 20000

/** Base64 (RFC 4648) text of `length` bytes, NUL-terminated; NULL without memory; caller frees with lw_free.
 */
char *lw_base64(const void *bytes, size_t length);

/** Each adds {kind, ..., data} under `key`; values NULL: null. NaN stays NaN. */
lw_status lw_pack_numbers(lw_json *json, const char *key, int64_t count, const double *values,
                          lw_error *error);
lw_status lw_pack_integers(lw_json *json, const char *key, int64_t count, const int32_t *values,
                           lw_error *error);
lw_status lw_pack_bytes(lw_json *json, const char *key, int64_t count, const uint8_t *values,
                        lw_error *error);
lw_status lw_pack_model(lw_json *json, const char *key, int64_t count, const double *values, lw_error *error);

#endif
