/* SPDX-License-Identifier: GPL-3.0-or-later */
/* covariance.csv: observation_a, observation_b, covariance; each pair once, a diagonal stands for sigma. */
#include "problem/read.h"

#include "core/memory.h"

#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#define HEADER "observation_a,observation_b,covariance"
#define SAME_SIGMA 1e-9 /* sigma and the root of the diagonal agree to this, relatively */

typedef struct table {
    lw_input input;
    int a, b, covariance;
    lw_covariance_entry *entry;
    int64_t count, room;
} table;

static lw_status make_room(table *t, int more)
{
    if (t->count + more <= t->room) return LW_OK;
    int64_t room = 2 * t->room + LW_CSV_BATCH;
    lw_covariance_entry *moved = lw_resize(t->entry, (size_t)room, sizeof *moved);
    if (moved == NULL)
        return lw_fail_memory(t->input.reading->error, "covariances", (size_t)room * sizeof *moved);
    t->entry = moved;
    t->room = room;
    return LW_OK;
}

static bool known(table *t, int64_t row, int c, const lw_field *field, int64_t number)
{
    char shown[LW_SHOWN];
    if (!lw_input_id(&t->input, row, c, field)) return false;
    if (number < 0 && t->input.reading->observations_whole)
        lw_input_refuse(&t->input, row, c, "an observation of the observations file",
                        "the id %s, which is not there", lw_show(field, shown));
    return number >= 0;
}

/* A diagonal that says another sigma than the observations file. */
static void compare_sigma(table *t, const lw_covariance_entry *entry, const lw_field *field)
{
    lw_reading *reading = t->input.reading;
    const double *sigma = reading->problem->sigma;
    if (sigma == NULL || !reading->observations_whole || isnan(sigma[entry->a])) return;
    double root = sqrt(entry->value.high);
    if (fabs(root - sigma[entry->a]) <= SAME_SIGMA * sigma[entry->a]) return;
    lw_place place = {0, 0};
    char shown[LW_SHOWN], number[LW_DOUBLE_TEXT], expected[400];
    (void)lw_csv_locate(reading->observations, entry->a, reading->sigma_column, &place);
    (void)lw_double_write(sigma[entry->a], number);
    (void)snprintf(expected, sizeof expected, "the square of the sigma %s at %.300s:%" PRId64 ":%" PRId64,
                   number, lw_csv_path(reading->observations), place.line, place.column);
    lw_input_refuse(&t->input, entry->row, t->covariance, expected, "the variance %s", lw_show(field, shown));
}

static lw_status add_batch(table *t, const lw_csv_batch *batch)
{
    lw_ids *ids = t->input.reading->problem->observations;
    int64_t a[LW_CSV_BATCH], b[LW_CSV_BATCH];
    lw_status status = make_room(t, batch->rows);
    if (status != LW_OK) return status;
    lw_ids_find_batch(ids, batch->fields + t->a, batch->rows, batch->columns, a);
    lw_ids_find_batch(ids, batch->fields + t->b, batch->rows, batch->columns, b);
    for (int r = 0; r < batch->rows; r++) {
        const lw_field *fields = batch->fields + (int64_t)r * batch->columns;
        const lw_field *number = fields + t->covariance;
        lw_covariance_entry entry = {(int32_t)a[r], (int32_t)b[r], batch->first_row + r, {0.0, 0.0}};
        bool good = known(t, entry.row, t->a, fields + t->a, a[r]);
        good &= known(t, entry.row, t->b, fields + t->b, b[r]);
        lw_demand demand = good && a[r] == b[r] ? LW_POSITIVE : LW_ANY_NUMBER;
        good &= lw_input_number(&t->input, entry.row, t->covariance, number, demand, &entry.value);
        if (!good) continue;
        if (a[r] == b[r]) compare_sigma(t, &entry, number);
        t->entry[t->count++] = entry;
    }
    return LW_OK;
}

static int32_t lesser(const lw_covariance_entry *e)
{
    return e->a < e->b ? e->a : e->b;
}

static int32_t greater(const lw_covariance_entry *e)
{
    return e->a < e->b ? e->b : e->a;
}

static int compare_pairs(const void *x, const void *y)
{
    const lw_covariance_entry *p = x, *q = y;
    if (lesser(p) != lesser(q)) return lesser(p) < lesser(q) ? -1 : 1;
    if (greater(p) != greater(q)) return greater(p) < greater(q) ? -1 : 1;
    return p->row < q->row ? -1 : p->row > q->row;
}

static int compare_rows(const void *x, const void *y)
{
    const int64_t *p = x, *q = y;
    return *p < *q ? -1 : *p > *q;
}

/* Sorts by pair, so that the order of the file does not matter, and refuses a pair that came before. */
static void refuse_repeated(table *t)
{
    int64_t later[LW_MOST_FAULTS];
    int shown = 0;
    if (t->count > 1) qsort(t->entry, (size_t)t->count, sizeof *t->entry, compare_pairs);
    for (int64_t k = 1; k < t->count && shown < LW_MOST_FAULTS; k++) {
        const lw_covariance_entry *e = t->entry + k;
        if (lesser(e) == lesser(e - 1) && greater(e) == greater(e - 1)) later[shown++] = e->row;
    }
    qsort(later, (size_t)shown, sizeof *later, compare_rows);
    for (int k = 0; k < shown; k++)
        lw_input_refuse(&t->input, later[k], t->a, "each pair once", "a pair that an earlier row has");
}

static lw_status read_rows(table *t)
{
    lw_csv_batch batch;
    lw_status status = LW_OK;
    while (status == LW_OK && t->a >= 0 && t->b >= 0 && t->covariance >= 0) {
        status = lw_input_next(&t->input, &batch);
        if (status != LW_OK || batch.rows == 0) break;
        status = add_batch(t, &batch);
    }
    if (status != LW_OK) return status;
    if (!lw_input_faulty(&t->input) && t->count == 0)
        lw_input_refuse_empty(&t->input, "one covariance at least");
    refuse_repeated(t);
    if (lw_input_faulty(&t->input) || !t->input.reading->observations_whole) return LW_OK;
    return lw_covariance_make(&t->input, t->entry, t->count, t->covariance);
}

lw_status lw_read_covariance(lw_reading *reading, const char *path)
{
    table t = {0};
    lw_status status = lw_input_open(reading, path, &t.input);
    if (status != LW_OK) return status;
    t.a = lw_input_require(&t.input, "observation_a", HEADER);
    t.b = lw_input_require(&t.input, "observation_b", HEADER);
    t.covariance = lw_input_require(&t.input, "covariance", HEADER);
    status = read_rows(&t);
    lw_status closed = lw_input_close(&t.input);
    lw_free(t.entry);
    return status != LW_OK ? status : closed;
}
