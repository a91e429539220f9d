/* SPDX-License-Identifier: GPL-3.0-or-later */
/* design.csv: observation, parameter, coefficient; one nonzero a row, any order. */
#include "problem/read.h"

#include "core/memory.h"

#include <math.h>
#include <stdio.h>

#define HEADER "observation,parameter,coefficient"

typedef struct table {
    lw_input input;
    int observation, parameter, coefficient;
    lw_triplets *triplets;
    bool *hit; /* m: has an equation */
} table;

static void refuse_unknown(table *t, int64_t row, int c, const lw_field *field, const char *what,
                           const char *file)
{
    char shown[LW_SHOWN], expected[64];
    if (!lw_input_id(&t->input, row, c, field)) return;
    (void)snprintf(expected, sizeof expected, "%s of %s", what, file);
    lw_input_refuse(&t->input, row, c, expected, "the id %s, which is not there", lw_show(field, shown));
}

/* Row and column of one triplet, -1 where they are not known; unknown ids count as faults of this file only
 * when the file that should have them is whole. */
static void place(table *t, int64_t row, const lw_field *fields, int64_t i, int64_t j, lw_triplet_room *room,
                  int r)
{
    lw_reading *reading = t->input.reading;
    if (i < 0 && (reading->observations_whole || fields[t->observation].length == 0))
        refuse_unknown(t, row, t->observation, fields + t->observation, "an observation",
                       "the observations file");
    if (j < 0 && (reading->parameters_whole || fields[t->parameter].length == 0))
        refuse_unknown(t, row, t->parameter, fields + t->parameter, "a parameter", "the parameters file");
    if (j >= 0 && fields[t->parameter].length == 0)
        (void)lw_input_id(&t->input, row, t->parameter, fields + t->parameter);
    bool good = i >= 0 && j >= 0 && !isnan(room->value[r]);
    room->row[r] = good ? (int32_t)i : -1;
    room->column[r] = good ? (int32_t)j : -1;
    if (i >= 0) t->hit[i] = true;
}

/* Empty places for the rows that were left out of the batches, so that triplets keep the numbers of rows. */
static lw_status pad(table *t, int64_t first_row)
{
    lw_triplet_room room;
    while (lw_triplets_count(t->triplets) < first_row) {
        lw_status status = lw_triplets_reserve(t->triplets, 1, &room, t->input.reading->error);
        if (status != LW_OK) return status;
        room.row[0] = room.column[0] = -1;
    }
    return LW_OK;
}

static lw_status add_batch(table *t, const lw_csv_batch *batch)
{
    lw_reading *reading = t->input.reading;
    lw_ids *parameters = reading->problem->parameters;
    int64_t i[LW_CSV_BATCH], j[LW_CSV_BATCH];
    lw_triplet_room room;
    lw_status status = pad(t, batch->first_row);
    if (status == LW_OK) status = lw_triplets_reserve(t->triplets, batch->rows, &room, reading->error);
    if (status != LW_OK) return status;
    lw_ids_find_batch(reading->problem->observations, batch->fields + t->observation, batch->rows,
                      batch->columns, i);
    if (reading->parameters_given)
        lw_ids_find_batch(parameters, batch->fields + t->parameter, batch->rows, batch->columns, j);
    else
        status = lw_ids_add_batch(parameters, batch->fields + t->parameter, batch->rows, batch->columns, j,
                                  reading->error);
    for (int r = 0; r < batch->rows && status == LW_OK; r++) {
        const lw_field *fields = batch->fields + (int64_t)r * batch->columns;
        lw_decimal value;
        int64_t row = batch->first_row + r;
        if (lw_decimal_parse(fields[t->coefficient].text, fields[t->coefficient].length, &value) !=
            LW_NUMBER_FINE)
            (void)lw_input_number(&t->input, row, t->coefficient, fields + t->coefficient, LW_ANY_NUMBER,
                                  &value);
        room.value[r] = value.high;
        if (room.low != NULL) room.low[r] = value.low;
        place(t, row, fields, i[r], j[r], &room, r);
    }
    return status;
}

lw_status lw_read_matrix(lw_input *input, lw_triplets *triplets, const lw_ids *rows, int c, lw_sparse **out,
                         int64_t *added)
{
    lw_reading *reading = input->reading;
    lw_repeated repeated;
    char row[LW_SHOWN], column[LW_SHOWN];
    lw_status status =
        lw_triplets_matrix(triplets, lw_ids_count(rows), lw_ids_count(reading->problem->parameters), out,
                           &repeated, reading->error);
    *added = repeated.count;
    if (status != LW_OK || reading->options->add_repeated) return status;
    for (int k = 0; k < repeated.shown && reading->error->faults - input->before < LW_MOST_FAULTS; k++)
        lw_input_refuse(input, repeated.later[k], c, "every pair once (--repeated add sums them)",
                        "the pair %s, %s again", lw_show_id(rows, repeated.row[k], row),
                        lw_show_id(reading->problem->parameters, repeated.column[k], column));
    return LW_OK;
}

static lw_status read_rows(table *t)
{
    lw_reading *reading = t->input.reading;
    lw_problem *problem = reading->problem;
    lw_csv_batch batch;
    lw_status status = LW_OK;
    t->hit = LW_NEW_ZEROS(bool, problem->m);
    if (t->hit == NULL) return lw_fail_memory(reading->error, "the design", (size_t)problem->m);
    while (status == LW_OK && t->observation >= 0 && t->parameter >= 0 && t->coefficient >= 0) {
        status = lw_input_next(&t->input, &batch);
        if (status != LW_OK || batch.rows == 0) break;
        status = add_batch(t, &batch);
    }
    if (status != LW_OK) return status;
    problem->n = lw_ids_count(problem->parameters);
    if (!lw_input_faulty(&t->input) && lw_triplets_count(t->triplets) == 0)
        lw_input_refuse_empty(&t->input, "one coefficient at least");
    bool whole = !lw_input_faulty(&t->input);
    status = lw_read_matrix(&t->input, t->triplets, problem->observations, t->observation, &problem->design,
                            &problem->repeated_added);
    problem->low_kept = reading->options->keep_low;
    if (status == LW_OK && whole) lw_refuse_without_equation(reading, t->hit);
    return status;
}

lw_status lw_read_design(lw_reading *reading, const char *path)
{
    table t = {0};
    lw_status status = lw_input_open(reading, path, &t.input);
    if (status != LW_OK) return status;
    t.observation = lw_input_require(&t.input, "observation", HEADER);
    t.parameter = lw_input_require(&t.input, "parameter", HEADER);
    t.coefficient = lw_input_require(&t.input, "coefficient", HEADER);
    status = lw_triplets_new(reading->options->keep_low, reading->watch, &t.triplets, reading->error);
    if (status == LW_OK) status = read_rows(&t);
    lw_status closed = lw_input_close(&t.input);
    lw_triplets_free(t.triplets);
    lw_free(t.hit);
    return status != LW_OK ? status : closed;
}
