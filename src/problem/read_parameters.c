/* SPDX-License-Identifier: GPL-3.0-or-later */
/* parameters.csv: parameter and whatever is known of it beforehand; further columns are carried through. */
#include "problem/carried.h"
#include "problem/growing.h"
#include "problem/read.h"

#include "core/memory.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define HEADER                                                                                               \
    "parameter[,prior][,prior_sigma][,lower][,upper][,fixed][,damp_weight][,datum][,point][,axis][,region][" \
    ",x][,y][,z]"

/* Numbers come first. */
enum {
    PRIOR,
    PRIOR_SIGMA,
    LOWER,
    UPPER,
    FIXED,
    DAMP_WEIGHT,
    X,
    Y,
    Z,
    NUMBERS,
    DATUM = NUMBERS,
    POINT,
    AXIS,
    REGION,
    PARAMETER,
    KNOWN
};

static const char *const known[] = {"prior",       "prior_sigma", "lower",  "upper",     "fixed",
                                    "damp_weight", "x",           "y",      "z",         "datum",
                                    "point",       "axis",        "region", "parameter", NULL};

/* What a blank field stands for, and what a number must be. */
static const struct {
    double blank;
    lw_demand demand;
    bool no_low;
} rule[NUMBERS] = {
    [PRIOR] = {0.0, LW_ANY_NUMBER, false},
    [PRIOR_SIGMA] = {(double)NAN, LW_POSITIVE, false},
    [LOWER] = {-(double)INFINITY, LW_ANY_NUMBER, true},
    [UPPER] = {(double)INFINITY, LW_ANY_NUMBER, true},
    [FIXED] = {(double)NAN, LW_ANY_NUMBER, false},
    [DAMP_WEIGHT] = {(double)NAN, LW_NOT_NEGATIVE, true},
    [X] = {(double)NAN, LW_ANY_NUMBER, true},
    [Y] = {(double)NAN, LW_ANY_NUMBER, true},
    [Z] = {(double)NAN, LW_ANY_NUMBER, true},
};

static const char *const axes[] = {"", "east", "north", "up", "x", "y", "z"}; /* in the order of lw_axis */

typedef struct table {
    lw_input input;
    int column[KNOWN];
    lw_numbers number[NUMBERS];
    lw_integers label[KNOWN]; /* DATUM, POINT, AXIS, REGION */
    lw_carrier carrier;
} table;

static bool is(const lw_field *field, const char *word)
{
    return field->length == strlen(word) && memcmp(field->text, word, field->length) == 0;
}

static lw_status add_numbers(table *t, int64_t row, const lw_field *fields, lw_decimal value[NUMBERS])
{
    for (int k = 0; k < NUMBERS; k++) {
        value[k] = lw_decimal_of(rule[k].blank);
        int c = t->column[k];
        if (c < 0) continue;
        if (fields[c].length > 0)
            (void)lw_input_number(&t->input, row, c, fields + c, rule[k].demand, value + k);
        lw_status status = lw_numbers_add(&t->number[k], value[k], t->input.reading->error);
        if (status != LW_OK) return status;
    }
    return LW_OK;
}

/* What numbers of one row must not say together. */
static void cross_check(table *t, int64_t row, const lw_field *fields, const lw_decimal value[NUMBERS])
{
    char shown[LW_SHOWN], expected[LW_SHOWN + 40];
    if (value[LOWER].high > value[UPPER].high) {
        (void)snprintf(expected, sizeof expected, "at least the lower bound %s",
                       lw_show(fields + t->column[LOWER], shown));
        lw_input_refuse(&t->input, row, t->column[UPPER], expected, "the upper bound %s",
                        lw_show(fields + t->column[UPPER], shown));
    }
    if (!isnan(value[FIXED].high) && !isnan(value[PRIOR_SIGMA].high))
        lw_input_refuse(&t->input, row, t->column[FIXED],
                        "either fixed or prior_sigma: a held value is exact and takes no weighted prior",
                        "%s beside a prior_sigma", lw_show(fields + t->column[FIXED], shown));
}

static lw_status add_name(table *t, int k, lw_ids *names, const lw_field *fields)
{
    int64_t number = -1;
    int added;
    const lw_field *field = fields + t->column[k];
    lw_status status = LW_OK;
    if (field->length > 0)
        status = lw_ids_add(names, field->text, field->length, &number, &added, t->input.reading->error);
    return status == LW_OK ? lw_integers_add(&t->label[k], (int32_t)number, t->input.reading->error) : status;
}

static lw_status add_word(table *t, int k, int64_t row, const lw_field *fields)
{
    const lw_field *field = fields + t->column[k];
    char shown[LW_SHOWN];
    int32_t number = -1;
    if (k == DATUM) {
        if (is(field, "yes")) number = 1;
        if (is(field, "no") || field->length == 0) number = 0;
    } else {
        for (int a = 0; a <= LW_AXIS_Z; a++)
            if (is(field, axes[a])) number = a;
    }
    if (number < 0) {
        lw_input_refuse(&t->input, row, t->column[k], k == DATUM ? "yes or no" : "east, north, up, x, y or z",
                        "%s", lw_show(field, shown));
        number = 0;
    }
    return lw_integers_add(&t->label[k], number, t->input.reading->error);
}

static lw_status add_row(table *t, int64_t row, const lw_field *fields)
{
    lw_problem *problem = t->input.reading->problem;
    lw_decimal value[NUMBERS];
    (void)lw_input_id(&t->input, row, t->column[PARAMETER], fields + t->column[PARAMETER]);
    lw_status status = add_numbers(t, row, fields, value);
    if (status == LW_OK) cross_check(t, row, fields, value);
    if (status == LW_OK && t->column[DATUM] >= 0) status = add_word(t, DATUM, row, fields);
    if (status == LW_OK && t->column[AXIS] >= 0) status = add_word(t, AXIS, row, fields);
    if (status == LW_OK && t->column[POINT] >= 0) status = add_name(t, POINT, problem->point_names, fields);
    if (status == LW_OK && t->column[REGION] >= 0)
        status = add_name(t, REGION, problem->region_names, fields);
    return status == LW_OK ? lw_carrier_add(&t->carrier, fields, t->input.reading->error) : status;
}

static lw_status add_batch(table *t, const lw_csv_batch *batch)
{
    lw_reading *reading = t->input.reading;
    int c = t->column[PARAMETER];
    int64_t number[LW_CSV_BATCH], next = lw_ids_count(reading->problem->parameters);
    lw_status status = lw_ids_add_batch(reading->problem->parameters, batch->fields + c, batch->rows,
                                        batch->columns, number, reading->error);
    for (int r = 0; r < batch->rows && status == LW_OK; r++) {
        const lw_field *fields = batch->fields + (int64_t)r * batch->columns;
        if (number[r] == next) {
            next++;
            status = add_row(t, batch->first_row + r, fields);
            continue;
        }
        char shown[LW_SHOWN];
        lw_input_refuse(&t->input, batch->first_row + r, c, "every parameter once", "parameter %s again",
                        lw_show(fields + c, shown));
    }
    return status;
}

/* damp_weight where blank: 1, or 0 beside a prior_sigma; NULL when neither column is there. */
static lw_status finish_weights(table *t)
{
    lw_problem *problem = t->input.reading->problem;
    lw_error *error = t->input.reading->error;
    bool given = t->column[DAMP_WEIGHT] >= 0;
    if (!given && problem->prior_sigma == NULL) return LW_OK;
    lw_status status = LW_OK;
    if (given) status = lw_numbers_take(&t->number[DAMP_WEIGHT], &problem->damp_weight, NULL, error);
    if (!given) problem->damp_weight = LW_NEW_ARRAY(double, problem->n);
    if (problem->damp_weight == NULL) return lw_fail_memory(error, "damping weights", (size_t)problem->n * 8);
    for (int64_t j = 0; j < problem->n && status == LW_OK; j++)
        if (!given || isnan(problem->damp_weight[j]))
            problem->damp_weight[j] =
                problem->prior_sigma != NULL && !isnan(problem->prior_sigma[j]) ? 0.0 : 1.0;
    return status;
}

static lw_status finish_fixed(table *t)
{
    lw_problem *problem = t->input.reading->problem;
    lw_error *error = t->input.reading->error;
    if (t->column[FIXED] < 0) return LW_OK;
    lw_status status = lw_numbers_take(&t->number[FIXED], &problem->fixed_value, &problem->fixed_low, error);
    if (status != LW_OK) return status;
    problem->fixed = LW_NEW_ARRAY(bool, problem->n);
    if (problem->fixed == NULL) return lw_fail_memory(error, "held parameters", (size_t)problem->n);
    for (int64_t j = 0; j < problem->n; j++) {
        problem->fixed[j] = !isnan(problem->fixed_value[j]);
        if (!problem->fixed[j]) problem->fixed_value[j] = problem->fixed_low[j] = 0.0;
    }
    return LW_OK;
}

static lw_status take_bytes(table *t, int k, int8_t **out)
{
    int64_t n = t->label[k].count;
    *out = LW_NEW_ARRAY(int8_t, n);
    if (*out == NULL) return lw_fail_memory(t->input.reading->error, "parameters", (size_t)n);
    for (int64_t j = 0; j < n; j++) (*out)[j] = (int8_t)t->label[k].value[j];
    return LW_OK;
}

static lw_status finish_labels(table *t)
{
    lw_problem *problem = t->input.reading->problem;
    lw_error *error = t->input.reading->error;
    lw_status status = LW_OK;
    bool some = false; /* a datum column with no yes in it says nothing */
    for (int64_t j = 0; j < t->label[DATUM].count; j++) some |= t->label[DATUM].value[j] == 1;
    if (some) status = take_bytes(t, DATUM, &problem->datum);
    if (status == LW_OK && t->column[AXIS] >= 0) status = take_bytes(t, AXIS, &problem->axis);
    if (status == LW_OK && t->column[POINT] >= 0)
        status = lw_integers_take(&t->label[POINT], &problem->point, error);
    if (status == LW_OK && t->column[REGION] >= 0)
        status = lw_integers_take(&t->label[REGION], &problem->region, error);
    return status;
}

static lw_status finish(table *t)
{
    lw_problem *p = t->input.reading->problem;
    struct {
        double **high, **low;
    } to[NUMBERS] = {
        [PRIOR] = {&p->prior, &p->prior_low}, [PRIOR_SIGMA] = {&p->prior_sigma, &p->prior_sigma_low},
        [LOWER] = {&p->lower, NULL},          [UPPER] = {&p->upper, NULL},
        [X] = {&p->coordinate[0], NULL},      [Y] = {&p->coordinate[1], NULL},
        [Z] = {&p->coordinate[2], NULL}};
    lw_status status = LW_OK;
    p->n = lw_ids_count(p->parameters);
    for (int k = 0; k < NUMBERS && status == LW_OK; k++)
        if (t->column[k] >= 0 && to[k].high != NULL)
            status = lw_numbers_take(&t->number[k], to[k].high, to[k].low, t->input.reading->error);
    if (status == LW_OK) status = finish_weights(t);
    if (status == LW_OK) status = finish_fixed(t);
    if (status == LW_OK) status = finish_labels(t);
    lw_carrier_take(&t->carrier, &p->parameter_carried);
    return status;
}

static lw_status read_rows(table *t)
{
    lw_reading *reading = t->input.reading;
    lw_problem *problem = reading->problem;
    lw_csv_batch batch;
    lw_status status = lw_carrier_start(&t->input, known, &t->carrier);
    if (status == LW_OK && t->column[POINT] >= 0)
        status = lw_ids_new(0, &problem->point_names, reading->error);
    if (status == LW_OK && t->column[REGION] >= 0)
        status = lw_ids_new(0, &problem->region_names, reading->error);
    while (status == LW_OK && t->column[PARAMETER] >= 0) {
        status = lw_input_next(&t->input, &batch);
        if (status != LW_OK || batch.rows == 0) break;
        status = add_batch(t, &batch);
    }
    if (status == LW_OK && !lw_input_faulty(&t->input) && lw_ids_count(problem->parameters) == 0)
        lw_input_refuse_empty(&t->input, "one parameter at least");
    return status == LW_OK ? finish(t) : status;
}

lw_status lw_read_parameters(lw_reading *reading, const char *path)
{
    table t = {0};
    lw_status status = lw_input_open(reading, path, &t.input);
    if (status != LW_OK) return status;
    for (int k = 0; k < KNOWN; k++) {
        t.column[k] = t.input.csv != NULL ? lw_csv_find(t.input.csv, known[k]) : -1;
        if (k < NUMBERS) t.number[k].no_low = rule[k].no_low;
    }
    (void)lw_input_require(&t.input, "parameter", HEADER);
    status = read_rows(&t);
    reading->parameters_given = true;
    reading->parameters_whole = status == LW_OK && !lw_input_faulty(&t.input);
    lw_status closed = lw_input_close(&t.input);
    for (int k = 0; k < KNOWN; k++) {
        if (k < NUMBERS) lw_numbers_clear(&t.number[k]);
        lw_integers_clear(&t.label[k]);
    }
    lw_carrier_clear(&t.carrier);
    return status != LW_OK ? status : closed;
}
