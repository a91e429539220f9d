/* SPDX-License-Identifier: GPL-3.0-or-later */
/* design.mtx: a Matrix Market file whose row and column numbers, from 1, are the ids. */
#include "problem/read.h"

#include "core/memory.h"
#include "table/market.h"

#include <inttypes.h>
#include <stdio.h>
#include <string.h>

typedef struct table {
    lw_reading *reading;
    const char *path;
    lw_market market;
    int32_t *row, *column; /* numbers of the ids of the file's rows and columns, -1 where there is none */
    bool *hit;
    int before;
} table;

static bool enough(const table *t)
{
    return t->reading->error->faults - t->before >= LW_MOST_FAULTS;
}

/* First line that is neither comment nor blank: there the sizes are. */
static int64_t size_line(const char *path)
{
    FILE *file = fopen(path, "rb");
    if (file == NULL) return 1;
    int64_t line = 1;
    int byte = getc(file);
    while (byte == '%' || byte == '\n' || byte == '\r') {
        while (byte != EOF && byte != '\n') byte = getc(file);
        byte = getc(file);
        line++;
    }
    (void)fclose(file);
    return line;
}

static int number_text(int64_t k, char text[24])
{
    return snprintf(text, 24, "%" PRId64, k + 1);
}

static lw_status map_rows(table *t)
{
    lw_problem *problem = t->reading->problem;
    if (t->reading->observations_whole && t->market.rows != problem->m) {
        lw_reading_fault(t->reading,
                         "%s:%" PRId64 ":1: found %" PRId64 " rows, expected %" PRId64
                         ", one for each observation",
                         t->path, size_line(t->path), t->market.rows, problem->m);
        return LW_OK;
    }
    lw_status status = lw_watch_budget(t->reading->watch, lw_bytes(t->market.rows, sizeof(int32_t)),
                                       "the rows of the design", "", t->reading->error);
    if (status != LW_OK) return status;
    t->row = LW_NEW_ARRAY(int32_t, t->market.rows);
    if (t->row == NULL) return lw_fail_memory(t->reading->error, "the design", (size_t)t->market.rows * 4);
    char text[24];
    for (int64_t k = 0; k < t->market.rows; k++) {
        int length = number_text(k, text);
        t->row[k] = (int32_t)lw_ids_find(problem->observations, text, (size_t)length);
    }
    return LW_OK;
}

static lw_status map_columns(table *t)
{
    lw_reading *reading = t->reading;
    lw_ids *parameters = reading->problem->parameters;
    lw_status status =
        lw_watch_budget(reading->watch, lw_bytes(t->market.columns, reading->parameters_given ? 4 : 100),
                        "the columns of the design", "", reading->error);
    if (status != LW_OK) return status;
    t->column = LW_NEW_ARRAY(int32_t, t->market.columns);
    if (t->column == NULL) return lw_fail_memory(reading->error, "the design", (size_t)t->market.columns * 4);
    for (int64_t k = 0; k < t->market.columns && status == LW_OK; k++) {
        char text[24];
        size_t length = (size_t)number_text(k, text);
        int64_t number;
        int added;
        if (reading->parameters_given)
            number = lw_ids_find(parameters, text, length);
        else
            status = lw_ids_add(parameters, text, length, &number, &added, reading->error);
        t->column[k] = (int32_t)number;
    }
    return status;
}

static void refuse_unknown(table *t, int64_t e)
{
    const lw_market *market = &t->market;
    lw_reading *reading = t->reading;
    if (t->row[market->row[e]] < 0 && reading->observations_whole && !enough(t))
        lw_reading_fault(reading,
                         "%s:%" PRId64 ":1: found the row %" PRId64 ", expected an observation of the "
                         "observations file",
                         t->path, market->line[e], market->row[e] + 1);
    if (t->column[market->column[e]] < 0 && reading->parameters_whole && !enough(t))
        lw_reading_fault(reading,
                         "%s:%" PRId64 ":1: found the column %" PRId64 ", expected a parameter of the "
                         "parameters file",
                         t->path, market->line[e], market->column[e] + 1);
}

static lw_status fill(table *t, lw_triplets *triplets)
{
    const lw_market *market = &t->market;
    for (int64_t e = 0; e < market->entries; e++) {
        lw_triplet_room room;
        lw_status status = lw_triplets_reserve(triplets, 1, &room, t->reading->error);
        if (status != LW_OK) return status;
        int32_t i = t->row[market->row[e]], j = t->column[market->column[e]];
        if (i < 0 || j < 0) refuse_unknown(t, e);
        if (i >= 0) t->hit[i] = true;
        room.row[0] = i >= 0 && j >= 0 ? i : -1;
        room.column[0] = i >= 0 && j >= 0 ? j : -1;
        room.value[0] = market->value[e];
        if (room.low != NULL) room.low[0] = market->low != NULL ? market->low[e] : 0.0;
    }
    return LW_OK;
}

static lw_status make_matrix(table *t, lw_triplets *triplets)
{
    lw_reading *reading = t->reading;
    lw_problem *problem = reading->problem;
    lw_repeated repeated;
    lw_status status =
        lw_triplets_matrix(triplets, problem->m, problem->n, &problem->design, &repeated, reading->error);
    problem->repeated_added = repeated.count;
    if (status != LW_OK || reading->options->add_repeated) return status;
    for (int k = 0; k < repeated.shown && !enough(t); k++)
        lw_reading_fault(reading,
                         "%s:%" PRId64 ":1: found the pair %s, %s again, expected every "
                         "pair once (--repeated add sums them)",
                         t->path, t->market.line[repeated.later[k]],
                         lw_ids_name(problem->observations, repeated.row[k]),
                         lw_ids_name(problem->parameters, repeated.column[k]));
    return LW_OK;
}

static lw_status build(table *t)
{
    lw_reading *reading = t->reading;
    lw_triplets *triplets = NULL;
    lw_status status = map_rows(t);
    if (status == LW_OK) status = map_columns(t);
    if (status != LW_OK) return status;
    reading->problem->n = lw_ids_count(reading->problem->parameters);
    if (t->row == NULL) return LW_OK;
    t->hit = LW_NEW_ZEROS(bool, reading->problem->m);
    if (t->hit == NULL) return lw_fail_memory(reading->error, "the design", (size_t)reading->problem->m);
    status = lw_triplets_new(reading->options->keep_low, reading->watch, &triplets, reading->error);
    if (status == LW_OK) status = fill(t, triplets);
    bool whole = reading->error->faults == t->before;
    if (status == LW_OK) status = make_matrix(t, triplets);
    reading->problem->low_kept = reading->options->keep_low;
    if (status == LW_OK && whole) lw_refuse_without_equation(reading, t->hit);
    lw_triplets_free(triplets);
    return status;
}

lw_status lw_read_market(lw_reading *reading, const char *path)
{
    table t = {.reading = reading, .path = path, .before = reading->error->faults};
    lw_error own = {0};
    lw_status status = lw_market_read(path, reading->watch, &t.market, &own);
    if (status == LW_BAD_INPUT) {
        reading->faulty = true;
        lw_fail_also(reading->error, LW_BAD_INPUT, "%s", own.text);
        return LW_OK;
    }
    if (status != LW_OK) return lw_fail(reading->error, status, "%s", own.text);
    if (t.market.rows > INT32_MAX || t.market.columns > INT32_MAX)
        lw_reading_fault(reading,
                         "%s:%" PRId64 ":1: found %" PRId64 " rows and %" PRId64
                         " columns, expected at most %d of each",
                         path, size_line(path), t.market.rows, t.market.columns, INT32_MAX);
    else
        status = build(&t);
    if (status == LW_OK) status = lw_input_note(reading, path, t.market.bytes, t.market.sha256);
    lw_market_clear(&t.market);
    lw_free(t.row);
    lw_free(t.column);
    lw_free(t.hit);
    return status;
}
