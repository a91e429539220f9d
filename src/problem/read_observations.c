/* SPDX-License-Identifier: GPL-3.0-or-later */
/* observations.csv: observation, value [, sigma] [, group] and columns that are carried through. */
#include "problem/carried.h"
#include "problem/growing.h"
#include "problem/read.h"

#include "core/memory.h"

#include <math.h>

#define HEADER "observation,value[,sigma][,group]"

static const char *const known[] = {"observation", "value", "sigma", "group", NULL};

typedef struct table {
    lw_input input;
    int observation, value, sigma, group;
    lw_numbers values, sigmas;
    lw_integers groups;
    lw_carrier carrier;
} table;

static lw_status add_sigma(table *t, int64_t row, const lw_field *field)
{
    lw_reading *reading = t->input.reading;
    lw_decimal sigma = lw_decimal_of((double)NAN); /* blank: the diagonal of the covariance must give it */
    if (field->length > 0 || !reading->covariance_given)
        (void)lw_input_number(&t->input, row, t->sigma, field, LW_POSITIVE, &sigma);
    return lw_numbers_add(&t->sigmas, sigma, reading->error);
}

static lw_status add_row(table *t, int64_t row, const lw_field *fields)
{
    lw_reading *reading = t->input.reading;
    lw_decimal value;
    (void)lw_input_id(&t->input, row, t->observation, fields + t->observation);
    (void)lw_input_number(&t->input, row, t->value, fields + t->value, LW_ANY_NUMBER, &value);
    lw_status status = lw_numbers_add(&t->values, value, reading->error);
    if (status == LW_OK && t->sigma >= 0) status = add_sigma(t, row, fields + t->sigma);
    if (status == LW_OK && t->group >= 0) {
        int64_t number;
        int added;
        status = lw_ids_add(reading->problem->group_names, fields[t->group].text, fields[t->group].length,
                            &number, &added, reading->error);
        if (status == LW_OK) status = lw_integers_add(&t->groups, (int32_t)number, reading->error);
    }
    return status == LW_OK ? lw_carrier_add(&t->carrier, fields, reading->error) : status;
}

static lw_status add_batch(table *t, const lw_csv_batch *batch)
{
    lw_reading *reading = t->input.reading;
    int64_t number[LW_CSV_BATCH], next = lw_ids_count(reading->problem->observations);
    lw_status status = lw_ids_add_batch(reading->problem->observations, batch->fields + t->observation,
                                        batch->rows, batch->columns, number, reading->error);
    for (int r = 0; r < batch->rows && status == LW_OK; r++) {
        const lw_field *fields = batch->fields + (int64_t)r * batch->columns;
        int64_t row = batch->first_row + r;
        if (number[r] == next) {
            next++;
            status = add_row(t, row, fields);
            continue;
        }
        char shown[LW_SHOWN];
        lw_input_refuse(&t->input, row, t->observation, "every observation once", "observation %s again",
                        lw_show(fields + t->observation, shown));
    }
    return status;
}

static lw_status finish(table *t)
{
    lw_problem *problem = t->input.reading->problem;
    lw_error *error = t->input.reading->error;
    problem->m = lw_ids_count(problem->observations);
    lw_status status = lw_numbers_take(&t->values, &problem->value, &problem->value_low, error);
    if (status == LW_OK && t->sigma >= 0)
        status = lw_numbers_take(&t->sigmas, &problem->sigma, &problem->sigma_low, error);
    if (status == LW_OK && t->group >= 0) status = lw_integers_take(&t->groups, &problem->group, error);
    lw_carrier_take(&t->carrier, &problem->observation_carried);
    return status;
}

static lw_status read_rows(table *t)
{
    lw_reading *reading = t->input.reading;
    lw_csv_batch batch;
    lw_status status = lw_carrier_start(&t->input, known, &t->carrier);
    if (status == LW_OK && t->group >= 0)
        status = lw_ids_new(0, &reading->problem->group_names, reading->error);
    while (status == LW_OK && t->observation >= 0 && t->value >= 0) {
        status = lw_input_next(&t->input, &batch);
        if (status != LW_OK || batch.rows == 0) break;
        status = add_batch(t, &batch);
    }
    if (status == LW_OK && !lw_input_faulty(&t->input) && lw_ids_count(reading->problem->observations) == 0)
        lw_input_refuse_empty(&t->input, "one observation at least");
    return status == LW_OK ? finish(t) : status;
}

lw_status lw_read_observations(lw_reading *reading, const char *path)
{
    table t = {0};
    lw_status status = lw_input_open(reading, path, &t.input);
    if (status != LW_OK) return status;
    t.observation = lw_input_require(&t.input, "observation", HEADER);
    t.value = lw_input_require(&t.input, "value", HEADER);
    t.sigma = t.input.csv != NULL ? lw_csv_find(t.input.csv, "sigma") : -1;
    t.group = t.input.csv != NULL ? lw_csv_find(t.input.csv, "group") : -1;
    reading->sigma_column = t.sigma;
    reading->observations = t.input.csv;
    status = read_rows(&t);
    reading->observations_whole = status == LW_OK && !lw_input_faulty(&t.input);
    lw_status closed = lw_input_close(&t.input);
    lw_numbers_clear(&t.values);
    lw_numbers_clear(&t.sigmas);
    lw_integers_clear(&t.groups);
    lw_carrier_clear(&t.carrier);
    return status != LW_OK ? status : closed;
}

void lw_refuse_without_equation(lw_reading *reading, const bool *hit)
{
    lw_input input = {.reading = reading, .csv = reading->observations, .before = reading->error->faults};
    if (!reading->observations_whole) return;
    int c = lw_csv_find(reading->observations, "observation"), told = 0;
    for (int64_t i = 0; i < reading->problem->m && told < LW_MOST_FAULTS; i++) {
        if (hit[i]) continue;
        char shown[LW_SHOWN];
        lw_input_refuse(&input, i, c, "one coefficient at least in the design",
                        "observation %s with no equation",
                        lw_show_id(reading->problem->observations, i, shown));
        told++;
    }
}
