/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/carried.h"

#include "core/memory.h"

#include <string.h>

static bool among(const char *name, const char *const *list)
{
    for (; list != NULL && *list != NULL; list++)
        if (strcmp(name, *list) == 0) return true;
    return false;
}

static void refuse_reserved(lw_input *input, int c)
{
    const char *path = lw_csv_path(input->csv), *name = lw_csv_name(input->csv, c);
    lw_place place = lw_header_place(path, c);
    char shown[LW_SHOWN];
    lw_field field = {name, (uint32_t)strlen(name), false};
    lw_reading_fault(input->reading,
                     "%s:%lld:%lld: found a column %s, expected another name: an output column has it", path,
                     (long long)place.line, (long long)place.column, lw_show(&field, shown));
}

lw_status lw_carrier_start(lw_input *input, const char *const *known, lw_carrier *out)
{
    *out = (lw_carrier){0};
    int columns = input->csv != NULL ? lw_csv_columns(input->csv) : 0;
    out->column = LW_NEW_ARRAY(int, columns);
    out->kept.name = LW_NEW_ZEROS(char *, columns);
    if (out->column == NULL || out->kept.name == NULL)
        return lw_fail_memory(input->reading->error, "carried columns", (size_t)columns * sizeof(char *));
    for (int c = 0; c < columns; c++) {
        const char *name = lw_csv_name(input->csv, c);
        if (among(name, known)) continue;
        if (among(name, input->reading->options->reserved)) {
            refuse_reserved(input, c);
            continue;
        }
        char *copy = lw_copy_text(name);
        if (copy == NULL) return lw_fail_memory(input->reading->error, "carried columns", strlen(name));
        out->column[out->kept.columns] = c;
        out->kept.name[out->kept.columns++] = copy;
    }
    return LW_OK;
}

static lw_status make_room(lw_carrier *carrier, int64_t text, lw_error *error)
{
    lw_carried *kept = &carrier->kept;
    if (kept->rows == carrier->row_room) {
        int64_t room = carrier->row_room > 0 ? 2 * carrier->row_room : 64;
        int64_t *field = lw_resize(kept->field, (size_t)(room * kept->columns), sizeof(int64_t));
        if (field == NULL)
            return lw_fail_memory(error, "carried columns", (size_t)(room * kept->columns) * 8);
        kept->field = field;
        carrier->row_room = room;
    }
    if (carrier->used + text > carrier->text_room) {
        int64_t room = 2 * (carrier->used + text) + 256;
        char *moved = lw_resize(kept->text, (size_t)room, 1);
        if (moved == NULL) return lw_fail_memory(error, "carried columns", (size_t)room);
        kept->text = moved;
        carrier->text_room = room;
    }
    return LW_OK;
}

lw_status lw_carrier_add(lw_carrier *carrier, const lw_field *row, lw_error *error)
{
    lw_carried *kept = &carrier->kept;
    if (kept->columns == 0) {
        kept->rows++;
        return LW_OK;
    }
    int64_t text = 0;
    for (int k = 0; k < kept->columns; k++) text += (int64_t)row[carrier->column[k]].length + 1;
    lw_status status = make_room(carrier, text, error);
    if (status != LW_OK) return status;
    for (int k = 0; k < kept->columns; k++) {
        const lw_field *field = row + carrier->column[k];
        kept->field[kept->rows * kept->columns + k] = field->length > 0 ? carrier->used : -1;
        if (field->length == 0) continue;
        memcpy(kept->text + carrier->used, field->text, field->length);
        carrier->used += field->length;
        kept->text[carrier->used++] = '\0';
    }
    kept->rows++;
    return LW_OK;
}

void lw_carrier_take(lw_carrier *carrier, lw_carried *out)
{
    *out = carrier->kept;
    carrier->kept = (lw_carried){0};
    lw_carrier_clear(carrier);
}

void lw_carrier_clear(lw_carrier *carrier)
{
    for (int k = 0; k < carrier->kept.columns; k++) lw_free(carrier->kept.name[k]);
    lw_free(carrier->kept.name);
    lw_free(carrier->kept.text);
    lw_free(carrier->kept.field);
    lw_free(carrier->column);
    *carrier = (lw_carrier){0};
}
