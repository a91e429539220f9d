/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Any bytes as a CSV file: no crash, every field handed over is found again at its place, faults have
 * messages. With clang's -fsanitize=fuzzer a fuzz target; without, replays the files named on the command
 * line. */
#define _GNU_SOURCE 1
#include "fuzz_input.h"

#include "table/csv_read.h"

#include <stdlib.h>
#include <string.h>

/* The first byte of a field that stands at this line and column. */
static const uint8_t *byte_at(const uint8_t *data, size_t size, lw_place place)
{
    int64_t line = 1;
    size_t at = 0;
    for (; at < size && line < place.line; at++)
        line += data[at] == '\n' || (data[at] == '\r' && (at + 1 == size || data[at + 1] != '\n'));
    size_t offset = at + (size_t)place.column - 1;
    return line == place.line && offset < size ? data + offset : NULL;
}

static void check_place(const lw_csv *csv, int64_t row, int c, const lw_field *field, const uint8_t *data,
                        size_t size)
{
    lw_place place;
    if (lw_csv_locate(csv, row, c, &place) != LW_OK) abort();
    if (field->length == 0 && !field->quoted) return;
    const uint8_t *byte = byte_at(data, size, place);
    if (byte == NULL || *byte != (field->quoted ? '"' : (uint8_t)field->text[0])) abort();
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    char path[FUZZ_PATH];
    int fd = fuzz_open(data, size, path);
    lw_csv *csv;
    lw_csv_batch batch;
    lw_error error = {0};
    lw_decimal number;
    lw_status status = lw_csv_open(path, &csv, &error);
    int checked = 0;
    bool number_fault = false;
    while (status == LW_OK && (status = lw_csv_next(csv, &batch, NULL, &error)) == LW_OK && batch.rows > 0)
        for (int r = 0; r < batch.rows; r++)
            for (int c = 0; c < batch.columns; c++) {
                const lw_field *field = &batch.fields[(size_t)r * (size_t)batch.columns + (size_t)c];
                if (checked++ < 50) check_place(csv, batch.first_row + r, c, field, data, size);
                number_fault |= lw_csv_decimal(csv, &batch, r, c, &number, &error) != LW_OK;
            }
    if ((status != LW_OK || number_fault) != (error.text[0] != '\0')) abort();
    lw_csv_close(csv);
    fuzz_close(fd);
    return 0;
}
