/** A JSON document being built (jansson, only here): objects and arrays opened and closed in order, written
 * at the end. A number that is not finite becomes null. Numbers are written with the shortest text that reads
 * back. The first failure is kept and told by lw_json_text / lw_json_save. */
#ifndef LW_TABLE_JSON_H
#define LW_TABLE_JSON_H

#include "core/status.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

typedef struct lw_json lw_json;

lw_status lw_json_new(lw_json **out, lw_error *error); /**< the root is an object */
void lw_json_free(lw_json *json);
/** key is NULL inside an array. */
void lw_json_object(lw_json *json, const char *key);
void lw_json_array(lw_json *json, const char *key);
void lw_json_close(lw_json *json);
void lw_json_text_value(lw_json *json, const char *key, const char *text); /**< NULL text: null */
void lw_json_number(lw_json *json, const char *key, double value);
void lw_json_integer(lw_json *json, const char *key, int64_t value);
void lw_json_bool(lw_json *json, const char *key, bool value);
void lw_json_null(lw_json *json, const char *key);
/** The document as text, indented by two, keys in the order they came; caller frees with lw_free.
 * safe_for_script:
 *  '<', '>', '&', U+2028 and U+2029 are escaped as \uXXXX, so that it can stand in a script element. */
lw_status lw_json_dump(lw_json *json, bool safe_for_script, char **out, size_t *length, lw_error *error);
lw_status lw_json_save(lw_json *json, const char *path, lw_error *error);

/** Reading, for tests and for runs that are read again: value of a dotted path ("fit.chi_square",
 * "choices.0.damping") of a file. NaN when it is null or absent. */
typedef struct lw_json_reader lw_json_reader;
lw_status lw_json_read(const char *path, lw_json_reader **out, lw_error *error);
void lw_json_reader_free(lw_json_reader *reader);
double lw_json_get_number(const lw_json_reader *reader, const char *dotted);
/** NULL when absent or no text; lives as long as the reader. */
const char *lw_json_get_text(const lw_json_reader *reader, const char *dotted);

#endif
