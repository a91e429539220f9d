/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/linear_rows.h"

#include <math.h>

lw_status lw_linear_rows_open(lw_reading *reading, const char *path, lw_linear_rows *rows)
{
    lw_status status = lw_input_open(reading, path, &rows->input);
    if (status != LW_OK) return status;
    rows->row = lw_input_require(&rows->input, rows->name, rows->header);
    rows->parameter = lw_input_require(&rows->input, "parameter", rows->header);
    rows->coefficient = lw_input_require(&rows->input, "coefficient", rows->header);
    rows->value = rows->with_value ? lw_input_require(&rows->input, "value", rows->header) : 0;
    status = lw_ids_new(0, &rows->ids, reading->error);
    if (status == LW_OK)
        status = lw_triplets_new(rows->with_low, reading->watch, &rows->triplets, reading->error);
    return status;
}

/* The value of a condition stands on its first row; later rows repeat it or leave it blank. */
static lw_status add_value(lw_linear_rows *rows, int64_t row, const lw_field *field, int64_t i)
{
    lw_decimal value = {(double)NAN, (double)row}; /* no value yet; low keeps the condition's first row */
    if (i == rows->values.count) {
        if (field->length > 0)
            (void)lw_input_number(&rows->input, row, rows->value, field, LW_ANY_NUMBER, &value);
        return lw_numbers_add(&rows->values, value, rows->input.reading->error);
    }
    if (field->length == 0 || !lw_input_number(&rows->input, row, rows->value, field, LW_ANY_NUMBER, &value))
        return LW_OK;
    if (isnan(rows->values.high[i])) {
        rows->values.high[i] = value.high;
        rows->values.low[i] = value.low;
        return LW_OK;
    }
    if (value.high == rows->values.high[i] && value.low == rows->values.low[i]) return LW_OK;
    char shown[LW_SHOWN];
    lw_input_refuse(&rows->input, row, rows->value,
                    "a blank field, or the value that the condition has already", "%s",
                    lw_show(field, shown));
    return LW_OK;
}

static lw_status add_row(lw_linear_rows *rows, int64_t row, const lw_field *fields)
{
    lw_reading *reading = rows->input.reading;
    const lw_ids *parameters = reading->problem->parameters;
    const lw_field *name = fields + rows->parameter;
    lw_decimal coefficient;
    lw_triplet_room room;
    int64_t i, j = lw_ids_find(parameters, name->text, name->length);
    int added;
    char shown[LW_SHOWN];
    lw_status status =
        lw_ids_add(rows->ids, fields[rows->row].text, fields[rows->row].length, &i, &added, reading->error);
    if (status == LW_OK && rows->with_value) status = add_value(rows, row, fields + rows->value, i);
    if (status == LW_OK) status = lw_triplets_reserve(rows->triplets, 1, &room, reading->error);
    if (status != LW_OK) return status;
    bool good = lw_input_id(&rows->input, row, rows->row, fields + rows->row);
    good &= lw_input_id(&rows->input, row, rows->parameter, name) && j >= 0;
    if (j < 0 && name->length > 0 && reading->parameters_whole)
        lw_input_refuse(&rows->input, row, rows->parameter, "a parameter of the problem",
                        "the id %s, which is not there", lw_show(name, shown));
    good &= lw_input_number(&rows->input, row, rows->coefficient, fields + rows->coefficient, LW_ANY_NUMBER,
                            &coefficient);
    room.row[0] = good ? (int32_t)i : -1;
    room.column[0] = good ? (int32_t)j : -1;
    room.value[0] = coefficient.high;
    if (room.low != NULL) room.low[0] = coefficient.low;
    return LW_OK;
}

/* Empty places for rows that were left out of the batches: triplets keep the numbers of rows. */
static lw_status pad(lw_linear_rows *rows, int64_t first_row)
{
    lw_triplet_room room;
    lw_status status = LW_OK;
    while (status == LW_OK && lw_triplets_count(rows->triplets) < first_row) {
        status = lw_triplets_reserve(rows->triplets, 1, &room, rows->input.reading->error);
        if (status == LW_OK) room.row[0] = room.column[0] = -1;
    }
    return status;
}

/* Conditions that no row gave a value. */
static void refuse_without_value(lw_linear_rows *rows)
{
    for (int64_t i = 0; rows->with_value && i < rows->values.count; i++)
        if (isnan(rows->values.high[i]))
            lw_input_refuse(&rows->input, (int64_t)rows->values.low[i], rows->value,
                            "the value of the condition on one of its rows", "an empty field");
}

lw_status lw_linear_rows_read(lw_linear_rows *rows)
{
    lw_csv_batch batch;
    lw_status status = LW_OK;
    while (status == LW_OK && rows->row >= 0 && rows->parameter >= 0 && rows->coefficient >= 0 &&
           rows->value >= 0) {
        status = lw_input_next(&rows->input, &batch);
        if (status != LW_OK || batch.rows == 0) break;
        status = pad(rows, batch.first_row);
        for (int r = 0; r < batch.rows && status == LW_OK; r++)
            status = add_row(rows, batch.first_row + r, batch.fields + (int64_t)r * batch.columns);
    }
    if (status == LW_OK && !lw_input_faulty(&rows->input)) refuse_without_value(rows);
    if (status == LW_OK && !lw_input_faulty(&rows->input) && lw_ids_count(rows->ids) == 0)
        lw_input_refuse_empty(&rows->input, "one coefficient at least");
    return status;
}

lw_status lw_linear_rows_close(lw_linear_rows *rows)
{
    lw_status status = lw_input_close(&rows->input);
    lw_ids_free(rows->ids);
    rows->ids = NULL;
    lw_triplets_free(rows->triplets);
    rows->triplets = NULL;
    lw_numbers_clear(&rows->values);
    return status;
}
