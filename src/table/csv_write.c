/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "table/csv_write.h"

#include "core/decimal.h"
#include "core/memory.h"

#include <errno.h>
#include <fcntl.h>
#include <inttypes.h>
#include <stdbool.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#define ROOM ((size_t)1 << 16)

struct lw_csv_writer {
    int fd;
    int reason; /* errno of the first failure */
    char *path;
    size_t used;
    int fields;      /* of the row begun */
    bool row_filled; /* a byte was written in it */
    char buffer[ROOM];
};

lw_status lw_csv_create(const char *path, lw_csv_writer **out, lw_error *error)
{
    *out = NULL;
    lw_csv_writer *writer = lw_alloc(1, sizeof *writer);
    char *copy = writer != NULL ? lw_copy_text(path) : NULL;
    if (copy == NULL) {
        lw_free(writer);
        return lw_fail_memory(error, "a file writer", sizeof *writer + strlen(path) + 1);
    }
    int fd = open(path, O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, 0666);
    if (fd < 0) {
        lw_free(copy);
        lw_free(writer);
        return lw_fail(error, LW_SYSTEM, "%s: cannot create: %s", path, strerror(errno));
    }
    writer->fd = fd;
    writer->reason = 0;
    writer->path = copy;
    writer->used = 0;
    writer->fields = 0;
    writer->row_filled = false;
    *out = writer;
    return LW_OK;
}

static void flush(lw_csv_writer *writer)
{
    const char *bytes = writer->buffer;
    while (writer->used > 0 && writer->reason == 0) {
        ssize_t put = write(writer->fd, bytes, writer->used);
        if (put < 0) {
            if (errno != EINTR) writer->reason = errno;
            continue;
        }
        bytes += put;
        writer->used -= (size_t)put;
    }
    writer->used = 0;
}

static void put(lw_csv_writer *writer, const char *bytes, size_t length)
{
    while (length > 0) {
        if (writer->used == ROOM) flush(writer);
        size_t part = length < ROOM - writer->used ? length : ROOM - writer->used;
        memcpy(writer->buffer + writer->used, bytes, part);
        writer->used += part;
        bytes += part;
        length -= part;
    }
}

static void begin_field(lw_csv_writer *writer)
{
    if (writer->fields++ > 0) put(writer, ",", 1);
}

/* Quotes, commas, line ends; blanks that a reader would trim; a '#' that would read as a comment. */
static bool needs_quotes(const char *text, size_t length)
{
    if (length == 0) return false;
    if (strchr(" \t#", text[0]) != NULL || strchr(" \t", text[length - 1]) != NULL) return true;
    if ((unsigned char)text[0] == 0xef) return true; /* would read as a byte-order mark */
    for (size_t i = 0; i < length; i++)
        if (text[i] == ',' || text[i] == '"' || text[i] == '\n' || text[i] == '\r') return true;
    return false;
}

void lw_csv_bytes_of(lw_csv_writer *writer, const char *text, size_t length)
{
    begin_field(writer);
    if (length > 0) writer->row_filled = true;
    if (!needs_quotes(text, length)) {
        put(writer, text, length);
        return;
    }
    put(writer, "\"", 1);
    while (length > 0) {
        const char *quote = memchr(text, '"', length);
        size_t part = quote != NULL ? (size_t)(quote - text) + 1 : length;
        put(writer, text, part);
        if (quote != NULL) put(writer, "\"", 1);
        text += part;
        length -= part;
    }
    put(writer, "\"", 1);
}

void lw_csv_text(lw_csv_writer *writer, const char *text)
{
    lw_csv_bytes_of(writer, text, strlen(text));
}

void lw_csv_number(lw_csv_writer *writer, double value)
{
    char text[LW_DOUBLE_TEXT];
    size_t length = lw_double_write(value, text);
    begin_field(writer);
    if (length > 0) writer->row_filled = true;
    put(writer, text, length);
}

void lw_csv_integer(lw_csv_writer *writer, int64_t value)
{
    char text[24];
    int length = snprintf(text, sizeof text, "%" PRId64, value);
    begin_field(writer);
    writer->row_filled = true;
    put(writer, text, (size_t)length);
}

void lw_csv_empty(lw_csv_writer *writer)
{
    begin_field(writer);
}

/* A row of one empty field is quoted: a blank line would read as no row. */
void lw_csv_end_row(lw_csv_writer *writer)
{
    if (writer->fields == 1 && !writer->row_filled) put(writer, "\"\"", 2);
    put(writer, "\n", 1);
    writer->fields = 0;
    writer->row_filled = false;
}

lw_status lw_csv_finish(lw_csv_writer *writer, lw_error *error)
{
    if (writer == NULL) return LW_OK;
    flush(writer);
    if (writer->reason == 0 && fsync(writer->fd) != 0 && errno != EINVAL && errno != ENOTSUP &&
        errno != EROFS)
        writer->reason = errno;
    if (close(writer->fd) != 0 && writer->reason == 0 && errno != EINTR) writer->reason = errno;
    lw_status status = LW_OK;
    if (writer->reason != 0)
        status = lw_fail(error, LW_SYSTEM, "%s: cannot write: %s", writer->path, strerror(writer->reason));
    lw_free(writer->path);
    lw_free(writer);
    return status;
}
