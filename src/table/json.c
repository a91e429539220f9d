/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "table/json.h"

#include "core/decimal.h"
#include "core/memory.h"
#include "table/json_text.h"

#include <errno.h>
#include <fcntl.h>
#include <inttypes.h>
#include <jansson.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define DEEPEST 32

struct lw_json {
    json_t *open[DEEPEST]; /* the containers begun, the root first; borrowed but for the root */
    int depth;
    lw_status status; /* the first failure */
};

struct lw_json_reader {
    json_t *root;
};

static void give_hooks(void)
{
    json_set_alloc_funcs(lw_hook_malloc, lw_hook_free);
}

static void start_jansson(void)
{
    static pthread_once_t once = PTHREAD_ONCE_INIT;
    (void)pthread_once(&once, give_hooks);
}

lw_status lw_json_new(lw_json **out, lw_error *error)
{
    *out = NULL;
    start_jansson();
    lw_json *json = LW_NEW(lw_json);
    json_t *root = json != NULL ? json_object() : NULL;
    if (root == NULL) {
        lw_free(json);
        return lw_fail_memory(error, "a JSON document", sizeof *json);
    }
    json->open[json->depth++] = root;
    *out = json;
    return LW_OK;
}

void lw_json_free(lw_json *json)
{
    if (json == NULL) return;
    json_decref(json->open[0]);
    lw_free(json);
}

/* Text with what is not UTF-8 replaced, so that an id in another encoding cannot make a document fail. */
static json_t *new_text(const char *text)
{
    char *clean = lw_utf8_copy(text);
    json_t *value = clean != NULL ? json_string(clean) : NULL;
    lw_free(clean);
    return value;
}

/* Hands value over to the container begun last. True when it stands there. */
static bool put(lw_json *json, const char *key, json_t *value)
{
    if (json->status != LW_OK || value == NULL) {
        if (json->status == LW_OK) json->status = LW_NO_MEMORY;
        json_decref(value);
        return false;
    }
    json_t *into = json->open[json->depth - 1];
    if (json_is_array(into) != (key == NULL)) {
        json->status = LW_BAD_SHAPE;
        json_decref(value);
        return false;
    }
    char *clean = key != NULL ? lw_utf8_copy(key) : NULL;
    int failed = key == NULL     ? json_array_append_new(into, value)
                 : clean == NULL ? (json_decref(value), -1)
                                 : json_object_set_new(into, clean, value);
    lw_free(clean);
    if (failed) json->status = LW_NO_MEMORY;
    return !failed;
}

static void begin(lw_json *json, const char *key, json_t *container)
{
    if (json->depth == DEEPEST && json->status == LW_OK) json->status = LW_BAD_SHAPE;
    if (put(json, key, container)) json->open[json->depth++] = container;
}

void lw_json_object(lw_json *json, const char *key)
{
    begin(json, key, json_object());
}

void lw_json_array(lw_json *json, const char *key)
{
    begin(json, key, json_array());
}

void lw_json_close(lw_json *json)
{
    if (json->status != LW_OK) return;
    if (json->depth > 1)
        json->depth--;
    else
        json->status = LW_BAD_SHAPE;
}

void lw_json_text_value(lw_json *json, const char *key, const char *text)
{
    (void)put(json, key, text != NULL ? new_text(text) : json_null());
}

void lw_json_number(lw_json *json, const char *key, double value)
{
    (void)put(json, key, isfinite(value) ? json_real(value) : json_null());
}

void lw_json_integer(lw_json *json, const char *key, int64_t value)
{
    (void)put(json, key, json_integer(value));
}

void lw_json_bool(lw_json *json, const char *key, bool value)
{
    (void)put(json, key, json_boolean(value));
}

void lw_json_null(lw_json *json, const char *key)
{
    (void)put(json, key, json_null());
}

static void write_value(lw_json_text *out, const json_t *value, int depth);

static void write_object(lw_json_text *out, const json_t *object, int depth)
{
    const char *key;
    json_t *member,
        *held = (json_t *)(uintptr_t)object; /* jansson's iterators take no const; nothing is changed */
    bool first = true;
    lw_json_text_put(out, "{", 1);
    json_object_foreach(held, key, member)
    {
        if (!first) lw_json_text_put(out, ",", 1);
        first = false;
        lw_json_text_line(out, depth + 1);
        lw_json_text_string(out, key, strlen(key));
        lw_json_text_put(out, ": ", 2);
        write_value(out, member, depth + 1);
    }
    if (!first) lw_json_text_line(out, depth);
    lw_json_text_put(out, "}", 1);
}

static void write_array(lw_json_text *out, const json_t *array, int depth)
{
    size_t count = json_array_size(array);
    lw_json_text_put(out, "[", 1);
    for (size_t i = 0; i < count; i++) {
        if (i > 0) lw_json_text_put(out, ",", 1);
        lw_json_text_line(out, depth + 1);
        write_value(out, json_array_get(array, i), depth + 1);
    }
    if (count > 0) lw_json_text_line(out, depth);
    lw_json_text_put(out, "]", 1);
}

static void write_value(lw_json_text *out, const json_t *value, int depth)
{
    char number[LW_DOUBLE_TEXT];
    switch (json_typeof(value)) {
    case JSON_OBJECT:
        write_object(out, value, depth);
        break;
    case JSON_ARRAY:
        write_array(out, value, depth);
        break;
    case JSON_STRING:
        lw_json_text_string(out, json_string_value(value), json_string_length(value));
        break;
    case JSON_INTEGER:
        (void)snprintf(number, sizeof number, "%" JSON_INTEGER_FORMAT, json_integer_value(value));
        lw_json_text_put(out, number, strlen(number));
        break;
    case JSON_REAL:
        lw_json_text_put(out, number, lw_double_write(json_real_value(value), number));
        break;
    case JSON_TRUE:
        lw_json_text_put(out, "true", 4);
        break;
    case JSON_FALSE:
        lw_json_text_put(out, "false", 5);
        break;
    case JSON_NULL:
        lw_json_text_put(out, "null", 4);
        break;
    }
}

lw_status lw_json_dump(lw_json *json, bool safe_for_script, char **out, size_t *length, lw_error *error)
{
    *out = NULL;
    *length = 0;
    if (json->status == LW_BAD_SHAPE)
        return lw_fail(error, LW_BAD_SHAPE,
                       "a JSON document was built with a key in an array, none in an object, "
                       "or too many levels or closings");
    lw_json_text text = {.safe = safe_for_script, .failed = json->status != LW_OK};
    if (!text.failed) write_value(&text, json->open[0], 0);
    lw_json_text_put(&text, "\n", 1);
    lw_json_text_put(&text, "", 1);
    if (text.failed) {
        lw_free(text.bytes);
        return lw_fail_memory(error, "a JSON document", text.room);
    }
    *out = text.bytes;
    *length = text.used - 1;
    return LW_OK;
}

lw_status lw_json_save(lw_json *json, const char *path, lw_error *error)
{
    char *text;
    size_t length, done = 0;
    lw_status status = lw_json_dump(json, false, &text, &length, error);
    if (status != LW_OK) return status;
    int fd = open(path, O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, 0666), reason = fd < 0 ? errno : 0;
    while (reason == 0 && done < length) {
        ssize_t put_now = write(fd, text + done, length - done);
        if (put_now >= 0)
            done += (size_t)put_now;
        else if (errno != EINTR)
            reason = errno;
    }
    if (reason == 0 && fsync(fd) != 0 && errno != EINVAL && errno != ENOTSUP && errno != EROFS)
        reason = errno;
    if (fd >= 0 && close(fd) != 0 && reason == 0 && errno != EINTR) reason = errno;
    lw_free(text);
    return reason == 0 ? LW_OK : lw_fail(error, LW_SYSTEM, "%s: cannot write: %s", path, strerror(reason));
}

lw_status lw_json_read(const char *path, lw_json_reader **out, lw_error *error)
{
    json_error_t fault;
    *out = NULL;
    start_jansson();
    int fd = open(path, O_RDONLY | O_CLOEXEC);
    if (fd < 0) return lw_fail(error, LW_SYSTEM, "%s: cannot open: %s", path, strerror(errno));
    lw_json_reader *reader = LW_NEW(lw_json_reader);
    if (reader != NULL) reader->root = json_loadfd(fd, JSON_DECODE_INT_AS_REAL, &fault);
    close(fd);
    if (reader == NULL) return lw_fail_memory(error, "reading JSON", sizeof *reader);
    if (reader->root == NULL) {
        lw_free(reader);
        if (json_error_code(&fault) == json_error_out_of_memory)
            return lw_fail_memory(error, "reading JSON", 0);
        return lw_fail(error, LW_BAD_INPUT, "%s:%d:%d: %s", path, fault.line, fault.column, fault.text);
    }
    *out = reader;
    return LW_OK;
}

void lw_json_reader_free(lw_json_reader *reader)
{
    if (reader == NULL) return;
    json_decref(reader->root);
    lw_free(reader);
}

static const json_t *find(const lw_json_reader *reader, const char *dotted)
{
    const json_t *at = reader->root;
    while (at != NULL && *dotted != '\0') {
        size_t length = strcspn(dotted, ".");
        if (json_is_array(at)) {
            char *end;
            unsigned long i = strtoul(dotted, &end, 10);
            at = end == dotted + length && length > 0 ? json_array_get(at, i) : NULL;
        } else {
            at = json_object_getn(at, dotted, length);
        }
        dotted += length + (dotted[length] == '.');
    }
    return at;
}

double lw_json_get_number(const lw_json_reader *reader, const char *dotted)
{
    const json_t *value = find(reader, dotted);
    return json_is_number(value) ? json_number_value(value) : LW_NAN;
}

const char *lw_json_get_text(const lw_json_reader *reader, const char *dotted)
{
    return json_string_value(find(reader, dotted));
}
