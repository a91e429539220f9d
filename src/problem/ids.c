/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Open addressing with linear probing at a load of at most one half. A slot is half a cache line and holds
 * the first 23 bytes of its id, so that a look-up of an ordinary id touches one line; that line is asked for
 * a whole batch ahead. */
#include "problem/ids.h"

#include "core/memory.h"
#include "table/digest.h"

#include <string.h>

#define INLINE_BYTES 23
#define LONG_ID 255
#define FIRST_SLOTS 64

typedef struct slot {
    uint32_t tag;    /* low half of the hash; its low bits are the home of the slot */
    uint32_t number; /* 1 + number of the id, 0: empty */
    uint8_t length;  /* LONG_ID: compare with the name */
    char key[INLINE_BYTES];
} slot;

struct lw_ids {
    slot *slots;
    uint64_t mask;
    int64_t count, room;
    int64_t *start; /* count + 1: where a name begins in text */
    char *text;
    int64_t text_room;
};

static slot *new_slots(uint64_t count)
{
    slot *slots = lw_alloc_scattered((size_t)count, sizeof(slot));
    if (slots != NULL) memset(slots, 0, (size_t)count * sizeof(slot));
    return slots;
}

lw_status lw_ids_new(int64_t expected, lw_ids **out, lw_error *error)
{
    *out = NULL;
    uint64_t slots = FIRST_SLOTS;
    while (expected > 0 && slots < 2 * (uint64_t)expected && slots < (uint64_t)1 << 32) slots *= 2;
    lw_ids *ids = LW_NEW(lw_ids);
    if (ids == NULL) return lw_fail_memory(error, "an id table", sizeof(lw_ids));
    ids->mask = slots - 1;
    ids->room = expected > 16 ? expected : 16;
    ids->text_room = 256;
    ids->slots = new_slots(slots);
    ids->start = LW_NEW_ARRAY(int64_t, ids->room + 1);
    ids->text = LW_NEW_ARRAY(char, ids->text_room);
    if (ids->slots == NULL || ids->start == NULL || ids->text == NULL) {
        lw_ids_free(ids);
        return lw_fail_memory(error, "an id table", slots * sizeof(slot));
    }
    ids->start[0] = 0;
    *out = ids;
    return LW_OK;
}

void lw_ids_free(lw_ids *ids)
{
    if (ids == NULL) return;
    lw_free(ids->slots);
    lw_free(ids->start);
    lw_free(ids->text);
    lw_free(ids);
}

int64_t lw_ids_count(const lw_ids *ids)
{
    return ids->count;
}

const char *lw_ids_name(const lw_ids *ids, int64_t i)
{
    return ids->text + ids->start[i];
}

const char *lw_ids_text(const lw_ids *ids, int64_t *bytes)
{
    *bytes = ids->start[ids->count];
    return ids->text;
}

static inline uint32_t tag_of(const char *text, size_t length)
{
    return (uint32_t)lw_hash(text, length);
}

static inline bool same(const lw_ids *ids, const slot *s, uint32_t tag, const char *text, size_t length)
{
    if (s->tag != tag) return false;
    if (length <= INLINE_BYTES) return s->length == length && memcmp(s->key, text, length) == 0;
    if (s->length != LONG_ID) return false;
    const int64_t *start = ids->start + (s->number - 1);
    return (size_t)(start[1] - start[0]) == length + 1 && memcmp(ids->text + start[0], text, length) == 0;
}

/* The slot of the id, or the empty slot where it belongs. */
static inline slot *probe(const lw_ids *ids, uint32_t tag, const char *text, size_t length)
{
    for (uint64_t at = tag & ids->mask;; at = (at + 1) & ids->mask) {
        slot *s = ids->slots + at;
        if (s->number == 0 || same(ids, s, tag, text, length)) return s;
    }
}

static lw_status grow_slots(lw_ids *ids, int64_t more, lw_error *error)
{
    uint64_t need = 2 * (uint64_t)(ids->count + more), slots = ids->mask + 1;
    if (need <= slots || slots > UINT32_MAX) return LW_OK;
    while (slots < need && slots <= UINT32_MAX) slots *= 2;
    slot *fresh = new_slots(slots);
    if (fresh == NULL) return lw_fail_memory(error, "an id table", slots * sizeof(slot));
    for (uint64_t i = 0; i <= ids->mask; i++) {
        const slot *s = ids->slots + i;
        if (s->number == 0) continue;
        uint64_t at = s->tag & (slots - 1);
        while (fresh[at].number != 0) at = (at + 1) & (slots - 1);
        fresh[at] = *s;
    }
    lw_free(ids->slots);
    ids->slots = fresh;
    ids->mask = slots - 1;
    return LW_OK;
}

static lw_status grow_names(lw_ids *ids, size_t length, lw_error *error)
{
    if (ids->count >= INT32_MAX - 1)
        return lw_fail(error, LW_BAD_INPUT, "more than %d different ids", INT32_MAX - 1);
    if (ids->count == ids->room) {
        int64_t *start = lw_resize(ids->start, (size_t)(2 * ids->room + 1), sizeof(int64_t));
        if (start == NULL)
            return lw_fail_memory(error, "an id table", (size_t)ids->room * 2 * sizeof(int64_t));
        ids->start = start;
        ids->room *= 2;
    }
    int64_t need = ids->start[ids->count] + (int64_t)length + 1;
    if (need > ids->text_room) {
        int64_t room = 2 * ids->text_room > need ? 2 * ids->text_room : need;
        char *text = lw_resize(ids->text, (size_t)room, 1);
        if (text == NULL) return lw_fail_memory(error, "the names of ids", (size_t)room);
        ids->text = text;
        ids->text_room = room;
    }
    return LW_OK;
}

/* There is a free slot. */
static lw_status add(lw_ids *ids, uint32_t tag, const char *text, size_t length, int64_t *number, int *added,
                     lw_error *error)
{
    slot *s = probe(ids, tag, text, length);
    *added = s->number == 0;
    if (*added) {
        lw_status status = grow_names(ids, length, error);
        if (status != LW_OK) return status;
        char *name = ids->text + ids->start[ids->count];
        if (length > 0) memcpy(name, text, length);
        name[length] = '\0';
        ids->start[ids->count + 1] = ids->start[ids->count] + (int64_t)length + 1;
        s->tag = tag;
        s->number = (uint32_t)++ids->count;
        s->length = length <= INLINE_BYTES ? (uint8_t)length : LONG_ID;
        if (length > 0) memcpy(s->key, text, length <= INLINE_BYTES ? length : INLINE_BYTES);
    }
    *number = (int64_t)s->number - 1;
    return LW_OK;
}

int64_t lw_ids_find(const lw_ids *ids, const char *text, size_t length)
{
    return (int64_t)probe(ids, tag_of(text, length), text, length)->number - 1;
}

lw_status lw_ids_add(lw_ids *ids, const char *text, size_t length, int64_t *number, int *added,
                     lw_error *error)
{
    *number = -1;
    *added = 0;
    lw_status status = grow_slots(ids, 1, error);
    return status != LW_OK ? status : add(ids, tag_of(text, length), text, length, number, added, error);
}

/* Hashes of a batch, with the line of every home slot asked for. */
static void hash_batch(const lw_ids *ids, const lw_field *fields, int count, int stride, uint32_t *tag)
{
    for (int k = 0; k < count; k++) {
        const lw_field *field = fields + (int64_t)k * stride;
        tag[k] = tag_of(field->text, field->length);
        __builtin_prefetch(ids->slots + (tag[k] & ids->mask));
    }
}

void lw_ids_find_batch(const lw_ids *ids, const lw_field *fields, int count, int stride, int64_t *number)
{
    uint32_t tag[LW_CSV_BATCH];
    hash_batch(ids, fields, count, stride, tag);
    for (int k = 0; k < count; k++) {
        const lw_field *field = fields + (int64_t)k * stride;
        number[k] = (int64_t)probe(ids, tag[k], field->text, field->length)->number - 1;
    }
}

lw_status lw_ids_add_batch(lw_ids *ids, const lw_field *fields, int count, int stride, int64_t *number,
                           lw_error *error)
{
    uint32_t tag[LW_CSV_BATCH];
    int added;
    lw_status status = grow_slots(ids, count, error);
    if (status != LW_OK) return status;
    hash_batch(ids, fields, count, stride, tag);
    for (int k = 0; k < count && status == LW_OK; k++) {
        const lw_field *field = fields + (int64_t)k * stride;
        status = add(ids, tag[k], field->text, field->length, number + k, &added, error);
    }
    return status;
}
