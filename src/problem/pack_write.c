/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/pack.h"

#include "core/memory.h"
#include "problem/pack_file.h"
#include "problem/read.h"
#include "table/digest.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define WRITTEN_AT_ONCE ((size_t)16 << 20)

typedef struct pack {
    lw_pack_section table[LW_PACK_MOST_SECTIONS];
    const void *data[LW_PACK_MOST_SECTIONS];
    void *own[LW_PACK_MOST_SECTIONS]; /* data made for the pack, freed with it */
    int sections, owned;
    lw_pack_header header;
    lw_pack_sizes sizes;
    bool no_memory;
} pack;

static void put(pack *p, const char *name, const char *part, const void *data, size_t bytes)
{
    lw_pack_section *s = p->table + p->sections;
    (void)snprintf(s->name, sizeof s->name, "%s%s", name, part);
    s->bytes = bytes;
    p->data[p->sections++] = data;
}

static void *own(pack *p, size_t bytes)
{
    void *block = lw_alloc_zero(bytes, 1);
    if (block == NULL) p->no_memory = true;
    if (block != NULL) p->own[p->owned++] = block;
    return block;
}

static void put_arrays(pack *p, const lw_problem *problem)
{
    p->sizes =
        (lw_pack_sizes){problem->m, problem->n, problem->conditions != NULL ? problem->conditions->rows : 0,
                        problem->repeated_added};
    put(p, "sizes", "", &p->sizes, sizeof p->sizes);
    for (int k = 0; k < lw_pack_array_count; k++) {
        const lw_pack_array *a = lw_pack_arrays + k;
        const void *data = lw_pack_pointer(problem, a->offset);
        if (data != NULL)
            put(p, a->name, "", data, (size_t)lw_pack_count(a->length, &p->sizes) * lw_pack_element(a->rule));
    }
}

static void put_ids(pack *p, const lw_problem *problem)
{
    for (int k = 0; k < LW_PACK_IDS; k++) {
        const lw_ids *ids = lw_pack_pointer(problem, lw_pack_ids[k].offset);
        if (ids == NULL) continue;
        int64_t bytes;
        const char *text = lw_ids_text(ids, &bytes);
        put(p, lw_pack_ids[k].name, "", text, (size_t)bytes);
    }
}

static void put_matrices(pack *p, const lw_problem *problem)
{
    for (int k = 0; k < LW_PACK_MATRICES; k++) {
        const lw_sparse *A = lw_pack_pointer(problem, lw_pack_matrices[k].offset);
        if (A == NULL) continue;
        const char *name = lw_pack_matrices[k].name;
        size_t nonzeros = (size_t)lw_sparse_nonzeros(A);
        int64_t *shape = own(p, 2 * sizeof(int64_t));
        if (shape == NULL) return;
        shape[0] = A->rows;
        shape[1] = A->columns;
        put(p, name, ".shape", shape, 2 * sizeof(int64_t));
        put(p, name, ".start", A->start, ((size_t)A->columns + 1) * sizeof(int64_t));
        put(p, name, ".index", A->index, nonzeros * sizeof(int32_t));
        put(p, name, ".value", A->value, nonzeros * sizeof(double));
        if (A->low != NULL) put(p, name, ".low", A->low, nonzeros * sizeof(double));
    }
}

static void put_covariance(pack *p, const lw_problem *problem)
{
    const lw_covariance *V = problem->covariance;
    if (V == NULL) return;
    size_t blocks = (size_t)V->blocks + 1, values = (size_t)V->value_start[V->blocks];
    put(p, "blocks", ".start", V->start, blocks * sizeof(int64_t));
    put(p, "blocks", ".value_start", V->value_start, blocks * sizeof(int64_t));
    put(p, "blocks", ".member", V->member, (size_t)V->start[V->blocks] * sizeof(int32_t));
    put(p, "blocks", ".value", V->value, values * sizeof(double));
    put(p, "blocks", ".low", V->low, values * sizeof(double));
    put(p, "blocks", ".block_of", V->block_of, (size_t)problem->m * sizeof(int32_t));
}

/* `count` texts with their NUL bytes one after another. */
static void put_texts(pack *p, const char *name, const char *part, char *const *text, int count)
{
    size_t bytes = 0;
    for (int k = 0; k < count; k++) bytes += strlen(text[k]) + 1;
    char *all = own(p, bytes);
    if (all == NULL) return;
    put(p, name, part, all, bytes);
    for (int k = 0; k < count; k++) {
        size_t length = strlen(text[k]) + 1;
        memcpy(all, text[k], length);
        all += length;
    }
}

static void put_carried(pack *p, const lw_problem *problem)
{
    for (int k = 0; k < LW_PACK_CARRIED; k++) {
        const lw_carried *c = lw_pack_field(problem, lw_pack_carried[k].offset);
        const char *name = lw_pack_carried[k].name;
        if (c->columns == 0) continue;
        int64_t fields = c->rows * c->columns, used = 0;
        for (int64_t f = 0; f < fields; f++) {
            if (c->field[f] < 0) continue;
            int64_t end = c->field[f] + (int64_t)strlen(c->text + c->field[f]) + 1;
            if (end > used) used = end;
        }
        put_texts(p, name, ".name", c->name, c->columns);
        put(p, name, ".text", c->text, (size_t)used);
        put(p, name, ".field", c->field, (size_t)fields * sizeof(int64_t));
    }
}

static void put_inputs(pack *p, const lw_problem *problem)
{
    size_t count = (size_t)problem->input_count;
    char **path = own(p, count * sizeof(char *));
    int64_t *bytes = own(p, count * sizeof(int64_t));
    char *sha256 = own(p, count * 64);
    char *const units[] = {problem->value_unit, problem->parameter_unit};
    if (path == NULL || bytes == NULL || sha256 == NULL) return;
    for (size_t k = 0; k < count; k++) {
        path[k] = problem->inputs[k].path;
        bytes[k] = problem->inputs[k].bytes;
        memcpy(sha256 + 64 * k, problem->inputs[k].sha256, 64);
    }
    put_texts(p, "inputs", ".path", path, problem->input_count);
    put(p, "inputs", ".bytes", bytes, count * sizeof(int64_t));
    put(p, "inputs", ".sha256", sha256, count * 64);
    put_texts(p, "units", "", units, 2);
}

static uint64_t round_up(uint64_t offset)
{
    return (offset + LW_PACK_ALIGNMENT - 1) / LW_PACK_ALIGNMENT * LW_PACK_ALIGNMENT;
}

static void place_sections(pack *p)
{
    uint64_t offset = sizeof(lw_pack_header) + (uint64_t)p->sections * sizeof(lw_pack_section);
    for (int k = 0; k < p->sections; k++) {
        p->table[k].offset = round_up(offset);
        p->table[k].hash = lw_hash(p->data[k], p->table[k].bytes);
        offset = p->table[k].offset + p->table[k].bytes;
    }
    memcpy(p->header.magic, LW_PACK_MAGIC, sizeof p->header.magic);
    p->header.version = LW_PACK_VERSION;
    p->header.order = LW_PACK_ORDER;
    p->header.bytes = offset;
    p->header.sections = (uint64_t)p->sections;
    p->header.hash = lw_pack_hash(&p->header, p->table);
}

static bool write_bytes(int fd, const void *data, size_t bytes, const lw_watch *watch)
{
    for (const char *at = data; bytes > 0 && !lw_watch_cancelled(watch);) {
        ssize_t written = write(fd, at, bytes < WRITTEN_AT_ONCE ? bytes : WRITTEN_AT_ONCE);
        if (written < 0 && errno == EINTR) continue;
        if (written < 0) return false;
        at += written;
        bytes -= (size_t)written;
    }
    return true;
}

static bool write_all(int fd, const pack *p, const lw_watch *watch)
{
    static const char zeros[LW_PACK_ALIGNMENT];
    uint64_t offset = sizeof p->header + p->header.sections * sizeof *p->table;
    if (!write_bytes(fd, &p->header, sizeof p->header, watch)) return false;
    if (!write_bytes(fd, p->table, (size_t)p->header.sections * sizeof *p->table, watch)) return false;
    for (int k = 0; k < p->sections; k++) {
        const lw_pack_section *s = p->table + k;
        if (!write_bytes(fd, zeros, (size_t)(s->offset - offset), watch)) return false;
        if (!write_bytes(fd, p->data[k], (size_t)s->bytes, watch)) return false;
        offset = s->offset + s->bytes;
        lw_watch_tick(watch, "packing", (double)offset, (double)p->header.bytes, "");
    }
    return fsync(fd) == 0;
}

/* Writes to `part` and renames it to `path`; nothing is left behind on failure. */
static lw_status save(const pack *p, const char *part, const char *path, const lw_watch *watch,
                      lw_error *error)
{
    int fd = open(part, O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, 0666);
    if (fd < 0) return lw_fail(error, LW_SYSTEM, "cannot write %s: %s", part, strerror(errno));
    int reason = write_all(fd, p, watch) ? 0 : errno;
    if (close(fd) != 0 && reason == 0) reason = errno;
    bool cancelled = lw_watch_cancelled(watch);
    if (reason == 0 && !cancelled && rename(part, path) != 0) reason = errno;
    if (reason == 0 && !cancelled) return LW_OK;
    (void)unlink(part);
    if (reason != 0) return lw_fail(error, LW_SYSTEM, "cannot write %s: %s", path, strerror(reason));
    return lw_fail(error, LW_INTERRUPTED, "interrupted while %s was written", path);
}

static lw_status save_in(const pack *p, const char *folder, const lw_watch *watch, lw_error *error)
{
    char name[64];
    (void)snprintf(name, sizeof name, LW_PACK_NAME ".%ld.part", (long)getpid());
    char *path = lw_join_path(folder, LW_PACK_NAME), *part = lw_join_path(folder, name);
    lw_status status;
    bool made = mkdir(folder, 0777) == 0;
    if (path == NULL || part == NULL)
        status = lw_fail_memory(error, "a path", strlen(folder));
    else if (!made && errno != EEXIST)
        status = lw_fail(error, LW_SYSTEM, "cannot make the folder %s: %s", folder, strerror(errno));
    else
        status = save(p, part, path, watch, error);
    if (status != LW_OK && made) (void)rmdir(folder);
    lw_free(path);
    lw_free(part);
    return status;
}

lw_status lw_pack_write(const lw_problem *problem, const char *folder, const lw_watch *watch, lw_error *error)
{
    if (!problem->low_kept)
        return lw_fail(error, LW_BAD_USAGE,
                       "a pack keeps the numbers as they were written: read the problem with its low parts");
    pack *p = LW_NEW(pack);
    if (p == NULL) return lw_fail_memory(error, "a pack", sizeof(pack));
    put_arrays(p, problem);
    put_ids(p, problem);
    put_matrices(p, problem);
    put_covariance(p, problem);
    put_carried(p, problem);
    put_inputs(p, problem);
    lw_status status;
    if (p->no_memory) {
        status = lw_fail_memory(error, "a pack", sizeof(pack));
    } else {
        place_sections(p);
        status = save_in(p, folder[0] != '\0' ? folder : ".", watch, error);
    }
    for (int k = 0; k < p->owned; k++) lw_free(p->own[k]);
    lw_free(p);
    return status;
}
