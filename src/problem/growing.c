/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/growing.h"

#include "core/memory.h"

#define FIRST_ROOM 64

static lw_status resize(double **block, int64_t count, lw_error *error)
{
    double *moved = lw_resize(*block, (size_t)count, sizeof(double));
    if (moved == NULL) return lw_fail_memory(error, "a column of numbers", (size_t)count * sizeof(double));
    *block = moved;
    return LW_OK;
}

lw_status lw_numbers_add(lw_numbers *numbers, lw_decimal value, lw_error *error)
{
    if (numbers->count == numbers->room) {
        int64_t room = numbers->room > 0 ? 2 * numbers->room : FIRST_ROOM;
        lw_status status = resize(&numbers->high, room, error);
        if (status == LW_OK && !numbers->no_low) status = resize(&numbers->low, room, error);
        if (status != LW_OK) return status;
        numbers->room = room;
    }
    numbers->high[numbers->count] = value.high;
    if (!numbers->no_low) numbers->low[numbers->count] = value.low;
    numbers->count++;
    return LW_OK;
}

lw_status lw_integers_add(lw_integers *integers, int32_t value, lw_error *error)
{
    if (integers->count == integers->room) {
        int64_t room = integers->room > 0 ? 2 * integers->room : FIRST_ROOM;
        int32_t *moved = lw_resize(integers->value, (size_t)room, sizeof(int32_t));
        if (moved == NULL) return lw_fail_memory(error, "a column of labels", (size_t)room * sizeof(int32_t));
        integers->value = moved;
        integers->room = room;
    }
    integers->value[integers->count++] = value;
    return LW_OK;
}

lw_status lw_numbers_take(lw_numbers *numbers, double **high, double **low, lw_error *error)
{
    lw_status status = resize(&numbers->high, numbers->count, error);
    if (status == LW_OK && low != NULL) status = resize(&numbers->low, numbers->count, error);
    if (status != LW_OK) return status;
    *high = numbers->high;
    numbers->high = NULL;
    if (low != NULL) {
        *low = numbers->low;
        numbers->low = NULL;
    }
    lw_numbers_clear(numbers);
    return LW_OK;
}

lw_status lw_integers_take(lw_integers *integers, int32_t **value, lw_error *error)
{
    int32_t *moved = lw_resize(integers->value, (size_t)integers->count, sizeof(int32_t));
    if (moved == NULL)
        return lw_fail_memory(error, "a column of labels", (size_t)integers->count * sizeof(int32_t));
    *value = moved;
    *integers = (lw_integers){0};
    return LW_OK;
}

void lw_numbers_clear(lw_numbers *numbers)
{
    lw_free(numbers->high);
    lw_free(numbers->low);
    *numbers = (lw_numbers){.no_low = numbers->no_low};
}

void lw_integers_clear(lw_integers *integers)
{
    lw_free(integers->value);
    *integers = (lw_integers){0};
}
