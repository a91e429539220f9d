/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The file of a pack: mapped, its checksums compared, its sections found. */
#include "problem/pack_source.h"

#include "core/memory.h"
#include "table/digest.h"

#include <errno.h>
#include <fcntl.h>
#include <inttypes.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <unistd.h>

static lw_status map_file(lw_pack_source *s)
{
    struct stat about;
    int fd = open(s->path, O_RDONLY | O_CLOEXEC);
    if (fd < 0) return lw_fail(s->error, LW_SYSTEM, "cannot read %s: %s", s->path, strerror(errno));
    lw_status status = LW_OK;
    void *at = MAP_FAILED;
    if (fstat(fd, &about) != 0)
        status = lw_fail(s->error, LW_SYSTEM, "cannot read %s: %s", s->path, strerror(errno));
    else if (!S_ISREG(about.st_mode) || about.st_size < (off_t)sizeof(lw_pack_header))
        status = lw_fail(s->error, LW_BAD_INPUT, "%s: found %lld bytes, expected a pack of %zu or more",
                         s->path, (long long)about.st_size, sizeof(lw_pack_header));
    if (status == LW_OK) {
        s->length = (size_t)about.st_size;
        at = mmap(NULL, s->length, PROT_READ, MAP_PRIVATE, fd, 0);
        if (at == MAP_FAILED)
            status = lw_fail(s->error, LW_SYSTEM, "cannot map %s: %s", s->path, strerror(errno));
    }
    (void)close(fd);
    if (status != LW_OK) return status;
    s->problem->mapping = at;
    s->problem->mapping_bytes = s->length;
    s->bytes = at;
    return LW_OK;
}

lw_status lw_pack_refuse(const lw_pack_source *s, const char *found, const char *expected)
{
    return lw_fail(s->error, LW_BAD_INPUT, "%s: found %s, expected %s", s->path, found, expected);
}

static lw_status check_header(lw_pack_source *s)
{
    const lw_pack_header *header = (const lw_pack_header *)s->bytes;
    if (memcmp(header->magic, LW_PACK_MAGIC, sizeof header->magic) != 0)
        return lw_pack_refuse(s, "another kind of file", "a pack");
    if (header->order != LW_PACK_ORDER)
        return lw_pack_refuse(s, "a pack of a machine with another byte order",
                              "one made on a machine of this kind");
    if (header->version != LW_PACK_VERSION)
        return lw_fail(s->error, LW_BAD_INPUT, "%s: found a pack of version %" PRIu32 ", expected version %d",
                       s->path, header->version, LW_PACK_VERSION);
    if (header->bytes != s->length)
        return lw_fail(s->error, LW_BAD_INPUT,
                       "%s: found %zu bytes, expected the %" PRIu64 " that the pack was written with",
                       s->path, s->length, header->bytes);
    uint64_t room = (s->length - sizeof *header) / sizeof(lw_pack_section);
    if (header->sections > LW_PACK_MOST_SECTIONS || header->sections > room)
        return lw_pack_refuse(s, "a damaged table of sections", "the pack as it was written");
    s->sections = header->sections;
    s->table = (const lw_pack_section *)(header + 1);
    if (lw_pack_hash(header, s->table) != header->hash)
        return lw_pack_refuse(s, "a damaged header (its checksum differs)", "the pack as it was written");
    return LW_OK;
}

/* The pages of a section that was looked at leave the memory of the process; who reads it has them back. */
static void release_section(const lw_pack_source *s, const lw_pack_section *section)
{
    uint64_t page = (uint64_t)sysconf(_SC_PAGESIZE), from = (section->offset + page - 1) / page * page,
             to = (section->offset + section->bytes) / page * page;
    if (to > from) (void)madvise((void *)(uintptr_t)(s->bytes + from), to - from, MADV_DONTNEED);
}

static lw_status check_sections(const lw_pack_source *s, const lw_watch *watch)
{
    for (uint64_t k = 0; k < s->sections; k++) {
        const lw_pack_section *section = s->table + k;
        if (memchr(section->name, '\0', sizeof section->name) == NULL ||
            section->offset % LW_PACK_ALIGNMENT != 0 || section->offset > s->length ||
            section->bytes > s->length - section->offset)
            return lw_pack_refuse(s, "a section outside the file", "the pack as it was written");
        if (lw_watch_cancelled(watch))
            return lw_fail(s->error, LW_INTERRUPTED, "interrupted while %s was read", s->path);
        if (lw_hash(s->bytes + section->offset, section->bytes) != section->hash)
            return lw_fail(s->error, LW_BAD_INPUT,
                           "%s: found a damaged section '%s' (its checksum differs), expected "
                           "the pack as it was written",
                           s->path, section->name);
        release_section(s, section);
        lw_watch_tick(watch, "reading", (double)(section->offset + section->bytes), (double)s->length, "");
    }
    return LW_OK;
}

/* The section NAME+PART, or NULL. */
const lw_pack_section *lw_pack_get(const lw_pack_source *s, const char *name, const char *part)
{
    size_t length = strlen(name);
    for (uint64_t k = 0; k < s->sections; k++)
        if (strncmp(s->table[k].name, name, length) == 0 && strcmp(s->table[k].name + length, part) == 0)
            return s->table + k;
    return NULL;
}

const void *lw_pack_data(const lw_pack_source *s, const lw_pack_section *section)
{
    return s->bytes + section->offset;
}

lw_status lw_pack_refuse_length(const lw_pack_source *s, const char *name, const char *part)
{
    return lw_fail(s->error, LW_BAD_INPUT, "%s: found no section '%s%s' of the right length, expected one",
                   s->path, name, part);
}

/* A copy of `count` elements of a section to the pointer at `out`; NULL and LW_OK when an optional one is
 * absent. */
lw_status lw_pack_copy(const lw_pack_source *s, const char *name, const char *part, int64_t count,
                       size_t size, bool optional, void *out)
{
    const lw_pack_section *section = lw_pack_get(s, name, part);
    void *block = NULL;
    memcpy(out, &block, sizeof block);
    if (section == NULL && optional) return LW_OK;
    if (section == NULL || count < 0 || section->bytes / size != (uint64_t)count ||
        section->bytes % size != 0)
        return lw_pack_refuse_length(s, name, part);
    block = lw_alloc((size_t)count, size);
    if (block == NULL) return lw_fail_memory(s->error, "a problem", (size_t)section->bytes);
    if (count > 0) memcpy(block, lw_pack_data(s, section), (size_t)section->bytes);
    memcpy(out, &block, sizeof block);
    return LW_OK;
}

/* Section of exactly count elements, in the mapping. */
const void *lw_pack_borrow(const lw_pack_source *s, const char *name, const char *part, uint64_t count,
                           size_t size)
{
    const lw_pack_section *section = lw_pack_get(s, name, part);
    if (section == NULL || section->bytes % size != 0 || section->bytes / size != count) return NULL;
    return lw_pack_data(s, section);
}

lw_status lw_pack_open(lw_pack_source *s, const lw_watch *watch)
{
    lw_status status = map_file(s);
    if (status == LW_OK) status = check_header(s);
    return status == LW_OK ? check_sections(s, watch) : status;
}
