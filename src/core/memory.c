/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/memory.h"

#include <fcntl.h>
#include <malloc.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/resource.h>
#include <unistd.h>

#define ALIGNMENT ((size_t)64)
#define ALIGNED_FROM ((size_t)1 << 20)
#define HUGE_PAGE ((size_t)2 << 20)
#define HUGE_FROM ((size_t)4 << 20)

/* The one global of this layer, set by tests only and before any thread starts. */
static struct {
    lw_memory_gate *call;
    void *state;
} gate;

void lw_memory_set_gate(lw_memory_gate *call, void *state)
{
    gate.call = call;
    gate.state = state;
}

static bool refused(void)
{
    return gate.call != NULL && gate.call(gate.state);
}

/* Every block can be given to realloc and free of the C library. */
static void *take(size_t bytes)
{
    if (bytes < ALIGNED_FROM) return malloc(bytes > 0 ? bytes : 1);
    if (bytes > PTRDIFF_MAX - ALIGNMENT) return NULL;
    return aligned_alloc(ALIGNMENT, (bytes + ALIGNMENT - 1) & ~(ALIGNMENT - 1));
}

void *lw_alloc(size_t count, size_t size)
{
    size_t bytes;
    if (__builtin_mul_overflow(count, size, &bytes) || refused()) return NULL;
    return take(bytes);
}

void *lw_alloc_zero(size_t count, size_t size)
{
    size_t bytes;
    if (__builtin_mul_overflow(count, size, &bytes) || refused()) return NULL;
    if (bytes < ALIGNED_FROM) return calloc(bytes > 0 ? bytes : 1, 1);
    void *block = take(bytes);
    if (block != NULL) memset(block, 0, bytes);
    return block;
}

/* realloc moves large mapped blocks by mremap, without a copy and with their offset in the page, so an
 * aligned block stays aligned; only one that grew out of the heap may have to be copied once more. */
void *lw_resize(void *block, size_t count, size_t size)
{
    if (block == NULL) return lw_alloc(count, size);
    size_t bytes;
    if (__builtin_mul_overflow(count, size, &bytes) || refused()) return NULL;
    if (bytes > PTRDIFF_MAX - ALIGNMENT) return NULL;
    if (bytes >= ALIGNED_FROM && (uintptr_t)block % ALIGNMENT != 0) {
        void *aligned = take(bytes);
        if (aligned == NULL) return NULL;
        size_t held = malloc_usable_size(block);
        memcpy(aligned, block, held < bytes ? held : bytes);
        free(block);
        return aligned;
    }
    void *moved = realloc(block, bytes > 0 ? bytes : 1);
    if (moved == NULL || bytes < ALIGNED_FROM) return moved;
    if ((uintptr_t)moved % ALIGNMENT != 0) {
        void *aligned = take(bytes);
        if (aligned == NULL) return moved; /* alignment is worth less than the data */
        memcpy(aligned, moved, bytes);
        free(moved);
        return aligned;
    }
    return moved;
}

/* Huge pages are asked for where an array is read in scattered order again and again. Elsewhere clearing them costs more than they
 * save: a 200 000-unknown network took 2.5 s of processor time without, 3.1 to 3.8 s with them. Only advice: a refusal changes
 * nothing. */
void *lw_alloc_scattered(size_t count, size_t size)
{
    void *block = lw_alloc(count, size);
    size_t bytes = count * size;
    if (block == NULL || bytes < HUGE_FROM) return block;
    uintptr_t from = ((uintptr_t)block + HUGE_PAGE - 1) & ~(uintptr_t)(HUGE_PAGE - 1);
    uintptr_t to = ((uintptr_t)block + bytes) & ~(uintptr_t)(HUGE_PAGE - 1);
    if (to > from) (void)madvise((char *)block + (from - (uintptr_t)block), to - from, MADV_HUGEPAGE);
    return block;
}

void lw_free(void *block)
{
    free(block);
}

char *lw_copy_text(const char *text)
{
    size_t bytes = strlen(text) + 1;
    char *copy = lw_alloc(bytes, 1);
    if (copy != NULL) memcpy(copy, text, bytes);
    return copy;
}

void *lw_hook_malloc(size_t bytes)
{
    return refused() ? NULL : malloc(bytes > 0 ? bytes : 1);
}

void *lw_hook_calloc(size_t count, size_t bytes)
{
    return refused() ? NULL : calloc(count > 0 ? count : 1, bytes > 0 ? bytes : 1);
}

void *lw_hook_realloc(void *block, size_t bytes)
{
    return refused() ? NULL : realloc(block, bytes > 0 ? bytes : 1);
}

void lw_hook_free(void *block)
{
    free(block);
}

void lw_memory_tune(void)
{
    (void)mallopt(M_MMAP_THRESHOLD, 256 << 20);
    (void)mallopt(M_TRIM_THRESHOLD, 1 << 30);
    (void)mallopt(M_TOP_PAD, 1 << 20);
}

void lw_memory_trim(void)
{
    (void)malloc_trim((size_t)1 << 20);
}

int64_t lw_memory_peak(void)
{
    struct rusage usage;
    if (getrusage(RUSAGE_SELF, &usage) != 0) return 0;
    return lw_bytes(usage.ru_maxrss, 1024);
}

int64_t lw_memory_available(void)
{
    char text[4096];
    int fd = open("/proc/meminfo", O_RDONLY | O_CLOEXEC);
    if (fd < 0) return 0;
    ssize_t length = read(fd, text, sizeof text - 1);
    close(fd);
    if (length <= 0) return 0;
    text[length] = '\0';
    const char *label = "MemAvailable:", *found = strstr(text, label);
    if (found == NULL) return 0;
    long long kibibytes = strtoll(found + strlen(label), NULL, 10);
    return kibibytes > 0 ? lw_bytes(kibibytes, 1024) : 0;
}

int64_t lw_bytes(int64_t a, int64_t b)
{
    int64_t product;
    return __builtin_mul_overflow(a, b, &product) ? INT64_MAX : product;
}
